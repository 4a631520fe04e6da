"""The pattern: where the coupon is, and how well its speckle can be tracked."""

from dic.pattern.coupon import Coupon, find_coupon
from dic.pattern.outline import axes
from dic.pattern.quality import axis_doubts, doubts, picture_quality

__all__ = ["Coupon", "axes", "axis_doubts", "doubts", "find_coupon", "picture_quality"]
