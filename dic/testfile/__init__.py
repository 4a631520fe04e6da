"""One test's description (TOML) as a validated model; the only place that knows its keys."""

from dic.testfile.gauges import NamedGauge, Place
from dic.testfile.properties import PRESETS, ModulusWindow, Properties
from dic.testfile.reading import bare_quantities, load, read_toml, sound_sections
from dic.testfile.sections import (
    VIDEO_ENDINGS,
    Alignment,
    Correlation,
    Frames,
    Gauge,
    LoadRecord,
    Maps,
    Specimen,
    Sync,
)
from dic.testfile.values import Column, Section, in_px, quantity
from dic.testfile.views import Board, Camera, CouponSection, Distortion, Marks
from dic.testfile.whole import TestFile

__all__ = [
    "PRESETS",
    "VIDEO_ENDINGS",
    "Alignment",
    "Board",
    "Camera",
    "Column",
    "Correlation",
    "CouponSection",
    "Distortion",
    "Frames",
    "Gauge",
    "LoadRecord",
    "Maps",
    "Marks",
    "ModulusWindow",
    "NamedGauge",
    "Place",
    "Properties",
    "Section",
    "Specimen",
    "Sync",
    "TestFile",
    "bare_quantities",
    "in_px",
    "load",
    "quantity",
    "read_toml",
    "sound_sections",
]
