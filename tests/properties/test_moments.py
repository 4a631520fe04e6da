"""Strains at instants: between frames, a little beyond them, and not at all."""

from dataclasses import replace

import numpy as np
import pytest

from dic.properties import Sheet, evaluate
from dic.properties.loading import Undetermined, loading_of
from dic.properties.moments import fracture_of, strain_at
from dic.sync import LoadRecord
from dic.testfile import Properties


def ending(drawn, record_s, frames_s):
    """The same pull, its record and its frames cut off."""
    record, history = drawn.record, drawn.history
    cut = LoadRecord(
        record.path, record.time_s[record.time_s < record_s], record.force_N[record.time_s < record_s]
    )
    lost = np.where(history.time_s > frames_s, np.nan, history.axial)
    return replace(drawn, record=cut, history=replace(history, axial=lost))


def evaluated(drawn):
    return evaluate(Sheet(drawn.curve, drawn.specimen, None, drawn.clock, Properties())).properties


def test_no_strain_is_told_for_an_instant_long_after_the_last_frame(pull):
    """Frames 0.2 s apart; the largest force comes 0.3 s after the last of them."""
    found = evaluated(ending(pull(), 40.0, 39.7))
    for name in ("strain_at_maximum", "plastic_strain_at_maximum"):
        assert np.isnan(found[name].value)
        assert "s before the largest force" in found[name].notes[0]
    assert found["tensile_strength"].value > 0


def test_within_one_interval_the_strain_is_carried_and_said(pull):
    drawn = pull()
    whole, when = loading_of(drawn.curve, whole=True), 40.0
    before = whole.part(slice(0, int(np.searchsorted(whole.time_s, when))))
    told = strain_at(before, when, "the end")
    between = strain_at(whole, when, "the end")
    assert not between.notes
    assert "beyond the last measured frame" in told.notes[0]
    u = np.hypot.reduce(list(told.contributions(0.0, 0.0).values()))
    # Growth at twice the rate, or none at all, lies within k = 2.
    assert 2 * u > told.rate * (when - before.time_s[-1])
    assert told.strain == pytest.approx(between.strain, abs=2 * u)
    with pytest.raises(Undetermined, match="before the end"):
        strain_at(before, when + 0.2, "the end")
    with pytest.raises(Undetermined, match="first measured frame"):
        strain_at(whole, whole.time_s[0] - 0.01, "the beginning")


def test_one_low_row_at_the_end_is_no_fracture(pull):
    """A number that was cut off (1 for 1234) looks like a force that is gone."""
    drawn = ending(pull(), 40.0, 60.0)
    force = drawn.record.force_N.copy()
    force[-1] = 1.0
    lone = replace(drawn, record=replace(drawn.record, force_N=force))
    assert lone.curve.peak_at_end
    with pytest.raises(Undetermined, match="last row only"):
        fracture_of(lone.curve)
    force[-2] = 1.0
    gone = replace(drawn, record=replace(drawn.record, force_N=force))
    assert not gone.curve.peak_at_end
    # It fell between the last sound sample and the first low one.
    assert fracture_of(gone.curve).time_s == pytest.approx(drawn.record.time_s[-2] - 0.01, abs=0.011)
