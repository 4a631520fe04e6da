"""Was the coupon loaded straight: sentences that somebody can act on, and the figures behind them."""

from __future__ import annotations

from math import isfinite

import numpy as np
from numpy.typing import NDArray

from dic.measurement import Measurement, Scene
from dic.pattern import axes as coupon_axes
from dic.report.figures import AID, AXIAL, FAINT, TRANSVERSE, Drawing, legend_above, sheet
from dic.report.photograph import extent_of, lay_over, panels_over, zero_colours
from dic.rounding import with_uncertainty
from dic.strain.alignment import BEYOND, LIMITS, WITHIN, Alignment, Estimate
from dic.testfile import TestFile

#: Said wherever a figure of bending is shown.
NOT_SEEN = (
    "Bending through the thickness is invisible to one camera: a coupon that looks straight here may still "
    "be bent towards or away from the camera. Where that matters, measure the opposite face as well."
)


def sides(scene: Scene) -> tuple[str, str, str, str]:
    """Name the coupon's sides and ends in the picture: against and along `transverse`, then `axial`."""
    along, across = coupon_axes(scene.axis_angle_deg)
    return (_named(-across), _named(across), _named(-along), _named(along))


def _named(direction: NDArray[np.float64]) -> str:
    x, y = direction
    if abs(x) >= abs(y):
        return "right" if x > 0 else "left"
    return "lower" if y > 0 else "upper"


def verdict(measurement: Measurement) -> str:
    """Say in one or two sentences whether bending keeps its limit."""
    found, test = measurement.alignment, measurement.test
    if found.reason:
        return f"Alignment was not determined: {found.reason}."
    size = _percent(found.largest)
    if found.limit is None:
        return f"Bending reaches {size} of the mean strain in the gauge. {_no_limit(test)}"
    limit = f"{100 * found.limit:g} % of {found.limit_source}"
    if found.verdict == WITHIN:
        return (
            f"Within the limit: bending reaches {size} of the mean strain in the gauge; allowed are {limit}."
        )
    if found.verdict == BEYOND:
        return (
            f"Beyond the limit: bending reaches {size} of the mean strain in the gauge; allowed are {limit}."
        )
    return (
        f"Cannot be told: bending reaches {size} of the mean strain, and the limit, {limit}, lies inside "
        f"that uncertainty. A wider part of the coupon in view, more frames in the elastic part or less "
        f"camera noise would decide it."
    )


def _no_limit(test: TestFile) -> str:
    named = test.alignment.standard
    said = f"{named} leaves the limit to others. " if named in LIMITS else ""
    return f'{said}No limit is set; give one as alignment.limit = "5 %" for a verdict.'


def sentences(measurement: Measurement) -> list[str]:
    """Return what was seen and what to look at on the machine, one thought each."""
    found, scene = measurement.alignment, measurement.scene
    if found.reason:
        return [NOT_SEEN]
    return [*_bending(found, scene), *_causes(found, scene), *_growth(found), *_motion(found), NOT_SEEN]


def _bending(found: Alignment, scene: Scene) -> list[str]:
    left, right, near, far = sides(scene)
    middle, change = found.bending, found.bending_change
    said = []
    if _clear(middle):
        more = right if middle.value > 0 else left
        said.append(
            f"At the gauge's middle the {more} edge is strained {_percent(middle)} more than the mean."
        )
    else:
        said.append(f"At the gauge's middle no bending is seen ({_percent(middle)}).")
    if _clear(change):
        more = far if middle.value * change.value >= 0 else near
        said.append(f"Towards the {more} end it grows by {_percent(change)}.")
    return said


def _causes(found: Alignment, scene: Scene) -> list[str]:
    causes = found.causes
    said = [_REMEDIES[name](found, scene) for name in causes.found]
    if causes.possible:
        names = " or ".join(_NAMES[name] for name in causes.possible)
        if said or causes.straight:
            said.append(f"Too faint to be sure of: {names}.")
        else:
            said.append(
                f"The pattern fits {names}; from these pictures they cannot be told apart. Check each."
            )
    if not said:
        said.append("No pattern of a crooked grip, a tilted camera or a tapered coupon stands out.")
    if causes.misfit > _POOR:
        said.append("None of the known patterns fits well; look at the contrast maps below for local causes.")
    return said


#: χ² per figure above which no explanation is called good: exceeded by chance once in a thousand.
_POOR = 5.0

