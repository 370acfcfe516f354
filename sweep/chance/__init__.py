"""The probability that limits hold, and how well draws know it: what risk, sensitivity, ranges and maps share."""

from sweep.chance.assured import Assured, Judged, Memory, NoMemory, lower_bound, needed
from sweep.chance.drivers import Driver, drivers
from sweep.chance.intervals import Share, change, clopper_pearson, share, wilson
from sweep.chance.order import enough_draws, upper_rank
from sweep.chance.rare import Rare, rare_failure

__all__ = [
    "Assured", "Driver", "Judged", "Memory", "NoMemory", "Rare", "Share", "change", "clopper_pearson", "drivers", "enough_draws", "lower_bound",
    "needed", "rare_failure", "share", "upper_rank", "wilson",
]  # fmt: skip
