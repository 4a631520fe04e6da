"""Correlation: where every subset of the reference went in every frame."""

from dic.correlation.flags import MEANING, Flag
from dic.correlation.grid import Grid, lay_grid
from dic.correlation.matching import Match, match_frame
from dic.correlation.reference import Reference, prepare_reference
from dic.correlation.splines import SplineImage, smooth, spline_image
from dic.correlation.tracking import track

__all__ = [
    "MEANING",
    "Flag",
    "Grid",
    "Match",
    "Reference",
    "SplineImage",
    "lay_grid",
    "match_frame",
    "prepare_reference",
    "smooth",
    "spline_image",
    "track",
]
