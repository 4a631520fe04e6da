"""Clocks from a frame counter, from pulses, and from dates: what they say, and when they are refused."""

from dataclasses import replace
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest

from dic.errors import ClockError
from dic.sync import LoadRecord, fit_clock
from dic.testfile import Sync

OFFSET, DRIFT = 3.377, 2e-4
CAMERA = np.arange(60) / 5.0
ROWS = np.arange(0.0, 20.0, 0.01)
EXPOSED = OFFSET + (1 + DRIFT) * CAMERA


def record(trigger):
    return LoadRecord(Path("machine.csv"), ROWS, 100 * ROWS, trigger=trigger)


def joined(trigger, frames=CAMERA, **keys):
    nothing = np.full(len(frames), np.nan)
    return fit_clock(frames, nothing, nothing, record(trigger), Sync(**keys))


def counter():
    return np.searchsorted(EXPOSED, ROWS, side="right").astype(float)


def pulses():
    return 5.0 * (np.min(np.abs(ROWS[:, None] - 0.02 - EXPOSED), axis=1) <= 0.02)


@pytest.mark.parametrize("trigger", [counter(), pulses()], ids=["counter", "pulses"])
def test_every_frame_marked_gives_offset_and_drift(trigger):
    found = joined(trigger)
    # A mark is known to a row, 0.01 s wide, so the offset to half of it, and the drift over 11.8 s.
    assert abs(found.offset_s - OFFSET) < 0.005
    assert found.offset_standard_uncertainty_s == pytest.approx(0.01 / np.sqrt(12), rel=0.5)
    assert abs(found.drift - DRIFT) < 2 * found.drift_standard_uncertainty < 1e-3
    assert found.notices == ()


def test_a_single_pulse_marks_the_first_frame():
    found = joined((np.abs(ROWS - 3.40) < 0.025).astype(float))
    # It rises at 3.38 s, so between that row and the one before.
    assert found.offset_s == pytest.approx(3.375, abs=1e-9)
    assert found.drift == 0


def test_a_counter_that_begins_late_and_skips_still_knows_its_frames():
    trigger = counter()
    trigger = np.where(trigger < 7, 0.0, trigger)
    trigger = np.where(trigger == 20, 19.0, trigger)
    assert abs(joined(trigger).offset_s - OFFSET) < 0.005


def test_more_frames_than_counts_are_said():
    longer = np.arange(64) / 5.0
    assert [one.code for one in joined(counter(), longer).notices] == ["trigger_count"]


@pytest.mark.parametrize(
    ("trigger", "said"),
    [
        (np.zeros(len(ROWS)), "never changes"),
        ((ROWS % 1 < 0.5).astype(float), "rises 19 times where there are 60 frames"),
        (np.floor(ROWS / 0.21) + 1, "misses the frames' times"),
    ],
)
def test_a_trigger_that_does_not_fit(trigger, said):
    with pytest.raises(ClockError, match=f'{said}.*say sync.source = "loading"'):
        joined(trigger, source="trigger", drift=0.0)


def test_a_trigger_that_is_asked_for_has_to_be_there():
    with pytest.raises(ClockError, match="no trigger column; name it"):
        joined(None, source="trigger")


def test_dates_join_the_clocks_where_they_are_asked_for():
    nothing = np.full(len(CAMERA), np.nan)
    dated = replace(record(None), epoch=datetime(2026, 5, 4, 10, 0, 0))
    keys = Sync(source="absolute", offset_uncertainty="0.05 s")
    found = fit_clock(CAMERA, nothing, nothing, dated, keys, epoch=datetime(2026, 5, 4, 10, 0, 2, 500_000))
    assert (found.offset_s, found.offset_standard_uncertainty_s) == (2.5, 0.05)
    with pytest.raises(ClockError, match="no dates in the frames;"):
        fit_clock(CAMERA, nothing, nothing, dated, keys)
    with pytest.raises(ClockError, match="do not overlap"):
        fit_clock(CAMERA, nothing, nothing, dated, keys, epoch=datetime(2026, 5, 5))
