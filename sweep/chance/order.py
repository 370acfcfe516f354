"""What the sorted draws say for sure: bounds on a quantile that hold with a confidence, whatever the distribution (Wilks)."""


def upper_rank(draws: int, coverage: float, confidence: float) -> int | None:
    """Return the rank (from 1, ascending) of the draw below which a share `coverage` of all lies with a confidence; None with too few draws.

    The smallest r with P(Binomial(draws, coverage) <= r - 1) >= confidence (Wilks, Ann. Math. Stat. 12 (1941) 91, from memory).
    """
    from scipy.stats import binom

    rank = int(binom.ppf(confidence, draws, coverage)) + 1
    while rank > 1 and binom.cdf(rank - 2, draws, coverage) >= confidence:
        rank -= 1
    return rank if rank <= draws else None


def enough_draws(coverage: float, confidence: float, order: int = 1, sides: int = 1) -> int:
    """Return how many draws it takes for the `order`-th from the top (sides 2: the range from the `order`-th lowest to the `order`-th
    highest) to bound a share `coverage` of all with a confidence."""
    from scipy.stats import binom

    left, high = sides * order, 2
    while binom.sf(left - 1, high, 1.0 - coverage) < confidence:
        high *= 2
    low = high // 2
    while low < high:
        middle = (low + high) // 2
        low, high = (low, middle) if binom.sf(left - 1, middle, 1.0 - coverage) >= confidence else (middle + 1, high)
    return low
