"""The tracking half: frame after frame through matching into the store, or out of the store again."""

from __future__ import annotations

import hashlib
import json
from collections import deque
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from itertools import repeat
from pathlib import Path
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from dic import provenance
from dic.correlation import Grid, Match, track
from dic.correlation.flags import Flag
from dic.errors import FrameError, TrackingError
from dic.frames import FrameSource, check_damage
from dic.frames.readers import Grey
from dic.gauges.silhouette import Silhouette, Widths, clear, mean_motion
from dic.optics import Apparent, Lens
from dic.preparation import Setup
from dic.store import fields
from dic.strain import StrainMapper, Window
from dic.testfile import TestFile


class Followed(NamedTuple):
    """What one frame gives: the match, and edges and still patch where they are followed."""

    match: Match
    widths: Widths | None
    patch: Apparent | None


def tracked_or_stored(test: TestFile, setup: Setup, folder: Path) -> Iterator[Followed]:
    """Yield what each frame gives, displacements in the picture as it is.

    From the store if it holds this very tracking, else by tracking.
    """
    key = tracking_key(test, setup.source, setup.optics.lens)
    if fields.stored_attributes(folder).get("tracking_key") == key:
        nothing = repeat(None)  # without end, because both may draw on it
        edges, patch = setup.silhouette is not None, setup.optics.patch is not None
        yield from map(
            Followed,
            fields.stored_matches(folder, setup.grid),
            (Widths(*one) for one in fields.stored_edges(folder)) if edges else nothing,
            (Apparent(*one) for one in fields.stored_patch(folder)) if patch else nothing,
        )
    else:
        yield from _tracked(test, setup, folder, key)


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
    grid, source = setup.grid, setup.source
    window = map_window(test, grid)
    attributes = {
        "tracking_key": key,
        "subset_px": grid.subset,
        "step_px": grid.step,
        "map_gauge_px": window.size_px,
        "map_gauge_mm": window.size_px * setup.scale_mm,
        **window.attributes(),
        "strain_measure": "engineering, in coupon axes",
        "axis_angle_deg": setup.coupon.axis_angle_deg,
    }
    mapper = StrainMapper(window, (setup.region.axial, setup.region.transverse), _unbending(setup))
    measured, edges, patch = 0, setup.silhouette, setup.optics.patch
    still = patch.tracker() if patch is not None else None
    seen: deque[Grey | Flag] = deque(maxlen=1)
    damage: dict[int, str] = {}
    with (
        # BLAS threads spin for a while after each small product, on the cores that the kernels need.
        threadpool_limits(1, user_api="blas"),
        ThreadPoolExecutor(1) as hashing,
        fields.FieldsWriter(
            folder,
            grid,
            source.time_s,
            attributes,
            edges.along if edges is not None else None,
            patch is not None,
        ) as writer,
    ):
        hashed = hashing.submit(source.sha256)
        for match in track(
            _remembered(_read_ahead(source, damage), seen), setup.reference, grid.neighbours()
        ):
            widths = _widths(edges, setup, seen[0], match) if edges is not None else None
            apparent = None
            if patch is not None and still is not None:
                frame = seen[0]
                if isinstance(frame, Flag):
                    apparent = Apparent(np.nan, np.nan)
                else:
                    apparent = patch.apparent(still.follow(frame))
            flat = setup.optics.straight(match, setup.reference.x, setup.reference.y)
            parts = (flat.u, flat.v, match.sigma_u, match.sigma_v)
            writer.put(
                match,
                mapper.strain(*(fields.spread(part, grid.inside) for part in parts)),
                (widths.px, widths.u_per_grey) if widths is not None else None,
                apparent,
            )
            measured += bool(match.converged.any())
            yield Followed(match, widths, apparent)
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


def _unbending(setup: Setup) -> NDArray[np.float64] | None:
    """Return slopes of picture coordinates in straight ones on the grid; None where no lens is known."""
    if setup.optics.lens is None:
        return None
    x, y = np.meshgrid(setup.grid.columns, setup.grid.rows)
    slopes = setup.optics.lens.straight(x, y)[1]
    return np.asarray(np.linalg.inv(slopes), float)


def unreadable(folder: Path) -> dict[int, str]:
    """Return why frames could not be used when the stored fields were tracked, by frame number."""
    said = json.loads(str(fields.stored_attributes(folder).get("unreadable_frames", "{}")))
    return {int(index): str(why) for index, why in said.items()}


def _remembered(frames: Iterator[Grey | Flag], seen: deque[Grey | Flag]) -> Iterator[Grey | Flag]:
    """Pass the frames on, and keep the one that is being matched."""
    for frame in frames:
        seen.append(frame)
        yield frame


def _widths(edges: Silhouette, setup: Setup, frame: Grey | Flag, match: Match) -> Widths:
    """Measure the width between the edges where the subsets' mean motion has carried them."""
    found, reference = match.converged, setup.reference
    places = np.stack([reference.x, reference.y], axis=1)[found]
    moved = np.stack([match.u, match.v], axis=1)[found]
    motion = mean_motion(places, moved, setup.region.centre)
    if isinstance(frame, Flag) or not np.isfinite(motion).all():
        nowhere = np.full(len(edges.along), np.nan)
        return Widths(nowhere, nowhere)
    return clear(edges.measure(frame, motion), match.noise_grey)


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
