"""The tracking half: frame after frame through matching into the store, or out of the store again."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

from threadpoolctl import threadpool_limits

from dic import provenance
from dic.correlation import Match, track
from dic.correlation.flags import Flag
from dic.errors import FrameError, TrackingError
from dic.frames import FrameSource, RepeatWatch, check_damage
from dic.frames.readers import Grey
from dic.preparation import Setup
from dic.store import fields
from dic.strain import StrainMapper, Window
from dic.testfile import TestFile


def tracked_or_stored(test: TestFile, setup: Setup, folder: Path) -> Iterator[Match]:
    """Yield one match per frame, from the store if it holds this very tracking, else by tracking."""
    key = tracking_key(test, setup.source)
    if fields.stored_attributes(folder).get("tracking_key") == key:
        yield from fields.stored_matches(folder, setup.grid)
    else:
        yield from _tracked(test, setup, folder, key)


def tracking_key(test: TestFile, source: FrameSource) -> str:
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
        "axis": test.gauge.axis,
        "region": test.gauge.region,
        "subsets": (test.gauge.subsets, test.gauge.length if test.gauge.subsets == "ends" else None),
    }
    return hashlib.sha256(json.dumps(said, sort_keys=True).encode()).hexdigest()


def _tracked(test: TestFile, setup: Setup, folder: Path, key: str) -> Iterator[Match]:
    grid, source = setup.grid, setup.source
    window = Window(
        test.maps.window,
        grid.step,
        grid.subset,
        test.maps.degree,
        test.maps.weighting,
        test.correlation.shape,
    )
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
    mapper = StrainMapper(window, (setup.region.axial, setup.region.transverse))
    measured = 0
    damage: dict[int, str] = {}
    with (
        # BLAS threads spin for a while after each small product, on the cores that the kernels need.
        threadpool_limits(1, user_api="blas"),
        ThreadPoolExecutor(1) as hashing,
        fields.FieldsWriter(folder, grid, source.time_s, attributes) as writer,
    ):
        hashed = hashing.submit(source.sha256)
        for match in track(_read_ahead(source, damage), setup.reference, grid.neighbours()):
            parts = (match.u, match.v, match.sigma_u, match.sigma_v)
            writer.put(match, mapper.strain(*(fields.spread(part, grid.inside) for part in parts)))
            measured += bool(match.converged.any())
            yield match
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


def unreadable(folder: Path) -> dict[int, str]:
    """Return why frames could not be used when the stored fields were tracked, by frame number."""
    said = json.loads(str(fields.stored_attributes(folder).get("unreadable_frames", "{}")))
    return {int(index): str(why) for index, why in said.items()}


def _read_ahead(source: FrameSource, damage: dict[int, str]) -> Iterator[Grey | Flag]:
    """Yield the frames, the next one being read while the last one is worked on.

    In place of a frame that cannot be read or that repeats the one before stands a flag; what was wrong
    with the former goes into `damage`.
    """
    watch = RepeatWatch()

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
