"""What is settled before the first frame is tracked: coupon, gauge region, prepared reference."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.correlation import Grid, Match, Reference, Settings, Tracker, lay_grid, prepare_reference
from dic.errors import FrameError, Notice, PatternError, TestFileError
from dic.frames import FrameSource
from dic.frames.doubts import same_picture
from dic.frames.readers import list_pages, read_page
from dic.gauges import Placed, Silhouette, facing, place_gauges
from dic.gauges.probes import Subsets
from dic.optics import Lens, Optics, StillPatch, lay_patch, lens_of, settle_scale
from dic.pattern import Coupon, Given, axes, axis_doubts, doubts, find_coupon, picture_quality, rectangle
from dic.strain import GaugeReader, Region
from dic.testfile import Correlation, TestFile

#: Frames averaged into the reference at the most: random error falls by √(1 + 1/n)/√2, so that the
#: sixteenth frame brings 0.2 %.
MOST_AVERAGED = 16
#: A subset smaller than this is never the remedy: it would not hold three speckles of 3 px.
LEAST_SUBSET = 9
#: A frame counts as at rest while the coupon's mean motion stays below this; more would blur the mean.
REST_PX = 0.05
#: ... and while nothing stretches it by more than this many standard uncertainties.
REST_SIGMAS = 4.0


@dataclass(frozen=True)
class Setup:
    """All that is known before the first frame is tracked.

    Attributes
    ----------
    source
        The frames.
    image
        Reference picture, grey values, shape (rows, columns).
    coupon
        Where it is.
    region
        Where strain is averaged.
    grid, reference
        Where subsets lie, and all that matching needs of them.
    subsets
        Both as the gauges see them, in straight coordinates.
    extensometer_px
        Gauge length as asked for, px; None for the whole region.
    quality
        Figures of the pattern.
    notices
        Doubts about it.
    silhouette
        The coupon's edges, where they are to be followed and both in view.
    gauges
        Those that the test file names, on the coupon.
    optics
        Scale, lens and reference patch.
    """

    source: FrameSource
    image: NDArray[np.float64]
    coupon: Coupon
    region: Region
    grid: Grid
    reference: Reference
    subsets: Subsets
    optics: Optics
    extensometer_px: float | None
    quality: dict[str, float]
    notices: tuple[Notice, ...]
    silhouette: Silhouette | None = None
    gauges: tuple[Placed, ...] = ()

    def reader(self) -> GaugeReader:
        """Return a fresh reader of the gauges."""
        return GaugeReader(
            self.reference, self.grid, self.region, self.extensometer_px, self.subsets.straight
        )

    def straight(self, match: Match) -> Match:
        """Return a match of the frames in straight coordinates."""
        return self.optics.straight(match, self.reference.x, self.reference.y)

    def averaged(self, first: int) -> range:
        """Return the frames that were averaged into the reference."""
        return range(first, first + self.reference.frames)

    @property
    def scale_mm(self) -> float:
        """Size of a pixel, mm, NaN where unknown."""
        return self.optics.scale.mm


def set_up(test: TestFile, source: FrameSource) -> Setup:
    """Find the coupon in the reference picture and prepare everything that later frames share.

    Raises
    ------
    PatternError
        If no textured area is found or no subset fits.
    TestFileError
        If region, gauge length or reference frames do not fit the pictures.
    """
    first, last = source.reference(test.frames.reference)
    image = _mean(source, first, last)
    full_scale = source.full_scale()
    known = given_region(image.shape, test.gauge.region)
    coupon = find_coupon(image, test.gauge.axis_angle, known, given_coupon(test))
    mask, facing_notices = facing(coupon, test.specimen.shape, test.gauge.region == "auto")
    region = Region.around(mask, *axes(coupon.axis_angle_deg))
    lens, calibration, board_mm = lens_of(test, source.shape, region.centre, region.axial)
    scale, scale_doubts = settle_scale(test.camera, test.specimen, coupon, image.shape, lens, board_mm)
    length = _gauge_length(test, scale.mm)
    grid = _grid(test, mask, region, length)
    reference = _prepared(test.correlation, image, grid, mask, last - first + 1, full_scale)
    if test.frames.reference is None:
        still = _frames_at_rest(source, reference, grid, GaugeReader(reference, grid, region, length))
        if still > 1:
            image = _mean(source, 0, still - 1)
            reference = _prepared(test.correlation, image, grid, mask, still, full_scale)
    silhouette = None
    if test.follows_edges and None not in coupon.edges:
        silhouette = Silhouette(image, coupon, region)
    patch = _patch(test, image, coupon, grid, reference, lens)
    optics = Optics(scale, lens, calibration, patch)
    subsets = Subsets(reference, grid, optics.places(reference.x, reference.y))
    gauges = place_gauges(test.gauges, subsets, region, scale.mm, silhouette)
    quality = picture_quality(image, coupon, full_scale)
    return Setup(
        source=source,
        image=image,
        coupon=coupon,
        region=region,
        grid=grid,
        reference=reference,
        subsets=subsets,
        optics=optics,
        extensometer_px=length,
        quality={**quality, "reference_frames": float(reference.frames)},
        notices=(
            *_frozen_start(source),
            *_subset_taken(test.correlation.subset, grid),
            *facing_notices,
            *_clutter(test, silhouette),
            *axis_doubts(coupon),
            *doubts(quality, grid.subset),
            *scale_doubts,
            *(calibration.notices if calibration is not None else ()),
        ),
        silhouette=silhouette,
        gauges=tuple(gauges),
    )


def _patch(
    test: TestFile,
    image: NDArray[np.float64],
    coupon: Coupon,
    grid: Grid,
    reference: Reference,
    lens: Lens | None,
) -> StillPatch | None:
    if test.camera.still_patch is None:
        return None
    return lay_patch(
        image,
        test.camera.still_patch,
        coupon.mask,
        subset=grid.subset,
        step=grid.step,
        settings=reference.settings,
        frames=reference.frames,
        lens=lens,
    )


def _prepared(
    settings: Correlation,
    image: NDArray[np.float64],
    grid: Grid,
    mask: NDArray[np.bool_],
    frames: int,
    full_scale: float,
) -> Reference:
    how = Settings(settings.spline, settings.smoothing, settings.shape == "quadratic", full_scale)
    return prepare_reference(
        image, grid.x, grid.y, subset=grid.subset, settings=how, mask=mask, frames=frames
    )


def _grid(test: TestFile, mask: NDArray[np.bool_], region: Region, length: float | None) -> Grid:
    """Lay the subsets: everywhere on the mask, or in the end bands of the gauge only."""
    subset, settings = test.correlation.subset, test.correlation
    wanted = mask
    if test.gauge.subsets == "ends":
        rows, columns = np.nonzero(mask)
        along, _ = region.coordinates(columns, rows)
        # bands deep enough for two rows of subsets
        ends = (length or region.length - 3 * subset) / 2
        wanted = np.zeros_like(mask)
        here = abs(abs(along) - ends) <= 1.5 * subset
        wanted[rows[here], columns[here]] = True
    grid = lay_grid(wanted, subset, settings.step or max(subset // 3, 1))
    if not grid.inside.any():
        smaller, area = _largest_subset(wanted), _narrowed_by(test)
        cure = (
            f"set correlation.subset to {smaller} or less" if smaller >= LEAST_SUBSET else "check the pattern"
        )
        raise PatternError(
            f"no subset of {subset} px fits on what {area} leaves of the textured area",
            where=f"{area} and correlation.subset",
            remedy=f"enlarge it, or {cure}",
        )
    return grid


def _narrowed_by(test: TestFile) -> str:
    """Return which key says where subsets may lie."""
    if test.gauge.region != "auto":
        return "gauge.region"
    given = next((key for key in ("mask", "parallel", "edges", "holes") if getattr(test.coupon, key)), None)
    return f"coupon.{given}" if given else "gauge.region"


def _largest_subset(mask: NDArray[np.bool_]) -> int:
    """Return the largest odd side with which a subset still fits on the mask, or less than one."""
    from scipy.ndimage import distance_transform_cdt

    # in the chessboard metric, how far a square may reach to every side
    reach = distance_transform_cdt(np.pad(mask, 1), metric="chessboard").max()
    return 2 * int(reach) - 1


def _subset_taken(wanted: int, grid: Grid) -> Iterator[Notice]:
    if grid.subset != wanted:
        yield Notice(
            "subset_even",
            f"A subset has a middle pixel, so correlation.subset = {wanted} was taken as {grid.subset}.",
        )


def _clutter(test: TestFile, silhouette: Silhouette | None) -> Iterator[Notice]:
    if test.specimen.shape == "round" and silhouette is not None and not silhouette.plain:
        yield Notice(
            "round_bar_background",
            "The background beside the bar is not plain, so its diameter cannot be followed, and there is no "
            "transverse strain; hang a plain sheet behind the bar.",
        )


def _frozen_start(source: FrameSource) -> Iterator[Notice]:
    """Warn where repeated pictures cannot be told from new ones, see `RepeatWatch`."""
    try:
        same = same_picture(source[0], source[1])
    except FrameError:
        return
    if same:
        yield Notice(
            "frames_doubled",
            f"{source.names[0]} and {source.names[1]} show exactly the same picture, as pictures drawn "
            "without noise do, so repeated pictures are measured like others; if a camera took them, it "
            "froze: take the first one out, or film anew.",
        )


def _mean(source: FrameSource, first: int, last: int) -> NDArray[np.float64]:
    total = np.zeros(source.shape)
    for index in range(first, last + 1):
        total += source[index]
    return total / (last - first + 1)


def _frames_at_rest(source: FrameSource, reference: Reference, grid: Grid, reader: GaugeReader) -> int:
    """Count the frames at the beginning in which the coupon neither moves nor stretches."""
    tracker, watch = Tracker(reference, grid.neighbours()), source.watch()
    watch.frozen(source[0])
    for index in range(1, min(MOST_AVERAGED, len(source))):
        try:
            frame = source[index]
        except FrameError:
            return index
        if watch.frozen(frame):
            return index
        reading = reader.read(tracker.follow(frame))
        moved = float(np.hypot(*reading.shift_px))
        strained = abs(reading.axial) > REST_SIGMAS * reading.u_axial
        if not moved < REST_PX or strained:
            return index
    return min(MOST_AVERAGED, len(source))


def given_coupon(test: TestFile) -> Given:
    """Return what the test file says of the coupon, its mask read.

    Raises
    ------
    TestFileError
        If the mask is no grey picture that can be read.
    """
    said = test.coupon
    mask = None
    if said.mask is not None:
        try:
            grey = read_page(list_pages(test.beside(said.mask))[0])
        except FrameError as error:
            raise TestFileError(
                f"the mask {error.where} {error.what}",
                where="coupon.mask",
                remedy="give a grey picture of 8 bits, white where the coupon may be tracked",
            ) from error
        # White is the upper half of what 8 or 16 bits hold.
        mask = grey > (127 if grey.max() < 256 else 32767)
    return Given(said.edges, mask, said.holes, said.parallel)


def given_region(shape: tuple[int, ...], region: Any) -> NDArray[np.bool_] | None:
    """Mark the rectangle that the test file gives; None where it gives none."""
    if region == "auto":
        return None
    return rectangle(shape, region, "the region", "gauge.region")


def _gauge_length(test: TestFile, scale_mm: float) -> float | None:
    if test.gauge.length is None:
        return None
    if not np.isfinite(scale_mm):
        raise TestFileError(
            "the scale is unknown because the coupon's edges are not in view",
            where="gauge.length",
            remedy='give camera.scale, for example "0.021 mm/px"',
        )
    length, least = test.gauge.length / scale_mm, 2 * test.correlation.subset
    if length < least:
        raise TestFileError(
            f"{test.gauge.length:g} mm is {length:.0f} px, shorter than two subsets",
            where="gauge.length",
            remedy=f"make it {least * scale_mm:.3g} mm or longer, or lower correlation.subset",
        )
    return length
