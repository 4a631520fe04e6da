"""Gauges that the test file names: weights over subsets, and the width between the coupon's edges."""

from dic.gauges.facing import facing
from dic.gauges.histories import NamedHistory, NamedReadings
from dic.gauges.placing import Placed, place_gauges
from dic.gauges.reading import NamedReader
from dic.gauges.silhouette import Silhouette

__all__ = ["NamedHistory", "NamedReader", "NamedReadings", "Placed", "Silhouette", "facing", "place_gauges"]
