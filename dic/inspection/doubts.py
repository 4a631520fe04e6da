"""What in the inputs looks wrong, each with its remedy."""

from __future__ import annotations

from collections.abc import Iterator
from math import isfinite

from dic.errors import Notice
from dic.inspection.seen import FramesSeen
from dic.sync import LoadRecord, has_load
from dic.testfile import Specimen

#: Share of clipped pixels from which the pattern is harmed.  Common practice, no published source.
MOST_CLIPPED = 0.01
#: Change of brightness from which light or exposure were not steady.  Matching takes it out, but it
#: brings clipping and more noise.  Common practice, no published source.
MOST_DRIFT = 0.2
#: Least range from dark to bright, as a share of the full scale.  Common practice, no published source.
LEAST_RANGE = 0.15
#: Change of the finest detail's size from which focus or motion blur were not steady.
MOST_BLUR = 1.3
#: Coupons outside these sides are possible, but a wrong unit is likelier.
SIDES_MM = (0.005, 300.0)
#: No material bears more (carbon fibres reach 7 GPa), so area or force must be wrong.
MOST_STRESS_MPA = 10_000.0
#: A test that stays below this is hardly one of a solid.
LEAST_STRESS_MPA = 0.01
#: A calliper that is wrong by more makes every stress worthless.
MOST_UNCERTAIN = 0.1


def frame_doubts(seen: FramesSeen) -> Iterator[Notice]:
    """Warn of doubles and exposure that harm the measurement."""
    if seen.doubles:
        yield Notice(
            "frames_doubled",
            f"{len(seen.doubles)} frame{'s show' if len(seen.doubles) > 1 else ' shows'} exactly the picture "
            f"before, the first is {seen.doubles[0]}; a camera that froze shows no new instant: slow it down "
            "or film to a faster disk.",
        )
    worst = max(seen.exposures, key=lambda one: one.clipped, default=None)
    if worst is not None and worst.clipped > MOST_CLIPPED:
        yield Notice(
            "frames_clipped",
            f"{worst.clipped:.0%} of the pixels of {worst.frame} are clipped; if they lie on the coupon, dim "
            "the light or shorten the exposure.",
        )
    for shown in seen.exposures[:1]:
        if shown.bright - shown.dark < LEAST_RANGE * seen.full_scale:
            yield Notice(
                "frames_flat",
                f"{shown.frame} uses {(shown.bright - shown.dark) / seen.full_scale:.0%} of the grey "
                "range; more light or a stronger pattern lowers the noise in strain.",
            )
    if seen.brightness_drift > MOST_DRIFT:
        yield Notice(
            "frames_brightness",
            f"The frames' brightness changes by {seen.brightness_drift:.0%}; use a steady light and a fixed "
            "exposure.",
        )
    detail = [one.detail_px for one in seen.exposures if isfinite(one.detail_px)]
    if detail and max(detail) > MOST_BLUR * min(detail):
        yield Notice(
            "frames_blurred",
            f"The finest detail is {min(detail):.1f} px in one frame and {max(detail):.1f} px in another; if "
            "focus or motion blur changed, refocus, stop the lens down or shorten the exposure.",
        )


def record_doubts(record: LoadRecord) -> Iterator[Notice]:
    """Warn of a force that is none, or of the wrong sign, and pass on what reading the record met."""
    yield from record.notices
    if not has_load(record):
        yield Notice(
            "record_no_load",
            "The force never rises above its noise; check load_record.force and that this is the whole test.",
        )
    elif abs(record.force_N.min()) > abs(record.force_N.max()):
        yield Notice(
            "record_negative",
            "The force is mostly negative, and tension counts as positive; if the coupon was pulled, export "
            "the force with its sign turned.",
        )


def missing_uncertainties(specimen: Specimen, force_uncertainty: float | None) -> Iterator[Notice]:
    """Warn of uncertainties that are not given and will not be in the budget."""
    blank = [] if force_uncertainty is not None else ["load_record.force_uncertainty"]
    blank += specimen.unstated
    if blank:
        yield Notice(
            "uncertainty_not_given",
            f"The stated uncertainties will leave out what is not given: {', '.join(blank)}.",
        )


def dimension_doubts(
    specimen: Specimen, *, most_force: float | None, scale: float | None, picture: int | None
) -> Iterator[Notice]:
    """Warn of dimensions that look like a wrong unit or a slip of the pen.

    Parameters
    ----------
    specimen
        The coupon.
    most_force
        Largest force of the record, N.
    scale
        Scale as given, mm/px.
    picture
        The longer side of the pictures, px.
    """
    for side, value in specimen.sides.items():
        u = getattr(specimen, f"{side}_uncertainty")
        if not SIDES_MM[0] <= value <= SIDES_MM[1]:
            yield Notice("dimension_odd", f"specimen.{side} is {value:g} mm; check its unit.")
        if u is not None and u > MOST_UNCERTAIN * value:
            yield Notice(
                "uncertainty_odd",
                f"specimen.{side}_uncertainty is {u / value:.0%} of the {side}; check its unit.",
            )
    if specimen.width is not None and specimen.thickness is not None and specimen.thickness > specimen.width:
        yield Notice(
            "dimension_odd",
            "The coupon is thicker than wide; width is the side that the camera sees: check which is which.",
        )
    if most_force is not None:
        stress = most_force / max(specimen.area, 1e-300)  # two tiny sides may multiply to zero
        if not LEAST_STRESS_MPA <= stress <= MOST_STRESS_MPA:
            yield Notice(
                "stress_odd",
                f"The largest stress would be {stress:.3g} MPa; check the coupon's dimensions and the "
                "force's unit.",
            )
    if scale is not None and picture is not None and specimen.visible_width / scale > picture:
        yield Notice(
            "scale_odd",
            f"With camera.scale the coupon would be {specimen.visible_width / scale:.0f} px wide, and the "
            f"pictures have {picture} px; check camera.scale.",
        )
