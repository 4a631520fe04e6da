"""Correlation: where every subset of the reference went in every frame."""

from dic.correlation.flags import MEANING, Flag
from dic.correlation.grid import Grid, lay_grid
from dic.correlation.matching import Match, match_frame
from dic.correlation.reference import Reference, Settings, prepare_reference
from dic.correlation.splines import Prefilter, spline_image
from dic.correlation.tracking import Tracker, track

__all__ = [
    "MEANING",
    "Flag",
    "Grid",
    "Match",
    "Prefilter",
    "Reference",
    "Settings",
    "Tracker",
    "lay_grid",
    "match_frame",
    "prepare_reference",
    "spline_image",
    "track",
]
