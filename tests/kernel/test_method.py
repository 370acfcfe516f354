"""The tableau: order conditions, stability, and its behaviour on problems with known answers, on the plain twin of the method."""

import numpy as np
import pytest

from sweep.kernel import method
from tests.naive import Rodas

STAGES = method.STAGES


def _classical() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return alpha, Gamma and the weights b of the method in the classical form, from the transformed one.

    Hairer and Wanner II, IV.7: U = Gamma K, so A = alpha Gamma^-1, C = diag(1/gamma) - Gamma^-1, m = b Gamma^-1.
    """
    inverse = np.eye(STAGES) / method.GAMMA - method.C
    gamma = np.linalg.inv(inverse)
    return method.A @ gamma, gamma, _weights(1.0) @ gamma


def _weights(last: float) -> np.ndarray:
    """Return the weights of the stages in the transformed form; last: that of the last stage, which is the error estimate."""
    return np.concatenate([method.A[-1, :-1], [last]])


def _conditions(b: np.ndarray, theta: float = 1.0) -> dict[int, np.ndarray]:
    """Return by order what is left of the order conditions at a fraction of the step: Hairer and Wanner II, IV.7, table 7.1 and the
    nine of order 5, by trees with beta = alpha + Gamma where a node has one branch, alpha where it has more."""
    alpha, gamma, _ = _classical()
    a, beta = alpha.sum(axis=1), alpha + gamma
    s = beta.sum(axis=1)
    inner = alpha @ s
    sums = {
        1: [(b.sum(), 1)],
        2: [(b @ s, 2)],
        3: [(b @ a**2, 3), (b @ beta @ s, 6)],
        4: [(b @ a**3, 4), (b @ (a * inner), 8), (b @ beta @ a**2, 12), (b @ beta @ beta @ s, 24)],
        5: [
            (b @ a**4, 5), (b @ (a**2 * inner), 10), (b @ inner**2, 20), (b @ (a * (alpha @ a**2)), 15), (b @ (a * (alpha @ beta @ s)), 30),
            (b @ beta @ a**3, 20), (b @ beta @ (a * inner), 40), (b @ beta @ beta @ a**2, 60), (b @ beta @ beta @ beta @ s, 120),
        ],
    }  # fmt: skip
    return {order: np.array([value - theta**order / density for value, density in pairs]) for order, pairs in sums.items()}


def test_times_and_slopes_follow_from_the_coefficients():
    alpha, gamma, _ = _classical()
    assert alpha.sum(axis=1) == pytest.approx(method.TIMES, abs=1e-9)
    assert gamma.sum(axis=1) == pytest.approx(method.SLOPES, abs=1e-9)


def test_last_stages_start_from_the_one_before():
    for stage in range(method.FRESH, STAGES):
        assert [*method.A[stage - 1, : stage - 1], 1.0] == pytest.approx(method.A[stage, :stage])


@pytest.mark.parametrize("order", [1, 2, 3, 4, 5])
def test_order_conditions_to_order_five(order):
    left = _conditions(_classical()[2])[order]
    assert np.zeros(left.size) == pytest.approx(left, abs=1e-12)


def test_the_embedded_method_is_of_order_four_and_no_more():
    """The error estimate is the last stage: the method without it must be one order lower, or it would estimate nothing."""
    left = _conditions(_weights(0.0) @ _classical()[1])
    for order in (1, 2, 3, 4):
        assert np.zeros(left[order].size) == pytest.approx(left[order], abs=1e-12)
    assert np.max(np.abs(left[5])) > 1e-4


@pytest.mark.parametrize("theta", [0.1, 0.5, 0.9])
def test_the_dense_output_is_of_order_four(theta):
    p, q, r = method.DENSE
    weights = theta * _weights(1.0) + theta * (1.0 - theta) * (p + theta * (q + theta * r))
    left = _conditions(weights @ _classical()[1], theta)
    for order in (1, 2, 3, 4):
        assert np.zeros(left[order].size) == pytest.approx(left[order], abs=1e-12)


def test_stiffly_accurate():
    """The result is the last stage's argument plus its increment, with the weights of the stage's own row (IV.7, 7.15)."""
    alpha, gamma, b = _classical()
    assert b == pytest.approx((alpha + gamma)[-1], abs=1e-9)
    assert 1.0 == method.TIMES[-1]


def _stability(z: complex) -> complex:
    """Return R(z) of the method: one step of y' = z y from 1."""
    alpha, gamma, b = _classical()
    k = np.linalg.solve(np.eye(STAGES) - z * (alpha + gamma), np.ones(STAGES))
    return 1.0 + z * (b @ k)


