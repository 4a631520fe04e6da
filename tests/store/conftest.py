"""The made-up measurement of the report's tests serves the store's as well."""

from importlib.util import module_from_spec, spec_from_file_location
from pathlib import Path

_there = spec_from_file_location("made_up", Path(__file__).parents[1] / "report" / "conftest.py")
_made_up = module_from_spec(_there)
_there.loader.exec_module(_made_up)
measurement = _made_up.measurement
pressed = _made_up.pressed
lost = _made_up.lost
