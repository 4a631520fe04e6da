"""The machine's load record, and the clock that joins it to the frames."""

from dic.sync.clock import fit_clock, given_clock
from dic.sync.force import force_at, has_load
from dic.sync.reading import read_load_record
from dic.sync.record import Clock, LoadRecord

__all__ = ["Clock", "LoadRecord", "fit_clock", "force_at", "given_clock", "has_load", "read_load_record"]
