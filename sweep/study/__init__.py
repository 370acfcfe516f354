"""The study file: reading, units, messages with file and line."""

from sweep.study.read import read_study, read_text

__all__ = ["read_study", "read_text"]
