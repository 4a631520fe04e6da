"""What figures choose: moments, units, colours, lengths."""

import dataclasses

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from skimage.color import rgb2lab

from dic.report import figures, photograph, words
from dic.report.clocks import draw_clocks
from dic.report.curves import draw_curves, proof_stresses
from dic.report.moments import choose_moments, loading


def test_moments_follow_the_test(measurement):
    moments = choose_moments(measurement)
    assert [moment.letter for moment in moments] == ["A", "B", "C"]
    elastic, proof, largest = (moment.row for moment in moments)
    curve = measurement.curve
    # The middle of the window is 0.001; frames lie 0.0002 apart there.
    assert curve.axial[elastic] == pytest.approx(0.001, abs=1.1e-4)
    assert curve.stress_MPa[proof - 1] < 250.0 <= curve.stress_MPa[proof]
    assert curve.stress_MPa[largest] == curve.stress_MPa.max()


def test_moments_of_a_compression_test_mirror_those_of_tension(measurement, pressed):
    assert [m.row for m in choose_moments(pressed)] == [m.row for m in choose_moments(measurement)]


def test_a_frame_is_shown_once(measurement):
    line = measurement.line
    late = dataclasses.replace(line, low=0.024, high=0.026)
    moments = choose_moments(dataclasses.replace(measurement, line=late))
    assert len({moment.row for moment in moments}) == len(moments)


def test_frames_after_fracture_and_lost_ones_do_not_load(measurement):
    assert not loading(measurement)[[24, 67, 68, 69]].any()
    assert loading(measurement).sum() == 66


def test_proof_stress_that_was_not_reached_is_not_drawn(measurement):
    [(offset, item)] = proof_stresses(measurement)
    assert offset == pytest.approx(0.002, rel=1e-12)  # "0.2" is not a binary fraction
    assert item.symbol == "Rp0.2"


@pytest.mark.parametrize(("strain", "unit"), [(1e-5, "µm/m"), (0.0049, "µm/m"), (0.0051, "%"), (0.3, "%")])
def test_strain_unit_suits_the_size(strain, unit):
    scale, shown = figures.strain_unit(np.array([np.nan, -strain]))
    assert shown == unit
    assert scale == pytest.approx({"µm/m": 1e6, "%": 100.0}[unit], rel=1e-12)  # one division


def test_strain_unit_of_nothing_measured():
    assert figures.strain_unit(np.array([np.nan]))[1] == "µm/m"


def test_long_histories_are_thinned_for_drawing_only():
    long, short = np.arange(100_000.0), np.arange(70.0)
    (drawn,) = figures.thinned(long)
    assert 1000 < len(drawn) <= 3000
    assert drawn[0] == 0.0
    np.testing.assert_array_equal(figures.thinned(short)[0], short)
    assert len(figures.thinned(np.empty(0))[0]) == 0


def test_colours_about_zero_are_even_to_the_eye():
    # CIE 1976 L*a*b* distance between neighbours (CIE 015): even on each side, darkest at both ends alike.
    lab = rgb2lab(photograph.zero_colours().colors[np.newaxis])[0]
    steps = np.linalg.norm(np.diff(lab, axis=0), axis=1)
    for side in (steps[:127], steps[128:]):
        # The way back from colour to CIELAB rounds in the fourth digit; a clipped colour would show at once.
        np.testing.assert_allclose(side, side.mean(), rtol=0.02)
    np.testing.assert_allclose(lab[:, 0], lab[::-1, 0], atol=0.05)  # a just visible step is about 1
    assert lab[127, 0] > 90 > 40 > lab[0, 0]


@given(st.floats(min_value=1e-6, max_value=1e6))
def test_scale_bar_is_round_and_fits(length):
    bar = photograph._round_length(length)
    # 1, 2 and 5 leave gaps of at most 2.5; the last digits belong to floating point.
    assert length / 2.5 < bar * (1 + 1e-9)
    assert bar <= length * (1 + 1e-9)
    assert f"{bar:.6e}"[0] in "125"
    assert set(f"{bar:.6e}"[1:8]) <= {".", "0"}


def test_windows_in_words():
    bounds = {"strain": (0.0005, 0.0025), "stress_MPa": (20.0, 120.0), "time_s": (3.5, 3.5)}
    said = words.window(bounds)
    assert said.replace(words.NO_BREAK, " ") == "strain 500 to 2500 µm/m; stress 20 to 120 MPa; time 3.5 s"
    assert said.count(words.NO_BREAK) == 3  # one before each unit
    assert words.window({}) == ""


