"""Force at the frames: what smoothing may and may not do."""

from pathlib import Path

import numpy as np
import pytest

from dic.sync import Clock, LoadRecord, force_at
from dic.sync.force import frame_interval, has_load, smoothed_force

TIME = np.arange(0, 60, 0.02)
N = len(TIME)
CLOCK = Clock(2.5, 0.0, 0.0, "known")


def record(force, time=TIME):
    return LoadRecord(Path("machine.csv"), time, force)


def noise(seed, size, n=N):
    return np.random.default_rng(seed).normal(0, size, n)


def test_a_straight_record_is_read_exactly():
    camera = np.arange(0, 40, 0.2)
    found = force_at(record(30 * TIME - 7), Clock(2.5, 0.0, 1e-4, "known"), camera)
    # Rounding of a few numbers of size 1000.
    np.testing.assert_allclose(found, 30 * (2.5 + 1.0001 * camera) - 7, rtol=1e-11)


def test_outside_the_record_is_nothing():
    found = force_at(record(TIME), CLOCK, np.array([-3.0, -2.5, 10.0, 57.4, 58.0]))
    assert np.isnan(found).tolist() == [True, False, False, False, True]


def test_a_single_frame_is_interpolated():
    assert force_at(record(TIME**2), CLOCK, np.array([7.5]))[0] == pytest.approx(100.0, rel=1e-12)


@pytest.mark.parametrize("size", [0.1, 5.0])
def test_noise_is_estimated_on_a_ramp_with_a_fracture(size):
    force = np.where(TIME < 45, 100 * TIME, 0) + noise(1, size)
    # 301 samples tell a standard deviation to about 5 %; five times that covers 3000 overlapping windows.
    np.testing.assert_allclose(record(force).noise_N, size, rtol=0.25)


def test_noise_is_estimated_for_uneven_sampling():
    time = np.sort(np.random.default_rng(2).uniform(0, 60, 3000))
    force = 1000 * time + noise(3, 5.0)
    # On a straight line the comparison with both neighbours is exact for any spacing.
    np.testing.assert_allclose(record(force, time).noise_N, 5.0, rtol=0.25)


def test_smoothing_takes_the_noise_out_of_a_ramp():
    error = []
    for seed in range(20):
        force = 100 * TIME + noise(seed, 5.0)
        error.append((smoothed_force(record(force), 0.2) - 100 * TIME)[50:-50])
    scatter = np.std(error)
    # Windows of 9 samples would give 5/3; some are refused by chance, which leaves a little more.
    assert 5 / 3 * 0.95 < scatter < 5 / 3 * 1.15
    # Mean of 58000 values with correlation over 9.
    assert abs(np.mean(error)) < 4 * scatter / np.sqrt(58_000 / 9)


def test_smoothing_keeps_a_fracture():
    force = np.where(TIME < 45, 100 * TIME, 0) + noise(5, 5.0)
    error = smoothed_force(record(force), 0.2) - np.where(TIME < 45, 100 * TIME, 0)
    # No more than noise of a single sample (four standard deviations of 3000), where the step is 4500 N.
    assert np.abs(error).max() < 4 * 5.0


@pytest.mark.parametrize(("size", "share"), [(1.0, 2 / 3), (0.1, 1 / 20)])
def test_smoothing_shrinks_at_a_corner(size, share):
    truth = 100 * np.clip(TIME - 20, 0, None)
    errors = [smoothed_force(record(truth + noise(seed, size)), 0.2) - truth for seed in range(40)]
    # Unrestrained, nine samples would round the corner by 100·0.16/8 = 2 N at its deepest.  What is left
    # is about the noise of one sample, the least that could be told from noise.
    unrestrained = 100 * 0.16 / 8
    assert np.abs(np.mean(errors, axis=0)[990:1010]).max() < share * unrestrained


def test_a_window_wider_than_the_record_is_no_harm():
    force = 100 * TIME[:7] + noise(6, 1.0, 7)
    assert np.isfinite(smoothed_force(record(force, TIME[:7]), 1e6)).all()
    assert smoothed_force(record(force, TIME[:7]), 0.0).tolist() == force.tolist()


def test_frame_interval():
    assert frame_interval(np.array([0.0, 0.2, 0.4, 1.4])) == pytest.approx(0.2, rel=1e-12)
    assert frame_interval(np.array([3.0])) == 0.0


