"""Strain: what virtual gauges read, and local strain maps."""

from dic.strain.gauge import GaugeReader, Reading, Region
from dic.strain.history import GaugeHistory, gather
from dic.strain.maps import StrainMap, StrainMapper, gauge_size
from dic.strain.tensors import engineering

__all__ = [
    "GaugeHistory",
    "GaugeReader",
    "Reading",
    "Region",
    "StrainMap",
    "StrainMapper",
    "engineering",
    "gather",
    "gauge_size",
]
