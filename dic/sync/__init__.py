"""The machine's load record, and the clock that joins it to the frames."""

from dic.sync.clock import fit_clock, known_clock
from dic.sync.force import force_at, has_load
from dic.sync.reading import read_load_record
from dic.sync.record import Clock, LoadRecord
from dic.sync.survey import ColumnSurvey, RecordSurvey, look_at_record

__all__ = [
    "Clock",
    "ColumnSurvey",
    "LoadRecord",
    "RecordSurvey",
    "fit_clock",
    "force_at",
    "has_load",
    "known_clock",
    "look_at_record",
    "read_load_record",
]
