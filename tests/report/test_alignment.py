"""The alignment section: every sentence says what to look at, and none forgets what cannot be seen."""

import dataclasses

import numpy as np
import pytest

from dic.report.alignment import NOT_SEEN, draw_alignment, sentences, sides, verdict
from dic.strain.alignment import Alignment, Estimate
from dic.strain.causes import Causes


def with_alignment(measurement, **changes):
    return dataclasses.replace(measurement, alignment=dataclasses.replace(measurement.alignment, **changes))


@pytest.mark.parametrize(
    ("cause", "words"),
    [
        ("offset", "shift the coupon to the right"),
        ("opposed", "straight bar"),
        ("tilt", "turn it clockwise"),
        ("oblique", "gauge.axis"),
        ("camera", "Square the camera"),
        ("taper", "Measure width and thickness"),
    ],
)
def test_each_cause_says_what_to_do(measurement, cause, words):
    found = with_alignment(
        measurement, bending=Estimate(0.05, 0.002), causes=Causes((cause,), (), False, 1.0)
    )
    said = " ".join(sentences(found))
    assert words in said
    assert said.endswith(NOT_SEEN)


def test_causes_that_cannot_be_told_apart_are_both_named(measurement):
    found = with_alignment(measurement, causes=Causes((), ("offset", "camera"), False, 1.0))
    (said,) = (one for one in sentences(found) if "cannot be told apart" in one)
    assert "beside the coupon's middle" in said
    assert "tilted camera" in said


def test_the_eccentricity_is_that_of_a_rectangular_section(measurement):
    """Strain at the edge 6·e/w per mean strain; w = 180 px of 0.0568 mm: 5 % are 0.085 mm."""
    found = with_alignment(measurement, bending=Estimate(0.05, 0.002), causes=Causes(("offset",)))
    assert "0.085 mm" in " ".join(sentences(found))


@pytest.mark.parametrize(
    ("largest", "words"),
    [(0.03, "Within the limit"), (0.08, "Beyond the limit"), (0.048, "Cannot be told")],
)
def test_the_verdict_in_words(measurement, largest, words):
    said = verdict(with_alignment(measurement, largest=Estimate(largest, 0.003)))
    assert said.startswith(words)
    assert "5 % of ASTM E606" in said


def test_without_a_limit_the_key_is_named(measurement):
    assert "alignment.limit" in verdict(with_alignment(measurement, limit=None))


def test_bending_that_does_not_follow_the_force_is_said(measurement):
    low, high = Estimate(0.08, 0.004), Estimate(0.03, 0.004)
    said = " ".join(sentences(with_alignment(measurement, bending_low=low, bending_high=high)))
    assert "falls behind the force" in said


def test_sides_are_named_as_they_are_seen(measurement):
    def named(angle):
        return sides(dataclasses.replace(measurement.scene, axis_angle_deg=angle))

    assert named(3.0) == ("left", "right", "lower", "upper")
    assert named(90.0) == ("upper", "lower", "left", "right")


def test_undetermined_alignment_has_its_reason_and_no_figures(measurement):
    found = dataclasses.replace(measurement, alignment=Alignment("only 2 frames lie in the elastic part"))
    assert "only 2 frames" in verdict(found)
    assert sentences(found) == [NOT_SEEN]
    assert draw_alignment(found) == []
    assert found.alignment.figures()["stations"] == []


def test_figures_show_stations_and_limit(measurement):
    stations, contrast = draw_alignment(measurement)
    along = stations.figure.axes[1]
    levels = [line.get_ydata()[0] for line in along.lines if len(set(line.get_ydata())) == 1]
    assert {-5.0, 5.0} <= set(np.round(levels, 9))
    assert NOT_SEEN in stations.reading
    assert len([axes for axes in contrast.figure.axes if axes.images]) >= 2
    rows, columns = measurement.scene.photograph.shape
    assert ("on the left mirrored" if rows > columns else "above mirrored") in contrast.reading
