"""A share counted in draws, with its binomial interval."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

_Bools = NDArray[np.bool_]


@dataclass(frozen=True)
class Share:
    """`count` of `draws`; low, high: the interval that holds the true probability with the confidence asked for, never of no width."""

    count: int
    draws: int
    low: float
    high: float

    @property
    def value(self) -> float:
        """The share counted."""
        return self.count / self.draws

    def summary(self) -> dict[str, Any]:
        """Return the share for summary.json."""
        return {"holding": self.count, "draws": self.draws, "probability": self.value, "low": self.low, "high": self.high}


def wilson(count: int, draws: int, confidence: float = 0.95) -> tuple[float, float]:
    """Return the score interval of a share, without correction for continuity (Wilson, J. Am. Stat. Assoc. 22 (1927) 209, from memory)."""
    from scipy.special import ndtri

    z2 = float(ndtri(0.5 + 0.5 * confidence)) ** 2
    middle = (count + 0.5 * z2) / (draws + z2)
    half = (z2 * (count * (draws - count) / draws + 0.25 * z2)) ** 0.5 / (draws + z2)
    return 0.0 if count == 0 else max(0.0, middle - half), 1.0 if count == draws else min(1.0, middle + half)


def clopper_pearson(count: int, draws: int, confidence: float = 0.95) -> tuple[float, float]:
    """Return the exact interval of a share, by quantiles of the beta distribution (Clopper and Pearson, Biometrika 26 (1934) 404, from memory)."""
    from scipy.special import betaincinv

    tail = 0.5 * (1.0 - confidence)
    low = float(betaincinv(count, draws - count + 1, tail)) if count > 0 else 0.0
    high = float(betaincinv(count + 1, draws - count, 1.0 - tail)) if count < draws else 1.0
    return low, high


def share(holding: _Bools, confidence: float = 0.95, interval: str = "wilson") -> Share:
    """Return which share of draws (N,) holds; interval: "wilson" or "clopper-pearson"."""
    count, draws = int(np.count_nonzero(holding)), int(holding.size)
    low, high = (clopper_pearson if interval == "clopper-pearson" else wilson)(count, draws, confidence)
    return Share(count, draws, low, high)


def change(before: _Bools, after: _Bools, confidence: float = 0.95) -> tuple[float, float, float]:
    """Return by how much a probability rises between two answers to the same draws (N,), with its interval.

    Only draws whose answer changes count: half a draw is added to either kind and the sum taken as normal (Agresti and Min, Stat. Med. 24
    (2005) 729, from memory), so that no change in any draw still leaves a width.
    """
    from scipy.special import ndtri

    gained, lost = int(np.count_nonzero(after & ~before)), int(np.count_nonzero(before & ~after))
    up, down, draws = gained + 0.5, lost + 0.5, before.size + 2
    middle = (up - down) / draws
    half = float(ndtri(0.5 + 0.5 * confidence)) * ((up + down) - (up - down) ** 2 / draws) ** 0.5 / draws
    return (gained - lost) / before.size, max(-1.0, middle - half), min(1.0, middle + half)
