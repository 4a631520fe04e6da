"""The curve, and a peak force that is not the largest sample of noise."""

from dataclasses import replace
from math import hypot
from pathlib import Path

import numpy as np
import pytest
from scipy import stats

from dic.errors import ClockError, LoadRecordError
from dic.properties import make_curve, peak_force
from dic.sync import Clock, LoadRecord


def record(time, force):
    return LoadRecord(Path("machine.csv"), time, force)


def test_every_frame_keeps_its_place(pull):
    drawn = pull(fracture=0.004)
    history = replace(drawn.history, axial=np.where(np.arange(len(drawn.history)) == 7, np.nan, 0.001))
    late = Clock(5.0, 0.0, 0.0, "given")
    curve = make_curve(history, drawn.record, late, 25.0)
    assert len(curve.time_s) == len(history)
    assert np.isnan(curve.axial[7])
    outside = curve.time_s > drawn.record.time_s[-1]
    assert outside.any()
    assert np.array_equal(np.isnan(curve.force_N), outside)
    assert np.array_equal(curve.stress_MPa[~outside], curve.force_N[~outside] / 25.0)


def test_frames_beside_the_record(pull):
    drawn = pull(fracture=0.004)
    with pytest.raises(ClockError, match="no frame lies within the load record"):
        make_curve(drawn.history, drawn.record, Clock(1e4, 0.0, 0.0, "given"), 25.0)


def dome(time, noise, seed):
    """Return a rounded, lopsided maximum of 10 kN at 60 s, a fracture at 90 s."""
    x = (time - 60) / 100
    return np.where(time < 90, 10_000 * (1 - x**2 * (1 + x)), 0.0) + np.random.default_rng(seed).normal(
        0, noise, len(time)
    )


def rise(time, noise, seed):
    """Return a force that grows up to the fracture at 90 s, where it is 10 kN."""
    return np.where(time < 90, 10_000 * (time / 90) ** 0.3, 0.0) + np.random.default_rng(seed).normal(
        0, noise, len(time)
    )


@pytest.mark.parametrize("shape", [dome, rise])
@pytest.mark.parametrize("samples", [500, 5000])
@pytest.mark.parametrize("noise", [2.0, 30.0])
def test_peak_force_and_its_uncertainty(shape, samples, noise):
    """Both shapes reach 10 kN, the rise only at the very instant of fracture, between two samples."""
    phases = np.random.default_rng(0).uniform(0, 100 / samples, 60)
    times = [phase + np.linspace(0, 100, samples, endpoint=False) for phase in phases]
    peaks = [peak_force(record(time, shape(time, noise, seed))) for seed, time in enumerate(times)]
    z = np.array([(peak.force - 10_000) / hypot(peak.u_force, peak.u_between) for peak in peaks])
    # Fewer hits of k = 2 than this would come up once in a thousand such tests if it holds 95 %.
    assert (np.abs(z) < 2).sum() >= stats.binom.ppf(0.001, 60, 0.95)
    # Better than a single sample even where only some 30 lie within 2 % of the peak, all on one side: half
    # a sample past its end, a cubic carries 0.75 of one sample's noise, and more where chance makes the
    # window shorter.  The largest sample would be off by 2 to 4 times the noise.
    assert np.mean([peak.u_force for peak in peaks]) < noise
    assert not any(peak.at_end for peak in peaks)
    # No tendency either: four standard errors of the mean of 60.
    assert abs(z.mean()) < 4 * max(z.std(), 0.5) / np.sqrt(60)


def test_peak_in_compression_is_negative():
    time = np.linspace(0, 100, 1000)
    up, down = peak_force(record(time, dome(time, 5.0, 1))), peak_force(record(time, -dome(time, 5.0, 1)))
    assert down.force == -up.force
    assert down.time_s == up.time_s


def test_a_record_without_noise():
    time = np.linspace(0, 100, 1001)
    peak = peak_force(record(time, dome(time, 0.0, 0)))
    # The cubic part of the dome, within the window in which rounding hides it.
    assert peak.force == pytest.approx(10_000.0, rel=1e-8)
    # The dome's bend between neighbouring samples, 10 kN·(0.1/100)², is all that can look like noise.
    assert peak.u_force < 0.01
    assert peak.time_s == pytest.approx(60.0, abs=0.1)


def test_a_record_that_ends_at_its_peak():
    time = np.linspace(0, 80, 1000)
    assert peak_force(record(time, rise(time, 5.0, 1))).at_end


def test_a_sparse_ramp_that_breaks():
    # One sample only lies within 2 % of the peak, too few for a parabola.  It broke somewhere between 190 N
    # and the 200 N that the next sample would have shown: a rectangular distribution.
    peak = peak_force(record(np.arange(24.0), np.append(np.arange(0.0, 200.0, 10.0), np.zeros(4))))
    assert (peak.force, peak.time_s) == (195.0, 19.0)
    assert peak.u_between == pytest.approx(10 / np.sqrt(12), rel=1e-12)
    assert not peak.at_end


@pytest.mark.parametrize("shape", [dome, rise])
@pytest.mark.parametrize("by", [1.3, -1.5])
@pytest.mark.parametrize("at", [50.0, 89.9, 95.0])
def test_a_spike_is_no_strength(shape, by, at):
    time = np.arange(0, 100, 0.02)
    force = shape(time, 10.0, 3)
    spoiled = force.copy()
    spoiled[np.searchsorted(time, at)] = by * 10_000
    sound, found = peak_force(record(time, force)), peak_force(record(time, spoiled))
    # The parabola may have one sample less, whose noise counts for at most a few of its uncertainties.
    assert found.force == pytest.approx(sound.force, abs=2 * sound.u_force)
    assert found.u_force < 2 * sound.u_force


def test_spikes_are_named_on_the_curve(pull):
    drawn = pull()
    force = drawn.record.force_N.copy()
    force[1000] *= 1.3
    curve = make_curve(drawn.history, replace(drawn.record, force_N=force), drawn.clock, 25.0)
    assert curve.spikes_s == (drawn.record.time_s[1000],)
    assert drawn.curve.spikes_s == ()


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_a_force_of_the_wrong_sign_is_refused(pull, sign):
    drawn = pull(sign=sign)
    turned = replace(drawn.record, force_N=-drawn.record.force_N)
    said = (
        "gets longer while the force is negative" if sign > 0 else "gets shorter while the force is positive"
    )
    with pytest.raises(LoadRecordError, match=rf"machine\.csv: the coupon {said}; .*tension positive"):
        make_curve(drawn.history, turned, drawn.clock, 25.0)


def test_strain_counted_from_a_loaded_frame_is_no_wrong_sign(pull):
    drawn = pull()
    later = replace(drawn.history, axial=drawn.history.axial - drawn.history.axial.max())
    assert make_curve(later, drawn.record, drawn.clock, 25.0).peak_force_N > 0


def test_noise_has_no_sign(pull):
    drawn = pull()
    still = np.random.default_rng(1).normal(0, 3e-6, len(drawn.history))
    for axial in (still, -still, np.full(len(still), np.nan)):
        make_curve(replace(drawn.history, axial=axial), drawn.record, drawn.clock, 25.0)


@pytest.mark.parametrize("size", [0.0, 5.0])
def test_no_load_is_no_peak(size):
    time = np.arange(0, 100, 0.02)
    peak = peak_force(record(time, np.random.default_rng(1).normal(0, size, len(time))))
    assert np.isnan(peak.force)
    assert np.isnan(peak.u_force)
