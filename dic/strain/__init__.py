"""Strain: what virtual gauges read, and local strain maps."""

from dic.strain.gauge import GaugeReader, Reading, Region
from dic.strain.history import GaugeHistory, gather
from dic.strain.maps import MapFlag, StrainMap, StrainMapper, Window, gauge_size
from dic.strain.measures import measures
from dic.strain.tensors import engineering

__all__ = [
    "GaugeHistory",
    "GaugeReader",
    "MapFlag",
    "Reading",
    "Region",
    "StrainMap",
    "StrainMapper",
    "Window",
    "engineering",
    "gather",
    "gauge_size",
    "measures",
]
