"""The curve, and a peak force that is not the largest sample of noise."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy import stats

from dic.errors import ClockError
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
    time = np.linspace(0, 100, samples)
    # A record's last sample before fracture is not quite at 90 s.
    truth = float(shape(time, 0.0, 0).max())
    peaks = [peak_force(record(time, shape(time, noise, seed))) for seed in range(60)]
    z = np.array([(peak.force - truth) / peak.u_force for peak in peaks])
    # Fewer hits of k = 2 than this would come up once in a thousand such tests if it holds 95 %.
    assert (np.abs(z) < 2).sum() >= stats.binom.ppf(0.001, 60, 0.95)
    # Better than a single sample even where only some 30 lie within 2 % of the peak, all on one side: a
    # cubic's end carries 4/√30 of one sample's noise.  The largest sample would be off by 2 to 4 times it.
    assert np.mean([peak.u_force for peak in peaks]) < 0.8 * noise
    assert not any(peak.at_end for peak in peaks)


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
    # One sample only lies within 2 % of the peak, too few for a parabola.
    peak = peak_force(record(np.arange(24.0), np.append(np.arange(0.0, 200.0, 10.0), np.zeros(4))))
    assert (peak.force, peak.time_s) == (190.0, 19.0)
    assert not peak.at_end
