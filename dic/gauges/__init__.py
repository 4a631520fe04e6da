"""Gauges that the test file names: weights over subsets, and the width between the coupon's edges."""

from dic.gauges.histories import NamedHistory, gather_named
from dic.gauges.placing import Placed, place_gauges
from dic.gauges.reading import NamedReader
from dic.gauges.silhouette import Silhouette

__all__ = ["NamedHistory", "NamedReader", "Placed", "Silhouette", "gather_named", "place_gauges"]
