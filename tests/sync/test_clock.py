"""The clock from the start of loading: right to within what it claims, and wide where it cannot know."""

from dataclasses import replace
from datetime import datetime, timedelta
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from dic.errors import ClockError, LoadRecordError
from dic.sync import LoadRecord, fit_clock
from dic.sync.misfit import Course, Misfit
from dic.testfile import Sync

OFFSET = 3.37
AUTO = Sync()


def pull(
    seed=0,
    *,
    rest=2.0,
    rate=4e-4,
    length=12.0,
    interval=0.2,
    sampling=0.02,
    strain_noise=3e-6,
    force_noise=0.001,
    stress=lambda strain: 70e3 * strain,
    offset=OFFSET,
    drift=0.0,
):
    """Invent a pull: rest, then constant strain rate (what the grips do before that is no matter).

    Returns camera times, axial strain, its standard uncertainty, and the machine's record, which begins
    a second before the camera.  Loading starts at a random phase between two frames.
    """
    r = np.random.default_rng(seed)
    start = rest + r.uniform(0, interval)

    def strain_at(camera_time):
        return rate * np.clip(camera_time - start, 0, None)

    camera = np.arange(0, rest + length, interval)
    instants = np.arange(-1.0, rest + length + 1, sampling)
    force = 25 * stress(strain_at(instants))
    force = force + r.normal(0, force_noise * np.abs(force).max(), len(force))
    record = LoadRecord(Path("machine.csv"), offset + (1 + drift) * instants, force)
    axial = strain_at(camera) + r.normal(0, strain_noise, len(camera))
    return camera, axial, np.full(len(camera), strain_noise), record


def hardening(strain):
    """Ramberg-Osgood with E 70 GPa, 0.2 % proof stress 280 MPa, exponent 20."""
    stress = np.linspace(0, 400, 20_001)
    return np.interp(strain, stress / 70e3 + 0.002 * (stress / 280) ** 20, stress)


def gradually(strain):
    """Ramberg-Osgood as of an austenitic steel: E 195 GPa, 0.2 % proof stress 230 MPa, exponent 6."""
    stress = np.linspace(0, 350, 20_001)
    return np.interp(strain, stress / 195e3 + 0.002 * (stress / 230) ** 6, stress)


def straightens(strain):
    """E 70 GPa on average over the section; the filmed face is longer by 8 % until the coupon is straight."""
    mean = np.linspace(0, 0.02, 20_001)
    return 70e3 * np.interp(strain, mean + 0.08 * 6e-4 * (1 - np.exp(-mean / 6e-4)), mean)


CASES = {
    "usual": {},
    "little force noise": {"force_noise": 2e-4},
    "little strain noise": {"strain_noise": 1e-6},
    "noisy force": {"force_noise": 0.005},
    "sparse record": {"sampling": 0.1},
    "slow": {"rate": 1e-4, "length": 30.0},
    "yields": {"stress": hardening, "rate": 8e-4},
    "yields gradually": {"stress": gradually, "length": 5.0},
    "straightens": {"stress": straightens, "length": 8.0, "force_noise": 0.003},
    "soft": {"stress": lambda strain: (1 + strain) - (1 + strain) ** -2, "rate": 5e-3, "length": 30.0},
    "compression": {"rate": -4e-4},
    "drift": {"drift": 0.003},
}


@pytest.mark.parametrize("case", CASES)
def test_the_offset_is_found_to_within_its_uncertainty(case):
    draws = 30
    z = []
    for seed in range(draws):
        found = fit_clock(*pull(seed, **CASES[case]), Sync(drift=CASES[case].get("drift", 0.0)))
        z.append((found.offset_s - OFFSET) / found.offset_standard_uncertainty_s)
    inside = int((np.abs(z) < 2).sum())
    # k = 2 is to hold 95 %; fewer hits than this would come up once in a thousand such tests.
    assert inside >= stats.binom.ppf(0.001, draws, 0.95)


@pytest.mark.parametrize(
    ("stress", "least", "most"),
    [
        (lambda strain: 70e3 * strain, 0.003, 0.004),  # A straight line: four times 0.001, or all there is.
        (hardening, 0.0015, 0.003),  # The plastic part is 20 µm/m, six noises, at a strain of 0.0032.
        (gradually, 0.0003, 0.0008),  # It is 20 µm/m at a strain of 0.00057 already.
    ],
)
def test_loading_is_followed_as_far_as_a_parabola_describes_it(stress, least, most):
    methods = [fit_clock(*pull(seed, stress=stress), AUTO).method for seed in range(5)]
    reached = [float(one.rsplit(" ", 1)[1]) for one in methods]
    # Noise that looks like a bend shortens the reach in some tests; nothing may lengthen it.
    assert np.median(reached) >= least
    assert max(reached) <= most


