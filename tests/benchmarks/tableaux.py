"""Rosenbrock methods beside the kernel's, in the transformed form of `sweep.kernel.method`: what was tried and lost.

Rodas3, Rodas4, Rodas4P: Hairer and Wanner, Solving Ordinary Differential Equations II, 2nd ed. 1996, IV.7 and IV.10 (digits from memory;
the tests check their order conditions).
"""

from typing import NamedTuple

import numpy as np

from sweep.kernel import method


class Tableau(NamedTuple):
    """gamma; A and C, (stages, stages); the error of one step grows with this power of its length."""

    gamma: float
    A: np.ndarray
    C: np.ndarray
    order: int

    def classical(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return alpha, Gamma and the weights of the classical form."""
        gamma = np.linalg.inv(np.eye(len(self.A)) / self.gamma - self.C)
        return self.A @ gamma, gamma, np.concatenate([self.A[-1, :-1], [1.0]]) @ gamma


def _rows(stages: int, *rows: list[float]) -> np.ndarray:
    matrix = np.zeros((stages, stages))
    for k, row in enumerate(rows, start=1):
        matrix[k, : len(row)] = row
    return matrix


def _rodas3() -> Tableau:
    A = _rows(4, [0.0], [2.0, 0.0], [2.0, 0.0, 1.0])
    return Tableau(0.5, A, _rows(4, [4.0], [1.0, -1.0], [1.0, -1.0, -8.0 / 3.0]), 3)


def _rodas4() -> Tableau:
    fourth = [1.221224509226641, 6.019134481288629, 12.53708332932087, -0.6878860361058950]
    A = _rows(
        6, [1.544], [0.9466785280815826, 0.2557011698983284], [3.314825187068521, 2.896124015972201, 0.9986419139977817], fourth, [*fourth, 1.0]
    )  # fmt: skip
    C = _rows(
        6,
        [-5.6688],
        [-2.430093356833875, -0.2063599157091915],
        [-0.1073529058151375, -9.594562251023355, -20.47028614809616],
        [7.496443313967647, -10.24680431464352, -33.99990352819905, 11.70890893206160],
        [8.083246795921522, -7.981132988064893, -31.52159432874371, 16.31930543123136, -6.058818238834054],
    )
    return Tableau(0.25, A, C, 4)


def _rodas4p() -> Tableau:
    fourth = [-7.170454962423024, -4.741636671481785, -16.31002631330971, -1.062004044111401]
    A = _rows(
        6, [3.0], [1.831036793486759, 0.4955183967433795], [2.304376582692669, -0.05249275245743001, -1.176798761832782], fourth, [*fourth, 1.0]
    )  # fmt: skip
    C = _rows(
        6,
        [-12.0],
        [-8.791795173947035, -2.207865586973518],
        [10.81793056857153, 6.780270611428266, 19.53485944642410],
        [34.19095006749676, 15.49671153725963, 54.74760875964130, 14.16005392148534],
        [34.62605830930532, 15.30084976114473, 56.99955578662667, 18.40807009793095, -5.714285714285717],
    )
    return Tableau(0.25, A, C, 4)


TABLEAUX = {"Rodas3": _rodas3(), "Rodas4": _rodas4(), "Rodas4P": _rodas4p(), "Rodas5P": Tableau(method.GAMMA, method.A, method.C, 5)}
