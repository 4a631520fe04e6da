"""The pattern: where the coupon is, and how well its speckle can be tracked."""

from dic.pattern.coupon import Coupon, axes, find_coupon
from dic.pattern.quality import doubts, picture_quality

__all__ = ["Coupon", "axes", "doubts", "find_coupon", "picture_quality"]