@pytest.mark.parametrize("case", ["usual", "little force noise"])
def test_the_uncertainty_is_no_exaggeration(case):
    found = [fit_clock(*pull(seed, **CASES[case]), AUTO) for seed in range(40)]
    scatter = np.std([one.offset_s for one in found])
    claimed = np.mean([one.offset_standard_uncertainty_s for one in found])
    # The scatter of 40 draws is known to 11 %; a claim half as large again would be a waste.
    assert claimed < 1.5 * scatter
    # Far below a frame, which is what a reading by eye gives.
    assert claimed < 0.1 * 0.2


@settings(max_examples=20, deadline=None)
@given(camera=st.floats(-1e3, 1e3), machine=st.floats(-1e3, 1e3))
def test_moving_a_clocks_zero_moves_the_offset_alike(camera, machine):
    time, axial, u, record = pull(3)
    first = fit_clock(time, axial, u, record, AUTO)
    moved = LoadRecord(record.path, record.time_s + machine, record.force_N)
    second = fit_clock(time + camera, axial, u, moved, AUTO)
    # Other grid points lead to the same minimum; the search stops at 1e-4 of a frame (2e-5 s).
    assert second.offset_s == pytest.approx(first.offset_s + machine - camera, abs=1e-4)
    assert second.offset_standard_uncertainty_s == pytest.approx(
        first.offset_standard_uncertainty_s, rel=0.05
    )


def test_frames_that_were_not_measured_do_no_harm():
    time, axial, u, record = pull(1)
    axial[[2, 7, 12, 14]] = np.nan
    u[[5]] = np.nan
    found = fit_clock(time, axial, u, record, AUTO)
    assert abs(found.offset_s - OFFSET) < 3 * found.offset_standard_uncertainty_s


def test_one_badly_tracked_frame_does_not_end_the_beginning():
    time, axial, u, record = pull(1)
    axial[4] = 0.02
    found = fit_clock(time, axial, u, record, AUTO)
    # The frame stays in the fit and costs certainty, not truth.
    assert abs(found.offset_s - OFFSET) < 3 * found.offset_standard_uncertainty_s


def test_a_given_offset_is_used_as_it_is():
    time, axial, u, record = pull()
    found = fit_clock(time, axial, u, record, Sync(offset="3.5 s", drift=0.001))
    assert (found.offset_s, found.drift, found.offset_standard_uncertainty_s) == (3.5, 0.001, 0.0)
    assert "not included" in found.notes[0]
    sure = fit_clock(time, axial, u, record, Sync(offset="3.5 s", offset_uncertainty="50 ms"))
    assert (sure.offset_standard_uncertainty_s, sure.notes) == (0.05, ())
    assert found.machine_time(np.array([10.0]))[0] == pytest.approx(13.51)


@pytest.mark.parametrize("offset", [60.0, -60.0])
def test_a_given_offset_without_overlap(offset):
    time, axial, u, record = pull()
    with pytest.raises(ClockError, match=r"the record from 2\.37 s"):
        fit_clock(time, axial, u, record, Sync(offset=offset))


def test_too_few_measured_frames():
    time, axial, u, record = pull()
    axial[8:] = np.nan
    with pytest.raises(ClockError, match="only 8 frames were measured"):
        fit_clock(time, axial, u, record, AUTO)


def test_a_coupon_at_rest():
    with pytest.raises(ClockError, match="never rises above its noise"):
        fit_clock(*pull(rate=0.0), AUTO)


def test_a_record_that_ends_before_loading():
    # Loading starts at sample 150 to 160.
    time, axial, u, record = pull()
    early = LoadRecord(record.path, record.time_s[:40], record.force_N[:40])
    with pytest.raises(ClockError, match="never rises above its noise"):
        fit_clock(time, axial, u, early, AUTO)


RAMPS = [{}, {"rate": 1e-4, "length": 30.0}, {"rate": 8e-4, "stress": hardening}]


def assert_wide(found):
    """Hold a clock that cannot be told against the truth; it has to say so, and what would help."""
    assert abs(found.offset_s - OFFSET) < 2 * found.offset_standard_uncertainty_s
    # More than a frame: nothing in the data tells it better.
    assert found.offset_standard_uncertainty_s > 0.2
    assert [notice.code for notice in found.notices] == ["clock_wide"]
    assert "two seconds of rest" in found.notices[0].text


@pytest.mark.parametrize("case", RAMPS)
@pytest.mark.parametrize("seed", range(5))
def test_a_camera_that_starts_during_loading(seed, case):
    time, axial, u, record = pull(seed, **case)
    late = time > 4
    assert_wide(fit_clock(time[late], axial[late] - axial[late][0], u[late], record, AUTO))


