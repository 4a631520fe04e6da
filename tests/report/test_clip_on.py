"""What the page says of a clip-on extensometer."""

import dataclasses

import numpy as np
import pytest

from dic.comparison import compare
from dic.report.clip_on import agreement_rows, class_rows, draw_clip_on
from dic.report.figures import house_style
from dic.report.page import write_report
from dic.store.results import results_of


@pytest.fixture(scope="module")
def with_clip_on(measurement):
    """The coupon's own strain, 0.3 % too large and 40 µm/m off, until it is taken off at 13 s."""
    history, curve, record = measurement.history, measurement.curve, measurement.record
    there = np.isfinite(curve.axial)
    strain = np.interp(record.time_s, curve.time_s[there], curve.axial[there])
    noise = np.random.default_rng(1).normal(0, 3e-6, len(strain))
    clip = np.where(record.time_s < 13.0, 1.003 * strain + 4e-5, 0.0) + noise
    record = dataclasses.replace(record, extensometer=clip)
    found = compare(
        record, measurement.clock, history, curve, measurement.properties["youngs_modulus"],
        reference=slice(0, 10), length_mm=50.0,
    )  # fmt: skip
    return dataclasses.replace(measurement, record=record, clip_on=found)


def test_page_has_slope_offset_classes_and_both_figures(with_clip_on, fields, tmp_path):
    page = write_report(with_clip_on, fields, tmp_path).read_text()
    for words in ("Camera against clip-on extensometer", "not a calibration", "ISO 9513 class 0.5",
                  "ASTM E83 class B-1", "no longer follows"):  # fmt: skip
        assert words in page, words
    for name in ("clip-on-curves", "clip-on-difference"):
        assert f'id="{name}"' in page
        assert (tmp_path / "figures" / f"{name}.svg").stat().st_size > 0


def test_without_clip_on_nothing_is_said_of_it(measurement):
    assert draw_clip_on(measurement) == []
    assert "clip_on" not in results_of(measurement)


def test_rows_say_what_the_comparison_found(with_clip_on):
    found = with_clip_on.clip_on
    (name, slope, _, frames, _), _ = agreement_rows(found)
    assert name == "all frames compared"
    assert float(slope.split(" ± ")[0]) == pytest.approx(found.whole.slope, abs=found.whole.u_slope)
    assert frames == str(found.used.sum())
    assert {verdict for _, verdict, _ in class_rows(found)} <= {"within", "beyond", "cannot be told"}


def test_results_carry_the_same_figures(with_clip_on):
    said = results_of(with_clip_on)["clip_on"]
    assert said["slope"] == with_clip_on.clip_on.whole.slope
    assert said["modulus_window"]["u_offset"] == with_clip_on.clip_on.window.u_offset
    assert len(said["classes"]) == 10
    assert said["gauge_length_mm"] == 50.0


def test_difference_is_drawn_on_a_scale_that_shows_it(with_clip_on):
    with house_style():
        _, difference = draw_clip_on(with_clip_on)
        low, high = difference.figure.axes[0].get_ylim()
    # 0.3 % of 1.2 % strain are 36 µm/m; limits of 0.5 % and more must not widen the axis without end.
    assert 30 < high < 200
    assert -200 < low < 0


def test_nothing_compared_draws_nothing(with_clip_on):
    found = dataclasses.replace(with_clip_on.clip_on, used=np.zeros(70, bool))
    assert draw_clip_on(dataclasses.replace(with_clip_on, clip_on=found)) == []
