"""Criticality classes: all orderings."""

import numpy as np
import pytest

from sweep.plant.criticality import CLASSES, classify

TP = 300.0


@pytest.mark.parametrize(
    ("mtsr", "mtt", "td24", "expected"),
    [
        (320.0, 340.0, 360.0, 1),
        (320.0, 360.0, 340.0, 2),
        (340.0, 320.0, 360.0, 3),
        (360.0, 320.0, 340.0, 4),
        (340.0, 360.0, 320.0, 5),
        (360.0, 340.0, 320.0, 5),
    ],
)
def test_all_six_orderings(mtsr, mtt, td24, expected):
    """Stoessel's classes (from memory); 1 to 4 and the first of class 5 also in a transcription of GB/T 42300-2022."""
    found, why = classify(*(np.array([x]) for x in (TP, mtsr, mtt, td24)))
    assert expected == found[0]
    assert [""] == why
    assert expected in CLASSES


@pytest.mark.parametrize(
    ("mtsr", "mtt", "td24", "words"),
    [
        (320.0, 290.0, 360.0, "MTT below the process temperature"),
        (320.0, 360.0, 290.0, "T_D24 below the process temperature"),
        (320.0, 290.0, 280.0, "MTT and T_D24 below"),
        (np.nan, 340.0, 360.0, "MTSR not known"),
        (320.0, np.nan, 360.0, "MTT not known"),
        (320.0, np.nan, np.nan, "MTT, T_D24 not known"),
    ],
)
def test_not_classifiable_says_why(mtsr, mtt, td24, words):
    found, why = classify(*(np.array([x]) for x in (TP, mtsr, mtt, td24)))
    assert np.isnan(found[0])
    assert words in why[0]


@pytest.mark.parametrize(("mtsr", "mtt", "td24", "expected"), [(340, 340, 360, 3), (340, 360, 340, 5), (330, 340, 340, 2), (360, 340, 340, 5)])
def test_equal_temperatures_fall_to_the_worse_class(mtsr, mtt, td24, expected):
    assert expected == classify(*(np.array([float(x)]) for x in (TP, mtsr, mtt, td24)))[0][0]