_NAMES = {
    "offset": "a line of load beside the coupon's middle",
    "opposed": "grips that stand sideways of each other",
    "oblique": "a coupon that moves at an angle to its axis",
    "tilt": "a coupon that is tilted in the grips",
    "camera": "a tilted camera",
    "taper": "a section that changes along the coupon",
}


def _offset(found: Alignment, scene: Scene) -> str:
    left, right, *_ = sides(scene)
    more, less = (right, left) if found.bending.value > 0 else (left, right)
    width = float(np.linalg.norm(scene.region[1] - scene.region[0])) * scene.scale_mm
    away = abs(found.bending.value) * width / 6
    size = f", by {away:.2g} mm if the grips can swing freely" if isfinite(away) else ""
    return (
        f"The coupon is loaded beside its middle, on the {more} side all along{size}. Measure how far each "
        f"of its edges is from the grip's edge, at both ends, and shift the coupon to the {more}; if it is "
        f"centred, the two grips are turned against each other so that they open the {more} edge and close "
        f"the {less} one: check that their faces are parallel."
    )


def _opposed(found: Alignment, scene: Scene) -> str:
    return (
        "Bending changes sign along the coupon while it moves along its own axis: the load enters on "
        "opposite sides at its two ends. Check with a straight bar whether the upper and the lower grip (or "
        "pin) stand sideways of each other, and bring them into one line."
    )


def _tilt(found: Alignment, scene: Scene) -> str:
    turned = "clockwise" if found.motion_deg.value > 0 else "anticlockwise"
    return (
        f"Bending changes sign along the coupon and it moves at {_degrees(found.motion_deg)} to its axis: it "
        f"is tilted in the grips. Clamp it anew with its edges parallel to the machine's axis; seen by the "
        f"camera, turn it {turned} by that angle. Grips that stand far sideways of each other look the same: "
        f"check them with a straight bar if a coupon clamped square shows it again."
    )


def _oblique(found: Alignment, scene: Scene) -> str:
    return (
        f"The coupon moves at {_degrees(found.motion_deg)} to its axis without bending of a kind that goes "
        f"with it. Check gauge.axis against the coupon's edges in the picture first, then whether the "
        f"crosshead runs true or the camera was moved."
    )


def _camera(found: Alignment, scene: Scene) -> str:
    return (
        "Axial and transverse strain change together across the picture while the axis stays straight: this "
        "is not in the coupon but in the view. Square the camera to the coupon's face (its image should be "
        "as wide at the top as at the bottom), and check that the coupon does not turn about its long axis "
        "as it is loaded. The bending figure above is then apparent, too."
    )


def _taper(found: Alignment, scene: Scene) -> str:
    *_, near, far = sides(scene)
    more = far if found.along.value > 0 else near
    return (
        f"Strain rises towards the {more} end, and the coupon narrows with it: its section is smaller there, "
        f"or the gauge reaches into a shoulder at the other end. Measure width and thickness at both ends of "
        f"the gauge, or shorten gauge.region."
    )


_REMEDIES = {
    "offset": _offset,
    "opposed": _opposed,
    "oblique": _oblique,
    "tilt": _tilt,
    "camera": _camera,
    "taper": _taper,
}


def _growth(found: Alignment) -> list[str]:
    low, high = found.bending_low, found.bending_high
    change = Estimate(abs(high.value) - abs(low.value), float(np.hypot(low.u, high.u)))
    if not isfinite(change.value):
        return []
    if not _clear(change):
        return ["Bending grows in proportion to the force: the load path does not change while loading."]
    if change.value > 0:
        return [
            f"Bending grows faster than the force, from {_percent(low)} in the lower half of the elastic "
            f"part to {_percent(high)} in the upper: something slips or yields; tighten the grips and check "
            f"for play."
        ]
    return [
        f"Bending falls behind the force, from {_percent(low)} in the lower half of the elastic part to "
        f"{_percent(high)} in the upper: the coupon straightens itself or the grips settle; preload it "
        f"before the test, and check that the coupon was straight."
    ]


def _motion(found: Alignment) -> list[str]:
    if not isfinite(found.motion_deg.value) or {"tilt", "oblique"} & set(found.causes.found):
        return []
    return [f"The gauge moves at {_degrees(found.motion_deg)} to its axis (clockwise positive)."]


def _clear(estimate: Estimate) -> bool:
    return bool(abs(estimate.value) > 2 * estimate.u)


def _percent(estimate: Estimate) -> str:
    return with_uncertainty(100 * abs(estimate.value), 200 * estimate.u, "%")


