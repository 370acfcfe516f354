"""Criticality classes of cooling failure after Stoessel: the order of four temperatures.

Stoessel, Chem. Eng. Prog. 89 (1993) 68, and Thermal Safety of Chemical Processes, 2nd ed. 2020 (both from memory); the orderings of
classes 1 to 4 and one of class 5 also as transcribed from GB/T 42300-2022.
"""

import numpy as np

from sweep.plant.values import Floats

CLASSES = {
    1: "MTSR < MTT < T_D24: neither the technical limit nor the decomposition is reached",
    2: "MTSR < T_D24 < MTT: the decomposition is not triggered, the technical limit is no barrier",
    3: "MTT < MTSR < T_D24: the technical limit is reached, the decomposition is not triggered",
    4: "MTT < T_D24 < MTSR: the technical limit is reached, the decomposition could be triggered",
    5: "T_D24 lies below MTSR and MTT: the decomposition is triggered before any technical limit holds it",
}


def classify(process: Floats, mtsr: Floats, mtt: Floats, td24: Floats) -> tuple[Floats, list[str]]:
    """Return the class (1 to 5, NaN where not classifiable) and why not, for N sets of temperatures (K).

    process: the highest in normal operation. Equal temperatures fall to the worse class. Outside the scheme: MTT or T_D24 below the process
    temperature.
    """
    process, mtsr, mtt, td24 = np.broadcast_arrays(*(np.asarray(x, dtype=np.float64) for x in (process, mtsr, mtt, td24)))
    with np.errstate(invalid="ignore"):
        below = np.where(mtt < td24, 1.0, 2.0)
        above = np.where(mtsr < td24, 3.0, 4.0)
        found = np.where(mtsr < mtt, np.where(mtsr < td24, below, 5.0), np.where(td24 <= mtt, 5.0, above))
        outside = (mtt < process) | (td24 < process)
    missing = np.isnan(process) | np.isnan(mtsr) | np.isnan(mtt) | np.isnan(td24)
    reasons = [_why(*line) for line in zip(process, mtsr, mtt, td24, strict=True)]
    return np.where(outside | missing, np.nan, found), reasons


def class_sentence(number: int | None, reason: str) -> str:
    """Return what a class means, or why there is none, out of a point's reason."""
    if number is not None:
        return CLASSES[int(number)]
    named = [part for part in reason.split("; ") if part.startswith("criticality_class: ")]
    return named[0].removeprefix("criticality_class: ") if named else "not assessed"


def _why(process: float, mtsr: float, mtt: float, td24: float) -> str:
    """Return why a class cannot be given, or nothing."""
    names = (("MTSR", mtsr), ("MTT", mtt), ("T_D24", td24), ("the process temperature", process))
    missing = [name for name, value in names if np.isnan(value)]
    if missing:
        return f"not classifiable: {', '.join(missing)} not known"
    low = [name for name, value in names[1:3] if value < process]
    return f"not classifiable: {' and '.join(low)} below the process temperature" if low else ""
