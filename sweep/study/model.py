"""A study as frozen records, validated and in SI. All quantities stand in one flat mapping from dotted path to number."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from sweep.base.errors import Fault, SweepError
from sweep.study.settings import (
    BatchTimeSettings,
    FailureSettings,
    MapSettings,
    OptimumSettings,
    Plan,
    RangesSettings,
    RiskSettings,
    SensitivitySettings,
    WindowSettings,
)

FAILURE = frozenset(("mtsr", "tmr_ad", "td24", "mtt", "criticality_class"))  # responses that need a cooling failure

HOTTEST = 1500.0  # K; the model's range ends here
LATEST = 1e12  # s; no batch is longer, and a feed of a millisecond can still be told from none


@dataclass(frozen=True)
class Species:
    """heat_capacity: a, b, c, d of a + bT + cT^2 + dT^3 (J/mol/K), None where not given."""

    name: str
    role: str | None
    heat_capacity: tuple[float, float, float, float] | None


@dataclass(frozen=True)
class Reaction:
    """left, right: coefficients as written; orders: forward order in each species; valid: range of temperature (K)."""

    name: str
    equation: str
    purpose: str
    reversible: bool
    left: Mapping[str, float]
    right: Mapping[str, float]
    orders: Mapping[str, float]
    source: str | None = None
    valid: tuple[float, float] | None = None

    @property
    def stoichiometry(self) -> dict[str, float]:
        """Moles made of each species per mole of reaction as written."""
        return {s: self.right.get(s, 0.0) - self.left.get(s, 0.0) for s in {**self.left, **self.right}}


@dataclass(frozen=True)
class Charge:
    """Which species are charged by concentration, which by amount, and which fills the rest of the volume."""

    concentrations: tuple[str, ...]
    amounts: tuple[str, ...]
    balance: str | None


@dataclass(frozen=True)
class Feed:
    """species fed; equivalents: species -> the species it is counted against."""

    name: str
    species: tuple[str, ...]
    equivalents: Mapping[str, str]


@dataclass(frozen=True)
class Change:
    """A value given by what it was: how "times" or "plus"; the number stands among the study's values."""

    how: str


@dataclass(frozen=True)
class Condition:
    """A quantity of the batch, above or below a level; path: where the level stands among the study's values.

    quantity: "temperature", "jacket_temperature", "volume", "conversion", "heat_release", "cooling_duty", or "n" (moles) and "c"
    (concentration) of a species.
    """

    quantity: str
    species: str | None
    sense: str
    path: str


@dataclass(frozen=True)
class Event:
    """At a time (s), or when a condition is met, quantities or the kind of cooling change.

    sets: path -> value (SI), kind of cooling, change, or "restored" (a deviation's: what the recipe has there); path: where the event's own
    quantities stand; once: false where it is armed again; deviation: it overrides the recipe's own events; since: where the moment stands
    from which its time is counted ("": the batch's start); name, after: an event with `after` waits for the event of that name to act: its
    condition is armed then, each time; without a condition of its own it acts then.
    """

    time: float | None
    sets: Mapping[str, float | str | Change]
    path: str = ""
    when: Condition | None = None
    once: bool = True
    deviation: bool = False
    since: str = ""
    name: str = ""
    after: str = ""


@dataclass(frozen=True)
class Scenario:
    """A deviation, evaluated beside the recipe. events: on top of the recipe's own; sets: path -> value (SI) or change from the start, of what no
    event can set; feed, edge: the feed at whose "start" or "end" its times begin; worst: the response whose worst moment they begin at;
    asks_failure: a limit names one of its failure figures."""

    name: str
    events: tuple[Event, ...]
    sets: Mapping[str, float | Change]
    feed: str | None = None
    edge: str = "start"
    worst: str | None = None
    asks_failure: bool = False

    @property
    def path(self) -> str:
        """Where its quantities stand among the study's values."""
        return f"scenarios.{self.name}"


@dataclass(frozen=True)
class Target:
    """The species to convert, and the product to make."""

    species: str
    product: str | None


@dataclass(frozen=True)
class Limit:
    """A bound on a response; sense: "at_most" or "at_least"."""

    name: str
    response: str
    sense: str


@dataclass(frozen=True)
class Tolerance:
    """How well the plant holds a variable: distribution "normal" (size: standard deviation) or "uniform" (half-width), SI or of the value."""

    distribution: str
    size: float
    relative: bool


@dataclass(frozen=True)
class Variable:
    """What the engineer may choose: a range (SI) for one or more paths, and how well the plant holds what is chosen."""

    name: str
    sets: tuple[str, ...]
    low: float
    high: float
    levels: int | None
    unit: str
    tolerance: Tolerance | None = None

    @property
    def error(self) -> str:
        """Return the column of its control error: what is held minus what was chosen (SI)."""
        return f"variables.{self.name}.error"


@dataclass(frozen=True)
class Uncertain:
    """What nature chooses: a distribution around the written value `centre` of the path `of`, all SI.

    parameters: sd, low, mode, high; relative_sd (of the mean) or log_sd of a lognormal, whose median `centre` is. relative: written as
    shares of the written value. table: the draws of a "table"; inputs that share a file are drawn row by row.
    """

    name: str
    of: str
    distribution: str
    centre: float
    parameters: Mapping[str, float]
    relative: bool
    table: tuple[float, ...] = ()
    file: str | None = None


