"""Contributions to a standard uncertainty, and the straight lines that most of them come from."""

from dic.uncertainty.budget import Input, Row, budget_of, combine, few_readings
from dic.uncertainty.line import Line, line_with_errors_in_both, straight_line
from dic.uncertainty.monte_carlo import Contribution, Draws, Effect, Factor, agrees, bounded, monte_carlo

__all__ = [
    "Contribution",
    "Draws",
    "Effect",
    "Factor",
    "Input",
    "Line",
    "Row",
    "agrees",
    "bounded",
    "budget_of",
    "combine",
    "few_readings",
    "line_with_errors_in_both",
    "monte_carlo",
    "straight_line",
]
