"""The question as frozen records: how the space is covered, and the settings of each analysis."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path


@dataclass(frozen=True)
class RiskSettings:
    """draws: how many; sampling: "latin-hypercube", "sobol", "random"; interval: "wilson", "clopper-pearson"; rare: which failures that the
    draws hardly show are sought on purpose ("together", "each", "none"), with how many draws a level."""

    draws: int
    sampling: str
    confidence: float
    interval: str
    rare: str
    rare_draws: int


@dataclass(frozen=True)
class SensitivitySettings:
    """over: "uncertain" or "variables"; trajectories: of the screening; blocks: of the variance shares; draws: for each halved spread."""

    over: str
    trajectories: int
    blocks: int
    draws: int
    confidence: float


@dataclass(frozen=True)
class Assurance:
    """With which probability limits are to hold (None: nominally), judged with how many draws and with which confidence."""

    probability: float | None
    draws: int
    confidence: float


@dataclass(frozen=True)
class MapSettings:
    """The probability that all limits hold, over the window's axes. steps: of each axis; draws: the same at every node."""

    steps: int
    draws: int
    confidence: float


@dataclass(frozen=True)
class RangesSettings:
    """The largest box of acceptable ranges. variables: its sides; points: spread over it in the hunt for a counter-example."""

    variables: tuple[str, ...]
    assurance: Assurance
    points: int


@dataclass(frozen=True)
class Objective:
    """What is made least or largest. kind: "response" (of a column), "margin" (of the limit labelled `name`) or "cost"."""

    name: str
    sense: str
    kind: str
    column: str
    unit: str


@dataclass(frozen=True)
class OptimumSettings:
    """One objective or two. prices: species -> per mol, "vessel_time" -> per s, in `currency`; population, generations: of the search;
    verify: fresh draws that judge the winner."""

    objectives: tuple[Objective, ...]
    variables: tuple[str, ...]
    assurance: Assurance
    verify: int
    population: int
    generations: int
    prices: Mapping[str, float] = field(default_factory=dict)
    currency: str = ""


@dataclass(frozen=True)
class Plan:
    """How the space is covered."""

    kind: str
    points: int | None
    file: Path | None


@dataclass(frozen=True)
class WindowSettings:
    """The two axes of the window, and where the slice lies in the other variables (SI; default: the set-point)."""

    axes: tuple[str, str]
    at: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class BatchTimeSettings:
    """longest: the march's end (s), None: the recipe's batch time."""

    longest: float | None


@dataclass(frozen=True)
class FailureSettings:
    """Cooling failure: horizon (s), whether the wall counts, what feeds do ("stop", "run on"), temperatures from testing (K)."""

    horizon: float
    wall: bool
    td24: float | None
    mtt: float | None
    feeds: str = "stop"
    feeds_stop_after: float = 0.0
