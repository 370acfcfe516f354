"""What the tests of faults share: the study, and the results of a run that nothing disturbed."""

import time

import pytest

from tests.faults import driver


@pytest.fixture(scope="session")
def study(tmp_path_factory):
    return driver.write_study(tmp_path_factory.mktemp("study"))


@pytest.fixture(scope="session")
def undisturbed(study, tmp_path_factory):
    """Return the folder of a run that nothing disturbed."""
    out = tmp_path_factory.mktemp("undisturbed") / "out"
    begun = time.monotonic()
    status, _, said = driver.run(study, out)
    (out.parent / "seconds").write_text(str(time.monotonic() - begun))
    assert (0, "") == (status, said)
    assert driver.SIZE == driver.rows_computed(out)
    return out
