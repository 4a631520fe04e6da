"""The tracking half: frame after frame through matching into the store, or out of the store again."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from itertools import repeat, starmap
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np

from dic import provenance
from dic.correlation import Grid, Match, Tracker
from dic.correlation.flags import Flag
from dic.errors import FrameError, TrackingError
from dic.frames import FrameSource, check_damage
from dic.frames.readers import Grey
from dic.gauges.silhouette import Silhouette, Widths, clear, mean_motion
from dic.optics import Apparent, Lens
from dic.preparation import Setup
from dic.store import fields
from dic.strain import StrainMap, StrainMapper, Window
from dic.testfile import TestFile


class Followed(NamedTuple):
    """What one frame gives: the match, and edges and still patch where they are followed."""

    match: Match
    widths: Widths | None
    patch: Apparent | None


def tracked_or_stored(test: TestFile, setup: Setup, folder: Path) -> Iterator[Followed]:
    """Yield what each frame gives, displacements in straight coordinates.

    From the store if it holds this very tracking, else by tracking.
    """
    key = tracking_key(test, setup.source, setup.optics.lens)
    if fields.stored_attributes(folder).get("tracking_key") == key:
        yield from _stored(setup, folder)
    else:
        yield from _tracked(test, setup, folder, key)


def _stored(setup: Setup, folder: Path) -> Iterator[Followed]:
    nothing = repeat(None)  # without end, because both may draw on it
    yield from map(
        Followed,
        map(setup.straight, fields.stored_matches(folder, setup.grid)),
        starmap(Widths, fields.stored_edges(folder)) if setup.silhouette is not None else nothing,
        starmap(Apparent, fields.stored_patch(folder)) if setup.optics.patch is not None else nothing,
    )


def tracking_key(test: TestFile, source: FrameSource, lens: Lens | None = None) -> str:
    """Return a digest of all that tracking depends on."""
    said = {
        "version": provenance.VERSION,
        "variables": list(fields.VARIABLES),
        "frames": source.listing(),
        "times": source.time_s.tolist(),
        "reference": test.frames.reference,
        "mosaic": test.frames.mosaic,
        "correlation": test.correlation.model_dump(exclude={"periodic"}),
        "maps": test.maps.model_dump(exclude={"measure"}),
        "coupon": test.coupon.model_dump(),
        "coupon_mask": provenance.sha256(test.beside(test.coupon.mask)) if test.coupon.mask else None,
        "axis": test.gauge.axis,
        "region": test.gauge.region,
        "edges": test.follows_edges,
        "shape": test.specimen.shape,
        "still_patch": test.camera.still_patch,
        # The stored maps, and what the patch seems to do, are in straight coordinates.
        "lens": None if lens is None else [lens.focal, lens.centre, lens.coefficients, lens.plane.tolist()],
        "subsets": (test.gauge.subsets, test.gauge.length if test.gauge.subsets == "ends" else None),
    }
    return hashlib.sha256(json.dumps(said, sort_keys=True).encode()).hexdigest()


def map_window(test: TestFile, grid: Grid) -> Window:
    """Return the maps' local fit."""
    maps = test.maps
    return Window(maps.window, grid.step, grid.subset, maps.degree, maps.weighting, test.correlation.shape)


def _tracked(test: TestFile, setup: Setup, folder: Path, key: str) -> Iterator[Followed]:
    """Track the frames into the store."""
    source, grid, edges, optics = setup.source, setup.grid, setup.silhouette, setup.optics
    window = map_window(test, grid)
    mapper = StrainMapper(window, (setup.region.axial, setup.region.transverse), optics.unbending(grid))
    damage: dict[int, str] = {}
    measured = 0
    with (
        ThreadPoolExecutor(1) as hashing,
        fields.FieldsWriter(
            folder,
            grid,
            source.time_s,
            {"tracking_key": key, **_attributes(setup, window)},
            stations=edges.along if edges is not None else None,
            patch=optics.patch is not None,
        ) as writer,
    ):
        hashed = hashing.submit(source.sha256)
        for followed in _followed(setup, _read_ahead(source, damage)):
            writer.put(
                followed.match, _strains(mapper, followed.match, grid), followed.widths, followed.patch
            )
            measured += bool(followed.match.converged.any())
            yield followed
        check_damage(damage, len(source), test.frames.source)
        # The frames of the reference always match; alone they say nothing.
        if measured <= setup.reference.frames:
            raise TrackingError(
                "every subset was lost in every frame",
                where=test.frames.source,
                remedy="check that all frames show the same coupon, sharp and with the same light",
            )
        writer.note("frames_sha256", hashed.result())
        writer.note("unreadable_frames", json.dumps(damage))


def _attributes(setup: Setup, window: Window) -> dict[str, Any]:
    """Return the settings that readers of the fields need."""
    return {
        "subset_px": setup.grid.subset,
        "step_px": setup.grid.step,
        "map_gauge_px": window.size_px,
        "map_gauge_mm": window.size_px * setup.scale_mm,
        **window.attributes(),
        "strain_measure": "engineering, in coupon axes",
        "axis_angle_deg": setup.coupon.axis_angle_deg,
    }


def unreadable(folder: Path) -> dict[int, str]:
    """Return why frames could not be used when the stored fields were tracked, by frame number."""
    said = json.loads(str(fields.stored_attributes(folder).get("unreadable_frames", "{}")))
    return {int(index): str(why) for index, why in said.items()}


def _followed(setup: Setup, frames: Iterator[Grey | Flag]) -> Iterator[Followed]:
    """Follow the subsets, and edges and still patch where there are any, from frame to frame."""
    tracker = Tracker(setup.reference, setup.grid.neighbours())
    edges, patch = setup.silhouette, setup.optics.patch
    still = patch.follower() if patch is not None else None
    for frame in frames:
        match = setup.straight(tracker.follow(frame))
        yield Followed(
            match,
            _widths(edges, setup, frame, match) if edges is not None else None,
            still(frame) if still is not None else None,
        )


def _widths(edges: Silhouette, setup: Setup, frame: Grey | Flag, match: Match) -> Widths:
    """Measure the width between the edges where the subsets' mean motion has carried them."""
    found = match.converged
    moved = match.as_matched[found][:, [0, 3]]  # the edges are looked for in the picture as it is
    motion = mean_motion(setup.reference.places[found], moved, setup.region.centre)
    if isinstance(frame, Flag) or not np.isfinite(motion).all():
        nowhere = np.full(len(edges.along), np.nan)
        return Widths(nowhere, nowhere)
    return clear(edges.measure(frame, motion), match.noise_grey)


def _strains(mapper: StrainMapper, match: Match, grid: Grid) -> StrainMap:
    parts = (match.u, match.v, match.sigma_u, match.sigma_v)
    return mapper.strain(*(fields.spread(part, grid.inside) for part in parts))


def _read_ahead(source: FrameSource, damage: dict[int, str]) -> Iterator[Grey | Flag]:
    """Yield the frames, the next one being read while the last one is worked on.

    In place of a frame that cannot be read or that repeats the one before stands a flag; what was wrong
    with the former goes into `damage`.
    """
    watch = source.watch()

    def read(index: int) -> Grey | Flag:
        try:
            frame = source[index]
        except FrameError as error:
            damage[index] = error.what
            return Flag.NO_PICTURE
        return Flag.REPEATED_PICTURE if watch.frozen(frame) else frame

    with ThreadPoolExecutor(1) as reading:
        coming = reading.submit(read, 0)
        for index in range(len(source)):
            frame = coming.result()
            if index + 1 < len(source):
                coming = reading.submit(read, index + 1)
            yield frame
