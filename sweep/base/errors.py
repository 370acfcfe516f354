"""What can go wrong, as exceptions whose parts a caller can read."""

from dataclasses import dataclass


class SweepError(Exception):
    """The study or the call is wrong."""

    exit_status = 2


class SurroundingsError(SweepError):
    """Disk, lock, damaged store: the surroundings failed, not the study."""

    exit_status = 4


class ForeignResultsError(SweepError):
    """A results folder holds the results of another study."""


def one_line(text: str) -> str:
    """Return a text whose line ends are spaces, so that what stands in a study cannot pass for a line of ours."""
    return " ".join(text.splitlines())


@dataclass(frozen=True)
class Fault:
    """One fault of a study: where, what stands there, what would be right, and why."""

    file: str
    line: int
    key: str
    found: str
    expected: str
    because: str

    def __str__(self) -> str:
        return (
            f"{one_line(self.file)}:{self.line}  {one_line(self.key)}\n"
            f"  found     {one_line(self.found)}\n"
            f"  expected  {one_line(self.expected)}\n"
            f"  because   {one_line(self.because)}"
        )


class StudyError(SweepError):
    """All faults of a study at once."""

    def __init__(self, faults: tuple[Fault, ...]) -> None:
        self.faults = faults
        count = "1 fault" if len(faults) == 1 else f"{len(faults)} faults"
        super().__init__("\n\n".join([*map(str, faults), count]))
