"""Contributions to a standard uncertainty, and the straight line that most of them come from."""

from dic.uncertainty.budget import combine, few_readings
from dic.uncertainty.line import Line, straight_line

__all__ = ["Line", "combine", "few_readings", "straight_line"]
