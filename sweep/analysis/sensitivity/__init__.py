"""Which inputs decide: screening, variance shares, slopes at the set-point, and which constant should be measured better."""

from sweep.analysis.sensitivity.assess import Sensitivity, assess_sensitivity

__all__ = ["Sensitivity", "assess_sensitivity"]
