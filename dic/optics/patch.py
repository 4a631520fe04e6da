"""A still or rigid patch in view: its apparent strain is the camera's doing, and is taken off the gauges."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from dic.correlation import Grid, Match, Reference, Settings, Tracker, lay_grid, prepare_reference
from dic.correlation.flags import Flag
from dic.errors import PatternError, TestFileError
from dic.frames.readers import Grey
from dic.optics.lens import Lens
from dic.pattern import axes, rectangle
from dic.strain import GaugeReader, Region

Floats = NDArray[np.float64]
WHERE = "camera.still_patch"


class Apparent(NamedTuple):
    """Apparent strain of the patch in one frame, the same in both directions, and its u from grey noise."""

    strain: float
    u: float


@dataclass(frozen=True)
class StillPatch:
    """The patch' subsets in the reference picture."""

    reference: Reference
    grid: Grid
    reader: GaugeReader
    lens: Lens | None

    def follower(self) -> Callable[[Grey | Flag], Apparent]:
        """Return what reads the patch in one frame after the other."""
        tracker = Tracker(self.reference, self.grid.neighbours())
        return lambda frame: self.apparent(tracker.follow(frame))

    def apparent(self, match: Match) -> Apparent:
        """Return what the patch seems to have grown by.

        Whatever moves it or the camera along the line of sight scales it alike in both directions, so the
        mean of both strains scatters less than either.
        """
        if self.lens is not None:
            match = self.lens.straighten(match, self.reference.x, self.reference.y)
        read = self.reader.read(match)
        scale = float(np.sqrt((1.0 + read.axial) * (1.0 + read.transverse)) - 1.0)
        return Apparent(scale, float(np.hypot(read.u_axial, read.u_transverse) / 2))


def lay_patch(
    image: Floats,
    sides: tuple[float, float, float, float],
    coupon: NDArray[np.bool_],
    *,
    subset: int,
    step: int,
    settings: Settings,
    frames: int,
    lens: Lens | None,
) -> StillPatch:
    """Lay subsets on the patch.

    Parameters
    ----------
    image
        Reference picture, grey values.
    sides
        x, y, width, height, px.
    coupon
        True on the coupon, shape of the picture.
    subset, step
        Side and pitch of the subsets, px.
    settings, frames
        As for the coupon's own reference.
    lens
        The lens, where its distortion is known.

    Raises
    ------
    TestFileError
        If the patch is outside the picture, on the coupon, too small, or without texture.
    """
    x, y, width, height = sides
    said = f"the patch x {x:g} to {x + width:g}, y {y:g} to {y + height:g} px"
    mask = rectangle(image.shape, sides, "the patch", WHERE)
    if (mask & coupon).any():
        on_y, on_x = np.nonzero(mask & coupon)
        raise TestFileError(
            f"{said} lies on the coupon at x {on_x.min()} to {on_x.max()}, y {on_y.min()} to {on_y.max()} px",
            where=WHERE,
            remedy="choose a place that does not stretch, beside the coupon",
        )
    grid = lay_grid(mask, subset, step)
    if not grid.inside.any():
        raise TestFileError(
            f"{said} is smaller than a subset of {grid.subset} px", where=WHERE, remedy="enlarge it"
        )
    reference = prepare_reference(
        image, grid.x, grid.y, subset=grid.subset, settings=settings, mask=mask, frames=frames
    )
    if reference.usable.mean() < 0.5:
        raise TestFileError(
            f"{said} has too little texture: {int(reference.usable.sum())} of {len(reference.usable)} "
            "subsets can be followed",
            where=WHERE,
            remedy="speckle it as the coupon, and light it as brightly",
        )
    region = Region.around(mask, *axes(0.0))
    places = None if lens is None else lens.straight(reference.x, reference.y)[0]
    try:
        reader = GaugeReader(reference, grid, region, places=places)
    except PatternError as error:
        raise TestFileError(
            f"{said} holds only {len(reference.x)} subsets",
            where=WHERE,
            remedy=f"enlarge it to {subset + 2 * step} px each way or more",
        ) from error
    return StillPatch(reference, grid, reader, lens)