@pytest.mark.parametrize("case", RAMPS)
@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize("after", [0.0, 0.8])
def test_a_record_that_starts_during_loading(seed, case, after):
    time, axial, u, record = pull(seed, **case)
    loaded = record.time_s > OFFSET + 2.2 + after
    late = LoadRecord(record.path, record.time_s[loaded], record.force_N[loaded])
    assert_wide(fit_clock(time, axial, u, late, AUTO))


@pytest.mark.parametrize("case", RAMPS)
@pytest.mark.parametrize("seed", range(5))
def test_a_bare_slope_is_not_given_a_false_certainty(seed, case):
    time, axial, u, record = pull(seed, **case)
    ramp, loaded = time > 4, record.time_s > OFFSET + 3
    bare = LoadRecord(record.path, record.time_s[loaded], record.force_N[loaded])
    assert_wide(fit_clock(time[ramp], axial[ramp], u[ramp], bare, AUTO))


def test_the_record_of_another_test():
    time, axial, u, record = pull()
    cycles = 1000 * np.sin(4 * record.time_s) + np.random.default_rng(0).normal(0, 10, len(record.time_s))
    with pytest.raises(ClockError, match=r"does not follow the force|do not both begin"):
        fit_clock(time, axial, u, replace(record, force_N=cycles), AUTO)


def test_frames_lost_at_a_fixed_rate_are_thought_of():
    time, axial, u, record = pull(3)
    # Half a second of frames is missing where loading has begun; the others are counted on without a gap.
    kept = np.r_[0:13, 20 : len(time)]
    with pytest.raises(ClockError, match=r"not follow the force; check .* \(frames\.rate, .* whether frames"):
        fit_clock(time[: len(kept)], axial[kept], u[kept], record, AUTO)


@pytest.mark.parametrize("size", [0.0, 10.0])
def test_a_record_without_load(size):
    time, axial, u, record = pull()
    idle = np.random.default_rng(0).normal(0, size, len(record.time_s))
    with pytest.raises(ClockError, match="the force never rises above its noise"):
        fit_clock(time, axial, u, replace(record, force_N=idle), AUTO)


@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize("rate", [4e-4, -4e-4])
def test_a_force_of_the_wrong_sign(seed, rate):
    time, axial, u, record = pull(seed, rate=rate)
    said = (
        "gets longer while the force is negative" if rate > 0 else "gets shorter while the force is positive"
    )
    with pytest.raises(LoadRecordError, match=said):
        fit_clock(time, axial, u, replace(record, force_N=-record.force_N), AUTO)


def test_a_spike_in_the_force_does_no_harm():
    time, axial, u, record = pull(2)
    spoiled = record.force_N.copy()
    spoiled[[60, 170, 180]] += [200.0, -300.0, 400.0]
    sound, found = (
        fit_clock(time, axial, u, one, AUTO) for one in (record, replace(record, force_N=spoiled))
    )
    # A bridged sample changes its frame's force by a share of the noise.
    assert found.offset_s == pytest.approx(sound.offset_s, abs=sound.offset_standard_uncertainty_s)
    assert found.offset_standard_uncertainty_s < 1.5 * sound.offset_standard_uncertainty_s


@pytest.mark.parametrize("seed", range(5))
def test_a_force_too_noisy_for_the_beginning(seed):
    found = fit_clock(*pull(seed, force_noise=0.03), AUTO)
    assert abs(found.offset_s - OFFSET) < 2 * found.offset_standard_uncertainty_s


def test_noise_is_no_information():
    # Rest alone: what slope the force shows is its noise, so no offset is better than another.
    time, axial, _, record = pull(rate=0.0)
    idle = np.random.default_rng(0).normal(0, 10.0, len(record.time_s))
    misfit = Misfit(Course(time, axial, 3e-6, replace(record, force_N=idle)))
    assert misfit.uncertainty(OFFSET) > misfit.interval / 2


def test_the_end_of_unloading_gives_the_drift():
    # Ten minutes between the two corners, each known to about 0.01 s, so to some 20 in a million.
    drift = 3e-4
    r = np.random.default_rng(5)
    camera, dense = np.arange(0, 608, 0.2), np.arange(-1, 609, 0.02)

    def strain_at(time):
        return 4e-4 * (np.clip(time - 2.07, 0, 5) - np.clip(time - 600.0, 0, 5))

    axial = strain_at(camera) + r.normal(0, 3e-6, len(camera))
    force = 25 * 70e3 * strain_at(dense) + r.normal(0, 5.0, len(dense))
    record = LoadRecord(Path("machine.csv"), OFFSET + (1 + drift) * dense, force)
    found = fit_clock(camera, axial, np.full(len(camera), 3e-6), record, AUTO)
    assert found.drift == pytest.approx(drift, abs=50e-6)
    assert abs(found.drift - drift) < 3 * found.drift_standard_uncertainty < 2e-4
    assert "the end of unloading" in found.method