def _degrees(estimate: Estimate) -> str:
    return with_uncertainty(estimate.value, 2 * estimate.u, "°")


def draw_alignment(measurement: Measurement) -> list[Drawing]:
    """Draw strain across the width station by station, and the contrast maps; nothing if undetermined."""
    found = measurement.alignment
    if found.reason:
        return []
    return [_stations(measurement), _contrast(measurement)]


def _stations(measurement: Measurement) -> Drawing:
    found, scene = measurement.alignment, measurement.scene
    stations, scale = found.stations, scene.scale_mm if isfinite(scene.scale_mm) else 1.0
    unit = "mm" if isfinite(scene.scale_mm) else "px"
    left, right, near, far = sides(scene)
    figure, (across, along) = sheet(2, height=5.2)
    for k, place in enumerate(stations.along_px):
        across.errorbar(
            scale * stations.across_px, 100 * (stations.profile[k] - 1), 200 * stations.u_profile[k],
            fmt="o-", ms=3, lw=1, capsize=2, color=_shade(k, len(stations.along_px)),
            label=f"at {scale * place:+.1f} {unit}",
        )  # fmt: skip
    across.axhline(0, color=FAINT, lw=0.8)
    across.set(
        xlabel=f"across the coupon, {unit} ({left} – {right})", ylabel="axial strain less the\nmean, % of it"
    )
    legend_above(across, 3)
    for values, u, label, colour, mark in (
        (stations.bending, stations.u_bending, f"bending ({right} edge)", TRANSVERSE, "o"),
        (stations.strain - 1, stations.u_strain, "strain less the mean", AXIAL, "s"),
    ):
        along.errorbar(
            scale * stations.along_px, 100 * values, 200 * u, fmt=f"{mark}-", ms=4, lw=1, capsize=3,
            color=colour, label=label,
        )  # fmt: skip
    if found.limit is not None:
        for level in (-100 * found.limit, 100 * found.limit):
            along.axhline(level, color=AID, lw=0.9, ls="--", label="limit" if level > 0 else None)
    along.axhline(0, color=FAINT, lw=0.8)
    along.set(xlabel=f"along the coupon, {unit} ({near} – {far})", ylabel="% of the mean strain")
    legend_above(along, 2)
    reading = (
        "Above: axial strain across the width at stations along the gauge, by place along it; straight and "
        "level is straight loading, a slope is bending. Below: bending at each station (how much the "
        f"{right} edge is strained more than the middle) and the mean strain of the stations. Bending of one "
        f"sign all along belongs to a load beside the middle, a change of sign to ends that are pushed "
        f"sideways against each other. Bars: k = 2. From {found.frames} frames in the elastic part. "
        f"{NOT_SEEN}"
    )
    alt = "Axial strain across the width at several stations, and bending along the coupon, with error bars."
    return Drawing("alignment-stations", "Bending, station by station", reading, alt, figure)


def _shade(k: int, count: int) -> str:
    grey = 0.75 * k / max(count - 1, 1)
    return f"{grey:.2f}"


def _contrast(measurement: Measurement) -> Drawing:
    found, scene = measurement.alignment, measurement.scene
    rows, columns = scene.photograph.shape
    tall = rows > columns
    figure, panels = panels_over(scene, (0, columns, 0, rows), 2)
    left, right, near, far = sides(scene)
    places = ("on the left", "on the right") if tall else ("above", "below")
    titles = (f"{left} against {right}, %", f"{far} against {near}, %")
    extent = extent_of(found.columns, found.rows, scene.step_px)
    for axes, values, title in zip(panels, (found.sides, found.ends), titles, strict=True):
        axes.set_title(title, fontsize=8)
        if np.isfinite(values).any():
            most = 100 * float(np.nanpercentile(np.abs(values), 98))
            lay_over(axes, 100 * values, extent, (-most, most), zero_colours())
    reading = (
        "Local axial strain less that of the point opposite, halved, in percent of the mean strain: "
        f"{places[0]} mirrored at the coupon's axis, {places[1]} at the middle of its length. Brown is "
        "strained more than its mirror image, blue less. A smooth change from edge to edge is bending or "
        "taper; a spot is a local weakness; even mottling is noise."
    )
    alt = "Contrast maps of axial strain over the photograph: side against side, and end against end."
    return Drawing("alignment-contrast", "What is not symmetric", reading, alt, figure, vector=False)
