"""Scale, lens distortion, camera tilt, and motion towards the camera."""

from dic.optics.board import calibrate
from dic.optics.front import Optics, lens_of
from dic.optics.lens import Lens
from dic.optics.patch import Apparent, StillPatch, lay_patch
from dic.optics.scale import settle_scale
from dic.optics.towards import bound, corrected, corrected_gauges, receding

__all__ = [
    "Apparent",
    "Lens",
    "Optics",
    "StillPatch",
    "bound",
    "calibrate",
    "corrected",
    "corrected_gauges",
    "lay_patch",
    "lens_of",
    "receding",
    "settle_scale",
]