def broken(seed=0, *, drift=0.0):
    """Return a pull whose coupon breaks at 10.05 s, with the frames lost from then on."""
    time, axial, u, record = pull(seed, drift=drift)
    camera = (record.time_s - OFFSET) / (1 + drift)
    return (
        time,
        np.where(time < 10.05, axial, np.nan),
        u,
        replace(record, force_N=np.where(camera < 10.05, record.force_N, 0.0)),
    )


@pytest.mark.parametrize("seed", range(5))
def test_fracture_bounds_what_a_bare_ramp_leaves_open(seed):
    time, axial, u, record = broken(seed)
    late = time > 4
    found = fit_clock(time[late], axial[late], u[late], record, AUTO)
    # The frames around the fracture are 0.2 s apart, and five rows of 0.02 s make 0.3 s, but for rounding.
    assert abs(found.offset_s - OFFSET) < 2 * found.offset_standard_uncertainty_s < 2 * 0.301 / np.sqrt(12)
    assert "from the fracture" in found.method


def test_a_fracture_that_contradicts_the_start_is_said():
    assert fit_clock(*broken(), AUTO).notices == ()
    said = fit_clock(*broken(drift=0.09), AUTO).notices
    assert [one.code for one in said] == ["clock_fracture"]
    assert "before the force falls" in said[0].text


def long_and_broken(seed, drift, *, lost_early=0.0):
    """Return an hour's test, 5 Hz and 10 Hz, whose coupon breaks at a random phase of both."""
    r = np.random.default_rng(seed)
    camera, dense = np.arange(0, 3600, 0.2), np.arange(-1, 3700, 0.1)
    start, end = 2 + r.uniform(0, 0.2), 3590 + r.uniform(0, 0.2)

    def strain_at(time):
        return 4e-4 * np.clip(time - start, 0, 5) + 2e-6 * np.clip(time - start - 5, 0, None)

    force = np.where(dense < end, 25 * 70e3 * strain_at(dense), 0) + r.normal(0, 5, len(dense))
    axial = np.where(camera < end - lost_early, strain_at(camera), np.nan) + r.normal(0, 3e-6, len(camera))
    record = LoadRecord(Path("machine.csv"), OFFSET + (1 + drift) * dense, force)
    return camera, axial, np.full(len(camera), 3e-6), record


@pytest.mark.parametrize("drift", [3e-5, -2e-5])
def test_fracture_tells_the_drift_of_a_long_test(drift):
    for seed in range(3):
        found = fit_clock(*long_and_broken(seed, drift), AUTO)
        # A frame and five rows bracket the fracture: ± 0.35 s in an hour, for which a rectangle gives 56 ppm.
        assert abs(found.drift - drift) < 2 * found.drift_standard_uncertainty < 2 * 57e-6
        assert found.method.endswith("and from the fracture")
        assert found.notices == ()


def test_frames_lost_long_before_the_fracture_tell_no_drift():
    found = fit_clock(*long_and_broken(0, 0.0, lost_early=3.0), AUTO)
    assert (found.drift, found.drift_standard_uncertainty) == (0.0, 0.0)
    assert [one.code for one in found.notices] == ["clock_fracture"]


def test_dates_that_contradict_the_loading_are_said():
    time, axial, u, record = pull()
    noon = datetime(2024, 5, 6, 12, 0, 0)
    dated = replace(record, epoch=noon)
    agree = fit_clock(time, axial, u, dated, AUTO, epoch=noon + timedelta(seconds=OFFSET + 40))
    assert agree.notices == ()
    said = fit_clock(time, axial, u, dated, AUTO, epoch=noon + timedelta(hours=1, seconds=OFFSET)).notices
    assert [one.code for one in said] == ["clock_dates"]
    assert "3.6e+03 s later" in said[0].text


@pytest.mark.parametrize("turned", [1, -1])
def test_crosshead_travel_tells_what_a_record_zeroed_under_load_hides(turned):
    # The camera films the crosshead's start; slack keeps force and strain at rest until the film has ended.
    r = np.random.default_rng(2)
    time, axial, u, record = pull(2)
    seen, camera = time > 4, record.time_s - OFFSET
    film = time[seen]
    travel = np.clip(camera - 6.11, 0, None) * 0.05
    shift = turned * 40 * np.clip(film - 6.11, 0, None) * 0.05 + r.normal(0, 0.01, len(film))
    both = replace(record, displacement_mm=np.round(travel, 4))
    alone = fit_clock(film, axial[seen], u[seen], both, AUTO)
    found = fit_clock(film, axial[seen], u[seen], both, AUTO, shift_px=shift)
    assert alone.offset_standard_uncertainty_s > 1
    assert abs(found.offset_s - OFFSET) < 3 * found.offset_standard_uncertainty_s < 0.06
    assert "crosshead" in found.method
