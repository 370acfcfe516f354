"""The study file: reading, units, messages with file and line."""

from sweep.study.model import Study
from sweep.study.read import read_study, read_text

__all__ = ["Study", "read_study", "read_text"]