@dataclass(frozen=True)
class Correlation:
    """Between two uncertain inputs; kind: "rank" (Spearman), or "linear" on the scale of normal scores."""

    between: tuple[str, str]
    kind: str
    value: float


@dataclass(frozen=True)
class Bound:
    """What a quantity may be (SI): at least, or above, `low`, and below `below`."""

    low: float
    strict: bool
    below: float
    because: str

    def holds(self, value: float) -> bool:
        """Tell whether a value is within."""
        return (value > self.low if self.strict else value >= self.low) and value < self.below

    @property
    def words(self) -> str:
        """What would be right."""
        if self.below < float("inf"):
            return f"between {self.low:g} and {self.below:g}"
        return f"{'above' if self.strict else 'at least'} {self.low:g}"


def unset(path: str) -> str:
    """Return the quantity that an event's path sets ("events.0.set.vessel.U"), or the path itself."""
    return path.partition(".set.")[2] or path


def differs(path: str) -> bool:
    """Tell whether a quantity may differ from point to point: what is of the batch, not of the question or of the method."""
    sections = ("species.", "reactions.", "vessel.", "cooling.", "recipe.", "events.", "scenarios.")
    settings = ("batch_time.longest", "failure.horizon", "failure.mtt", "failure.td24")
    held = path.startswith("variables.") and path.endswith(".error")
    return (path.startswith(sections) or path in settings or held) and not path.endswith(".molar_mass")


@dataclass(frozen=True)
class Study:
    """A study file, understood. values: path -> SI; units: path -> unit as written; bounds: path -> what it may be; warnings: legal but doubtful."""

    name: str
    file: str
    folder: Path
    text: str
    digest: str
    title: str
    seed: int
    species: tuple[Species, ...]
    reactions: tuple[Reaction, ...]
    cooling_kind: str | None
    charge: Charge
    feeds: tuple[Feed, ...]
    events: tuple[Event, ...]
    batch_to_target: bool
    target: Target | None
    limits: tuple[Limit, ...]
    variables: tuple[Variable, ...]
    plan: Plan | None
    window: WindowSettings | None
    batch_time: BatchTimeSettings | None
    failure: FailureSettings | None
    values: Mapping[str, float]
    units: Mapping[str, str]
    dimensions: Mapping[str, str]
    bounds: Mapping[str, Bound]
    asks_failure: bool = False
    warnings: tuple[Fault, ...] = ()
    scenarios: tuple[Scenario, ...] = ()
    uncertain: tuple[Uncertain, ...] = ()
    correlations: tuple[Correlation, ...] = ()
    risk: RiskSettings | None = None
    sensitivity: SensitivitySettings | None = None
    map: MapSettings | None = None
    ranges: RangesSettings | None = None
    optimum: OptimumSettings | None = None

    def without_failure(self) -> "Study":
        """Return this study without scenarios, the figures of a cooling failure and the limits on them, for what does not need them."""
        from dataclasses import replace

        kept = tuple(limit for limit in self.limits if limit.name not in FAILURE and "." not in limit.name)
        return replace(self, failure=None, asks_failure=False, limits=kept, scenarios=())

    def judged(self) -> "Study":
        """Return this study with those scenarios only that a limit names: what a search for where the limits hold has to march."""
        from dataclasses import replace

        named = {limit.name.partition(".")[0] for limit in self.limits if "." in limit.name}
        return replace(self, scenarios=tuple(s for s in self.scenarios if s.name in named))

    def under(self, scenario: Scenario, asks_failure: bool | None = None) -> "Study":
        """Return this study with a scenario's events beside its own, and no scenarios; `asks_failure`: unlike its limits ask."""
        from dataclasses import replace

        asks = scenario.asks_failure if asks_failure is None else asks_failure
        return replace(self, events=(*self.events, *scenario.events), limits=(), scenarios=(), asks_failure=asks)

    def quantity(self, name: str, text: str) -> float:
        """Return a quantity of a variable, an uncertain input or a path in SI; SweepError where the text is none of its dimension."""
        from sweep.base.units import UnitFault
        from sweep.study.amount import converted

        path = self.paths_of(name)[0]
        try:
            return converted(path, text, self.dimensions[path], self.values)
        except UnitFault as error:
            raise SweepError(f"{name}: found {text!r}, expected {error.expected}, because {error.because}") from None

    def paths_of(self, name: str) -> tuple[str, ...]:
        """Return the paths that a variable sets, that of an uncertain input, or the path itself; SweepError with the nearest name for none."""
        for variable in self.variables:
            if variable.name == name:
                return variable.sets
        for one in self.uncertain:
            if one.name == name:
                return (one.of,)
        if name in self.values:
            return (name,)
        import difflib

        known = [*(v.name for v in self.variables), *(one.name for one in self.uncertain), *(path for path in self.values if differs(path))]
        near = difflib.get_close_matches(name, known, 1)
        hint = f"; did you mean {near[0]}?" if near else ""
        raise SweepError(f"{name} is neither a variable, an uncertain input nor a quantity of this study{hint}")