def test_force_is_the_mean_over_the_exposure():
    # Under a peak of slope ±1000 N/s, the mean over 0.04 s lies a quarter of 0.04 s · 1000 N/s below it.
    dense = np.arange(0, 60, 0.001)
    force = 5e4 - 1000 * np.abs(dense - 30)
    camera = np.arange(20.0, 40.0, 0.5)
    instant, mean = (
        force_at(record(force, dense), Clock(0.0, 0.0, 0.0, "known"), camera, exposure)
        for exposure in (None, 0.04)
    )
    # Half of what the force changes by from row to row.
    np.testing.assert_allclose(instant - mean, np.where(camera == 30.0, 10.0, 0.0), atol=0.5)
    slow = record(force[::50], dense[::50])
    assert np.array_equal(force_at(slow, CLOCK, camera, 0.04), force_at(slow, CLOCK, camera))


def broken_ramp(seed, size=5.0):
    """Return a ramp with a round start that breaks at 45 s."""
    return np.where(TIME < 45, 100 * np.clip(TIME - 3, 0, None) ** 1.1, 0) + noise(seed, size)


@pytest.mark.parametrize("width", [1, 2, 3])
@pytest.mark.parametrize("at", [20, 700, 1500, 2240, 2600])
@pytest.mark.parametrize("up", [True, False])
def test_a_spike_is_found_and_nothing_else(width, at, up):
    # The places: at rest, on the ramp, just before fracture, afterwards; 300 N is 60 times the noise.
    force = broken_ramp(11)
    force[at : at + width] += 300.0 if up else -300.0
    assert np.flatnonzero(record(force).spikes).tolist() == list(range(at, at + width))


def test_a_spike_at_either_end_of_the_record_is_found():
    force = broken_ramp(12)
    force[[0, -1]] += 300.0
    assert np.flatnonzero(record(force).spikes).tolist() == [0, N - 1]


def test_the_record_may_stop_with_the_sample_after_fracture():
    kept = TIME < 45.02
    assert not record(broken_ramp(13)[kept], TIME[kept]).spikes.any()


def test_the_rebound_of_a_fracture_is_a_spike():
    force = broken_ramp(14)
    force[2250] = -1.2 * force[2240]
    assert np.flatnonzero(record(force).spikes).tolist() == [2250]


@pytest.mark.parametrize(
    "force",
    [
        pytest.param(lambda t: 100 * t, id="ramp"),
        pytest.param(lambda t: 6000 * (1 - ((t - 30) / 40) ** 2), id="dome"),
        pytest.param(lambda t: np.minimum(500 * t, 4000) - np.where(t > 8, 300, 0), id="upper yield point"),
        pytest.param(lambda t: 500 * np.floor(t / 4), id="steps"),
        pytest.param(lambda t: 3000 + 2000 * np.sin(2 * np.pi * t / 6), id="cycles"),
        pytest.param(lambda t: 5000 * (1 - np.exp(-t / 3)) + 200 * (t % 5 / 5), id="serrations"),
        pytest.param(lambda t: np.exp(t / 6), id="stiffening"),
    ],
)
@pytest.mark.parametrize("size", [0.0, 5.0])
@pytest.mark.parametrize("step", [1, 10, 25])
def test_no_course_of_a_test_is_a_spike(force, size, step):
    time = TIME[::step]
    course = force(time) + noise(15, size, len(time))
    assert not record(course, time).spikes.any()
    # A converter's last digit going to and fro is none either.
    assert not record(np.round(course, -1), time).spikes.any()


def test_smoothing_runs_straight_across_a_spike():
    force = 100 * TIME
    spoiled = force.copy()
    spoiled[1500:1502] *= 1.3
    # Rounding of sums of numbers up to 6000.
    np.testing.assert_allclose(smoothed_force(record(spoiled), 0.2), force, atol=1e-6)


def test_whether_there_is_load():
    assert has_load(record(broken_ramp(16)))
    assert has_load(record(-broken_ramp(16)))
    assert not has_load(record(np.zeros(N)))
    assert not has_load(record(noise(17, 5.0)))
    assert not has_load(record(np.full(N, 250.0)))
    alone = noise(18, 5.0)
    alone[1000] += 5000
    assert not has_load(record(alone))
