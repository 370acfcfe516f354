"""What is legal and doubtful: warnings, each with its reason."""

from sweep.study.checks import brought
from sweep.study.model import HOTTEST, Charge, Event, Feed, Reaction, Species, Variable
from sweep.study.reader import Reader
from sweep.study.settings import OptimumSettings


def warn_ranges(reader: Reader, reactions: tuple[Reaction, ...], variables: tuple[Variable, ...]) -> None:
    """Warn where constants are used far from where they were found."""
    swept = [(v.low, v.high) for v in variables if "recipe.charge.temperature" in v.sets or "cooling.set_point" in v.sets]
    start = reader.values.get("recipe.charge.temperature")
    if start is None:
        return
    held = [x for path, x in reader.values.items() if path == "cooling.set_point" or path.endswith(".set.cooling.set_point")]
    swept += [(x, x) for x in (start, *held)]
    low, high = min(x for x, _ in swept), max(x for _, x in swept)
    for reaction in reactions:
        path = f"reactions.{reaction.name}"
        at = reader.values.get(f"{path}.rate_constant.at")
        if at is not None and reaction.purpose == "synthesis" and not low - 60.0 <= at <= high + 60.0:
            reader.warn(
                f"{path}.rate_constant.at",
                f"{at:.2f} K",
                f"a temperature near {low:.2f} to {high:.2f} K",
                "its reference temperature lies more than 60 K from what is swept",
            )
        if reaction.valid is not None and reaction.purpose == "synthesis" and not (reaction.valid[0] <= low and high <= reaction.valid[1]):
            reader.warn(
                f"{path}.valid",
                f"{reaction.valid[0]:.2f} to {reaction.valid[1]:.2f} K",
                f"{low:.2f} to {high:.2f} K",
                "temperatures outside its range of validity are swept",
            )


def warn_jacket(reader: Reader, kind: str, reactions: tuple[Reaction, ...], charge: Charge, feeds: tuple[Feed, ...]) -> None:
    """Warn where the jacket at its coldest cannot carry the heat of a feed that reacts as it comes in."""
    values = reader.values
    hold = values.get("cooling.set_point", values.get("recipe.charge.temperature"))
    if kind != "jacket" or hold is None:
        return
    try:
        found = brought(values, charge, feeds)
        area = values.get("vessel.area")
        if area is None:
            bottom = values.get("vessel.area.bottom", 0.0)
            area = bottom + (values["vessel.area.full"] - bottom) * found.fill / values["vessel.area.at_volume"]
        carried = values["vessel.U"] * area * (hold - values["cooling.inlet"])
        for feed in feeds:
            _warn_feed(reader, feed, reactions, found.moles, carried)
    except (KeyError, ZeroDivisionError):
        return


def _warn_feed(reader: Reader, feed: Feed, reactions: tuple[Reaction, ...], moles: dict[str, float], carried: float) -> None:
    """Warn where one feed, reacting as it comes in, gives off more than is carried (W)."""
    values, path = reader.values, f"recipe.feeds.{feed.name}"
    for s in feed.species:
        of = feed.equivalents.get(s)
        n = values[f"{path}.amount.{s}"] if of is None else values[f"{path}.amount.{s}.equivalents"] * moles.get(of, 0.0)
        users = [r for r in reactions if s in r.left and r.purpose == "synthesis"]
        heat = max((-values.get(f"reactions.{r.name}.heat.value", 0.0) / r.left[s] for r in users), default=0.0)
        dosed = n / values[f"{path}.duration"] * heat
        if dosed > carried:
            found, expected = f"{dosed / 1e3:.4g} kW while {s} is dosed", f"at most {carried / 1e3:.4g} kW, U A (set-point - inlet)"
            reader.warn(f"{path}.duration", found, expected, "the jacket cannot carry the dosing heat")


def warn_recipe(reader: Reader, events: tuple[Event, ...], feeds: tuple[Feed, ...], to_target: bool) -> None:
    """Warn where the batch time is shorter than the feeds, and where an event comes too late to happen."""
    values = reader.values
    last = max((values[f"recipe.feeds.{feed.name}.start"] + values[f"recipe.feeds.{feed.name}.duration"] for feed in feeds), default=0.0)
    written = values.get("recipe.batch_time")
    if written is not None and written < last:
        reader.warn("recipe.batch_time", f"{written:g} s", f"at least {last:g} s", "a batch never ends before its last feed does; it ends then")
    end = max(values.get("batch_time.longest", 0.0), last) if to_target else max(written or 0.0, last)
    for event in events:
        if end and event.time is not None and event.time >= end:
            reader.warn(f"{event.path}.time", f"{event.time:g} s", f"a time before {end:g} s", "the batch is over by then")


def warn_optimum(reader: Reader, optimum: OptimumSettings | None, variables: tuple[Variable, ...], to_target: bool) -> None:
    """Warn where the shortest cycle is sought and nothing that is sought over can shorten it."""
    for one in optimum.objectives if optimum is not None else ():
        timed = {path for v in variables if optimum is not None and v.name in optimum.variables for path in v.sets}
        if one.column == "cycle_time_s" and not to_target and not timed & {"recipe.batch_time", "recipe.turnaround"}:
            reader.warn(
                f"optimum.{one.sense}", "cycle_time", 'recipe.batch_time = "to target", or a variable that sets recipe.batch_time',
                "the batch ends at a written time, so that every setting has the same cycle",
            )  # fmt: skip


def warn_heat_capacities(reader: Reader, species: tuple[Species, ...]) -> None:
    """Warn where a heat capacity falls to zero beyond the temperatures named, but where a runaway still goes."""
    for one in species:
        a, b, c, d = one.heat_capacity or (1.0, 0.0, 0.0, 0.0)
        bad = next((T for T in range(298, int(HOTTEST) + 1) if a + T * (b + T * (c + T * d)) <= 0.0), None)
        if bad is not None:
            path = f"species.{one.name}.heat_capacity"
            reader.warn(path, f"zero near {bad} K", f"above 0 up to {HOTTEST:g} K", "a runaway that gets there is computed wrongly")


def warn_rates(reader: Reader, reactions: tuple[Reaction, ...], moves: bool) -> None:
    """Warn where the temperature moves and a rate constant does not."""
    for reaction in reactions:
        path = f"reactions.{reaction.name}.rate_constant"
        if moves and f"{path}.activation_energy" not in reader.values:
            reader.warn(path, "no activation_energy", "an activation energy", "the temperature moves, and this rate does not")
