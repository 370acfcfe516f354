"""How many draws it takes at least, if every one of them holds, to show a probability with a confidence."""


def least_draws(probability: float, confidence: float) -> int:
    """Return the smallest N at which N of N gives a one-sided Wilson bound of at least the probability: z^2 p / (1 - p), rounded up."""
    import math
    from statistics import NormalDist

    z = NormalDist().inv_cdf(confidence)
    return max(1, math.ceil(z * z * probability / (1.0 - probability) * (1.0 - 1e-12)))