def test_symbols_are_set_and_escaped():
    assert words.symbol("Rp0.2") == "<i>R</i><sub>p0.2</sub>"
    assert words.symbol("ν") == "<i>ν</i>"
    assert words.symbol("<b>") == "<i>&lt;</i><sub>b&gt;</sub>"


def test_keys_break_at_their_joints_and_stay_escaped():
    assert words.breakable("gauge.max_<b>") == "gauge.<wbr>max_<wbr>&lt;b&gt;"
    assert words.breakable("plain") == "plain"


def test_small_shares_are_not_called_none():
    assert [words.share(value) for value in (0.0, 0.2, 1.4, 100.0)] == ["0 %", "< 1 %", "1 %", "100 %"]


def test_figures_in_words():
    rows = words.labelled(
        {
            "bending_percent": 3.21,
            "edge_shift_px": 0.5,
            "valid_fraction": 0.998,
            "strain_noise": 4e-6,
            "tilt_deg": 0.0006,
            "shear_percent": float("nan"),
            "camera": "left",
        }
    )
    shown = ["3.21 %", "0.5 px", "99.8 %", "4 µm/m", "0.00°", "not determined", "left"]
    assert [row[1] for row in rows] == shown
    assert rows[1][0] == "Edge shift"
    assert "one camera" in rows[0][2]


def test_a_figure_and_its_uncertainty_make_one_row():
    """Expanded, k = 2, and rounded to two of its digits."""
    figures = {"bending_percent": -6.0731, "u_bending_percent": 0.12, "u_axis_deg": 0.02, "x_corrected": 0.0}
    rows = words.labelled(figures, {"left": "upper", "right": "lower", "near": "right", "far": "left"})
    assert [row[1] for row in rows] == ["-6.07 ± 0.24 %", "0.020°", "no"]
    assert "the lower edge" in rows[0][2]


def test_settings_become_rows():
    rows = words.flat({"a": {"b": 0.5, "c": [1.0, 2]}, "d": "x"})
    assert rows == [("a.b", "0.5"), ("a.c", "1, 2"), ("d", "x")]
    assert [caption for caption, _ in words.grouped({"sha256": {"x": "0"}, "made": "now"})] == [
        "General",
        "Fingerprints of the inputs (SHA-256)",
    ]


def lines_of(drawing):
    """Return the corners of each line of a figure, guides across the whole sheet left out."""
    lines = [np.asarray(line.get_xydata()) for line in drawing.figure.axes[0].lines]
    return [line for line in lines if line[:, 0].tolist() != [0, 1]]


def test_figures_of_compression_mirror_those_of_tension(measurement, pressed):
    turned = [("stress-strain", 4), ("elastic-part", 4), ("modulus-residuals", 1)]
    up, down = ({one.name: one for one in draw_curves(test, [])} for test in (measurement, pressed))
    for name, count in turned:
        assert len(lines_of(up[name])) == count
        for line, mirrored in zip(lines_of(up[name]), lines_of(down[name]), strict=True):
            # Half a turn, but for rounding.
            np.testing.assert_allclose(-mirrored, line, rtol=1e-9, atol=1e-9)
        if name != "modulus-residuals":
            np.testing.assert_allclose(
                [-limit for limit in reversed(down[name].figure.axes[0].get_xlim())],
                up[name].figure.axes[0].get_xlim(),
            )
    [up], [down] = draw_clocks(measurement), draw_clocks(pressed)
    for line, mirrored in zip(lines_of(up), lines_of(down), strict=True):
        np.testing.assert_allclose(mirrored * (1, -1), line, rtol=1e-9, atol=1e-9)


def test_the_valley_of_the_misfit_lies_where_the_offset_was_taken(measurement):
    clock = measurement.clock
    tried = clock.offset_s + np.linspace(-0.4, 0.4, 81)
    misfit = np.hypot(1.0, (tried - clock.offset_s) / 0.01)
    fitted = dataclasses.replace(clock, tried_s=tried, misfit=misfit)
    *_, drawn = draw_clocks(dataclasses.replace(measurement, clock=fitted))
    assert drawn.name == "clock-offset"
    valley = lines_of(drawn)[0]
    # The lowest of the tried offsets is the one taken, but for rounding.
    assert valley[np.argmin(valley[:, 1]), 0] == pytest.approx(clock.offset_s, abs=1e-9)
    [without] = draw_clocks(measurement)
    assert without.name == "clocks"
