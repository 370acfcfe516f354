"""The correlation matrix nearest to one that no draws can have."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from sweep.study.model import Correlation

if TYPE_CHECKING:
    from numpy.typing import NDArray

SLACK = 1e-10  # an eigenvalue above minus this is zero but for rounding
_ROUNDS = 10_000


def normal_scale(kind: str, value: float) -> float:
    """Return the correlation of normal scores that gives a correlation of rank, 2 sin(pi r/6) (Pearson 1907, from memory), or a linear one."""
    return float(2.0 * np.sin(np.pi * value / 6.0)) if kind == "rank" else value


def _written_scale(kind: str, rho: float) -> float:
    return float(6.0 / np.pi * np.arcsin(np.clip(rho, -1.0, 1.0) / 2.0)) if kind == "rank" else rho


def matrix_of(names: list[str], found: tuple[Correlation, ...]) -> NDArray[np.float64]:
    """Return the correlations of normal scores between named inputs, (D, D)."""
    matrix = np.eye(len(names))
    for one in found:
        i, j = (names.index(name) for name in one.between)
        matrix[i, j] = matrix[j, i] = normal_scale(one.kind, one.value)
    return matrix


def nearest_correlation(matrix: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the correlation matrix (D, D) nearest to a symmetric one in the Frobenius norm, by alternating projections with Dykstra's
    correction (Higham, IMA J. Numer. Anal. 22 (2002) 329, algorithm 3.3, from memory)."""
    nearest, correction = matrix.copy(), np.zeros_like(matrix)
    for _ in range(_ROUNDS):
        before = nearest
        shifted = nearest - correction
        values, vectors = np.linalg.eigh(shifted)
        positive = (vectors * np.maximum(values, 0.0)) @ vectors.T
        correction = positive - shifted
        nearest = positive.copy()
        np.fill_diagonal(nearest, 1.0)
        if np.linalg.norm(nearest - before) <= 1e-9:
            break
    return nearest


def possible(matrix: NDArray[np.float64]) -> bool:
    """Tell whether some draws have these correlations."""
    return bool(np.linalg.eigvalsh(matrix).min() >= -SLACK)


def nearest_possible(found: tuple[Correlation, ...]) -> dict[tuple[str, str], float] | None:
    """Return None for correlations that are possible, else for each pair the nearest value, as it would be written and to three digits.

    Pairs that were not written and would have to be are shown too. What is shown is possible as it stands.
    """
    names = list(dict.fromkeys(name for one in found for name in one.between))
    given = matrix_of(names, found)
    if possible(given):
        return None
    nearest = nearest_correlation(given)
    kinds = {frozenset(one.between): one.kind for one in found}
    usual = found[0].kind
    for shrink in (1.0, *np.linspace(0.999, 0.9, 34)):
        shown = {
            (a, b): round(float(shrink) * _written_scale(kinds.get(frozenset((a, b)), usual), nearest[i, j]), 3)
            for i, a in enumerate(names) for j, b in enumerate(names[:i])
            if frozenset((a, b)) in kinds or abs(nearest[i, j]) >= 5e-4
        }  # fmt: skip
        again = tuple(Correlation(pair, kinds.get(frozenset(pair), usual), value) for pair, value in shown.items())
        if possible(matrix_of(names, again)):
            break
    value_of = {frozenset(pair): value for pair, value in shown.items()}
    written = {one.between: value_of.pop(frozenset(one.between)) for one in found}
    return written | {(b, a): value for (a, b), value in shown.items() if frozenset((a, b)) in value_of}
