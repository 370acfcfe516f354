"""What is brought in: amounts charged and fed, their volumes, and the times of the feeds, per point."""

from dataclasses import dataclass

import numpy as np

from sweep.base.errors import SweepError
from sweep.plant.chemistry import names
from sweep.plant.values import Floats, Values
from sweep.study.model import Study


@dataclass(frozen=True)
class Pieces:
    """Feeds in stretches of constant rate, each (N, F, E): from begin to finish (s), rate in shares of the whole feed per second."""

    begin: Floats
    finish: Floats
    rate: Floats


@dataclass(frozen=True)
class Brought:
    """N points, I species, F feeds. charged (N, I) mol; fed (N, F, I) mol in all; start, end (N, F) s; temperature (N, F) K;
    volume (N,) m3 charged; feed_volume (N, F) m3 in all; pieces: None where each feed runs evenly from its start to its end."""

    charged: Floats
    fed: Floats
    start: Floats
    end: Floats
    temperature: Floats
    volume: Floats
    feed_volume: Floats
    pieces: Pieces | None = None

    def share(self, time: Floats) -> Floats:
        """Return which share of each feed is in at a time (N,) or times (N, K) s: (N, F) or (N, F, K)."""
        rows = np.arange(time.shape[0])
        return self.share_of(rows, time) if time.ndim == 2 else self.share_of(rows, time[:, None])[:, :, 0]

    def share_of(self, rows: np.ndarray, time: Floats) -> Floats:
        """Return which share of each feed is in at times (M, K) s of points `rows` (M,): (M, F, K)."""
        if self.pieces is None:
            start, end = self.start[rows][:, :, None], self.end[rows][:, :, None]
            share: Floats = np.clip((time[:, None, :] - start) / (end - start), 0.0, 1.0)
            return share
        share = np.zeros((time.shape[0], self.start.shape[1], time.shape[1]))
        for e in range(self.pieces.rate.shape[2]):
            begin, finish, rate = (part[rows, :, e][:, :, None] for part in (self.pieces.begin, self.pieces.finish, self.pieces.rate))
            share += rate * np.clip(time[:, None, :] - begin, 0.0, finish - begin)
        return np.minimum(share, 1.0)

    def rate_at(self, time: Floats) -> Floats:
        """Return the shares of each whole feed that come in per second at a time (N,) s: (N, F)."""
        time = time[:, None]
        if self.pieces is None:
            on = (self.start <= time) & (time < self.end)
            return np.where(on, 1.0 / (self.end - self.start), 0.0)
        on = (self.pieces.begin <= time[:, :, None]) & (time[:, :, None] < self.pieces.finish)
        rate: Floats = np.where(on, self.pieces.rate, 0.0).sum(axis=2)
        return rate

    def total(self) -> Floats:
        """Return all moles brought in by the end, (N, I)."""
        total: Floats = self.charged + self.fed.sum(axis=1)
        return total

    def last_feed(self) -> Floats:
        """Return when the last feed ends (s), (N,); 0 without feeds."""
        last: Floats = self.end.max(axis=1, initial=0.0)
        return last


def molar_volume(values: Values, name: str) -> Floats:
    """Return a species' own volume (m3/mol)."""
    return values.need(f"species.{name}.molar_mass") / values.need(f"species.{name}.density")


def _charged(study: Study, values: Values) -> tuple[Floats, Floats]:
    index, charge = {name: i for i, name in enumerate(names(study))}, study.charge
    amounts = np.zeros((values.count, len(index)))
    path = "recipe.charge"
    for name in charge.amounts:
        amounts[:, index[name]] = values.need(f"{path}.amount.{name}")
    if charge.concentrations or charge.balance:
        volume = values.need(f"{path}.volume")
    elif values.has(f"{path}.volume"):
        volume = values.get(f"{path}.volume")
    else:
        volume = sum((amounts[:, index[name]] * molar_volume(values, name) for name in charge.amounts), np.zeros(values.count))
    for name in charge.concentrations:
        amounts[:, index[name]] = values.need(f"{path}.concentration.{name}") * volume
    if charge.balance:
        others = [name for name in (*charge.amounts, *charge.concentrations) if name != charge.balance]
        own = sum((amounts[:, index[name]] * molar_volume(values, name) for name in others), np.zeros(values.count))
        amounts[:, index[charge.balance]] = (volume - own) / molar_volume(values, charge.balance)
    return amounts, volume


def _counted_from(study: Study, values: Values, index: dict[str, int]) -> Floats:
    """Return the moles (N, I) that equivalents are counted from: charged, and fed by amount, at the design point itself."""
    moles, _ = _charged(study, values)
    for feed in study.feeds:
        for name in feed.species:
            if name not in feed.equivalents:
                moles[:, index[name]] += values.need(f"recipe.feeds.{feed.name}.amount.{name}")
    return moles


def brought_in(study: Study, values: Values) -> Brought:
    """Return what each point's recipe brings in; SweepError where a quantity that it needs is not written."""
    index = {name: i for i, name in enumerate(names(study))}
    charged, volume = _charged(study, values)
    shape = (values.count, len(study.feeds))
    fed = np.zeros((*shape, len(index)))
    start, end, temperature, feed_volume = (np.zeros(shape) for _ in range(4))
    for f, feed in enumerate(study.feeds):
        path = f"recipe.feeds.{feed.name}"
        for name in feed.species:
            if name not in feed.equivalents:
                fed[:, f, index[name]] = values.need(f"{path}.amount.{name}")
    fixed = _counted_from(study, values.as_chosen(), index) if values.chosen else charged + fed.sum(axis=1)
    for f, feed in enumerate(study.feeds):
        path = f"recipe.feeds.{feed.name}"
        for name, of in feed.equivalents.items():
            fed[:, f, index[name]] = values.need(f"{path}.amount.{name}.equivalents") * fixed[:, index[of]]
        start[:, f] = values.get(f"{path}.start")
        end[:, f] = start[:, f] + values.need(f"{path}.duration")
        temperature[:, f] = values.get(f"{path}.temperature", values.get("recipe.charge.temperature", 298.15))
        for name in feed.species:
            if values.has(f"species.{name}.density"):
                feed_volume[:, f] += fed[:, f, index[name]] * molar_volume(values, name)
            else:
                raise SweepError(f"species.{name}.density is not written in the study, and feed {feed.name} adds its volume")
    return Brought(charged, fed, start, end, temperature, volume, feed_volume)