def test_stable_on_the_left_and_damped_at_infinity():
    axis = 1j * np.geomspace(1e-3, 1e6, 400)
    assert np.all(np.abs([_stability(z) for z in axis]) <= 1.0 + 1e-9)
    assert np.all(np.abs([_stability(z) for z in -np.geomspace(1e-3, 1e6, 200)]) <= 1.0)
    assert abs(_stability(-1e8)) < 1e-5


def _oscillator() -> tuple[Rodas, np.ndarray]:
    """A smooth problem with a known answer: y1' = y2 + sin 2t, y2' = -y1; nonlinear part -y1^2 y2 in the twin below."""

    def f(t, y):
        return np.array([y[1] * (1.0 + 0.5 * y[0]) + np.sin(2.0 * t), -y[0] * y[0]])

    def df(t, y):
        return np.array([[0.5 * y[1], 1.0 + 0.5 * y[0]], [-2.0 * y[0], 0.0]])

    def dfdt(t, y):
        return np.array([2.0 * np.cos(2.0 * t), 0.0])

    return Rodas(f, df, dfdt), np.array([1.0, 0.3])


def _slope(steps: list[int], errors: list[float]) -> float:
    return -float(np.polyfit(np.log(steps), np.log(errors), 1)[0])


def test_order_by_the_slope_of_the_error():
    twin, y0 = _oscillator()
    exact = twin.fixed(y0, 2.0, 4096)
    steps = [16, 32, 64, 128]
    errors = [float(np.max(np.abs(twin.fixed(y0, 2.0, n) - exact))) for n in steps]
    assert 5.0 == pytest.approx(_slope(steps, errors), abs=0.2)


def test_order_of_the_dense_output_by_the_slope_of_the_error():
    """One step of varying length: a dense output of order 4 leaves an error of h^5."""
    twin, y0 = _oscillator()
    lengths, errors = [0.2, 0.1, 0.05, 0.025], []
    for h in lengths:
        new, _, k = twin.step(0.0, y0, h)
        exact = twin.fixed(y0, 0.4 * h, 64)
        errors.append(float(np.max(np.abs(twin.dense(y0, new, k, 0.4) - exact))))
    slope = float(np.polyfit(np.log(lengths), np.log(errors), 1)[0])
    assert slope > 4.8


@pytest.mark.parametrize(
    ("end", "expected"),
    [(1.0, (-1.863646254808133890, 0.7535430865435433601)), (2.0, (1.706167732170465008, -0.8928097010248165478))],
)
def test_van_der_pol(end, expected):
    """VDPOL, mu = 1e-6: Mazzia and Magherini, Test Set for IVP Solvers 2.4 (2008); digits recomputed in 113-bit arithmetic, at t = 2
    equal to the published ones to 1e-14."""
    mu = 1e-6

    def f(t, y):
        return np.array([y[1], ((1.0 - y[0] ** 2) * y[1] - y[0]) / mu])

    def df(t, y):
        return np.array([[0.0, 1.0], [(-2.0 * y[0] * y[1] - 1.0) / mu, (1.0 - y[0] ** 2) / mu]])

    twin = Rodas(f, df)
    found = twin.march([2.0, 0.0], end, 1e-8, 1e-8)
    assert found == pytest.approx(np.array(expected), rel=1e-6)
    assert twin.steps < 4_000 * end  # of the work, a change detector
