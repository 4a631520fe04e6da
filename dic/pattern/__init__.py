"""The pattern: where the coupon is, and how well its speckle can be tracked."""

from dic.pattern.coupon import Coupon, find_coupon
from dic.pattern.given import Given, rectangle
from dic.pattern.outline import axes, centre, perpendicular
from dic.pattern.quality import axis_doubts, doubts, picture_quality
from dic.pattern.sketch import Sketch, sketch

__all__ = [
    "Coupon",
    "Given",
    "Sketch",
    "axes",
    "axis_doubts",
    "centre",
    "doubts",
    "find_coupon",
    "perpendicular",
    "picture_quality",
    "rectangle",
    "sketch",
]
