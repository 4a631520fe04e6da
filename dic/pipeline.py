"""The main job: frames → pattern → correlation → strain → sync → properties → report.

Tracking is one loop around a pure function of (reference, frame, prediction); its displacement
fields go to the store as they come.  When frames and tracking settings are those of the stored
fields, the same loop runs over the store instead, so that other windows or dimensions are evaluated
in seconds.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic import provenance
from dic.correlation import Match, Reference, lay_grid, prepare_reference, track
from dic.errors import Notice, PatternError, TestFileError, TrackingError
from dic.frames import FrameSource, open_frames
from dic.measurement import Measurement, Scene
from dic.pattern import Coupon, axes, doubts, find_coupon, picture_quality
from dic.properties import Curve, Evaluation, evaluate, make_curve
from dic.properties import doubts as property_doubts
from dic.report import write_report
from dic.store import fields
from dic.store.results import remove_results, write_results
from dic.strain import GaugeHistory, GaugeReader, Region, gather, gauge_size, strain_map
from dic.sync import Clock, LoadRecord, fit_clock, given_clock, read_load_record
from dic.testfile import Correlation, TestFile, load

#: Called with the frames done and the frames there are.
Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class Setup:
    """All that is known before the first frame is tracked."""

    source: FrameSource
    image: NDArray[np.float64]
    coupon: Coupon
    region: Region
    reference: Reference
    scale_mm: float
    quality: dict[str, float]
    notices: list[Notice]


def measure(
    test: TestFile | str | Path, out: str | Path | None = None, progress: Progress | None = None
) -> Measurement:
    """Do the whole job for one test.

    Parameters
    ----------
    test
        A test file, or its path.
    out
        Result folder; by default beside the test file, named after it.
    progress
        Called after each tracked frame.

    Returns
    -------
    Measurement
        Everything that was found; the same is written to `out`.

    Raises
    ------
    InputError
        If the input is at fault; the message says what, where, and what to do.
    """
    test = test if isinstance(test, TestFile) else load(test)
    folder = Path(out) if out is not None else default_folder(test.path)
    # First of all, so that a run that fails leaves no earlier results that could be taken for its own.
    remove_results(folder)
    source = open_frames(test.frames, test.path.parent)
    record = read_load_record(test.load_record, test.beside(test.load_record.source))
    given_clock(source.time_s, record, test.sync)  # before tracking, which takes longest
    setup = set_up(test, source)
    history = read_gauges(test, setup, folder, progress)
    clock = fit_clock(history.time_s, history.axial, history.u_axial, record, test.sync)
    measurement = _evaluated(test, setup, history, record, clock, folder)
    write_results(measurement, folder)
    with measurement.to_xarray() as stored:
        write_report(measurement, stored, folder)
    return measurement


def default_folder(test_path: Path) -> Path:
    """Return the result folder of a test file where none is named: ``NAME-results`` beside it."""
    return test_path.with_name(f"{test_path.stem}-results")


def set_up(test: TestFile, source: FrameSource) -> Setup:
    """Find the coupon in the reference picture and prepare everything that later frames share.

    Raises
    ------
    PatternError
        If no textured area is found or no subset fits.
    """
    settings = test.correlation
    image, averaged = reference_picture(source, test.frames.reference)
    full_scale = source.full_scale()
    coupon = find_coupon(image, test.gauge.axis_angle)
    mask = coupon.mask & _given_region(image.shape, test.gauge.region)
    grid = lay_grid(mask, settings.subset, step_of(settings))
    if not grid.inside.any():
        raise PatternError(
            f"no subset of {settings.subset} px fits on the textured area inside the region",
            where="gauge.region and correlation.subset",
            remedy="enlarge the region, make the subset smaller, or check the pattern",
        )
    reference = prepare_reference(
        image, grid, smoothing=settings.smoothing, frames=averaged, full_scale=full_scale
    )
    quality = picture_quality(image, coupon, full_scale)
    return Setup(
        source=source,
        image=image,
        coupon=coupon,
        region=Region.around(mask, *axes(coupon.axis_angle_deg)),
        reference=reference,
        scale_mm=test.camera.scale or test.specimen.visible_width / coupon.width_px,
        quality=quality,
        notices=doubts(quality, settings.subset),
    )


def step_of(settings: Correlation) -> int:
    """Return the pitch of the subsets: as given, else a third of a subset."""
    return settings.step or max(settings.subset // 3, 1)


def reference_picture(
    source: FrameSource, reference: int | tuple[int, int] | None
) -> tuple[NDArray[np.float64], int]:
    """Return the reference picture and how many frames were averaged into it."""
    first, last = reference if isinstance(reference, tuple) else (reference or 0, reference or 0)
    if not 0 <= first <= last < len(source):
        raise TestFileError(
            f"there are no frames {first} to {last}",
            where="frames.reference",
            remedy=f"frames are counted from 0 to {len(source) - 1}",
        )
    total = np.zeros(source.shape)
    for index in range(first, last + 1):
        total += source[index]
    return total / (last - first + 1), last - first + 1


def _given_region(shape: tuple[int, ...], region: Any) -> NDArray[np.bool_]:
    """Mark the rectangle that the test file gives, or everything."""
    if region == "auto":
        return np.ones(shape, bool)
    x, y, width, height = region
    if not (
        width > 0 and height > 0 and x >= 0 and x + width <= shape[1] and y >= 0 and y + height <= shape[0]
    ):
        raise TestFileError(
            f"the region x {x:g} to {x + width:g}, y {y:g} to {y + height:g} px is not inside the picture",
            where="gauge.region",
            remedy=f"the picture is {shape[1]} px wide and {shape[0]} px high",
        )
    mask = np.zeros(shape, bool)
    mask[round(y) : round(y + height), round(x) : round(x + width)] = True
    return mask


def read_gauges(test: TestFile, setup: Setup, folder: Path, progress: Progress | None) -> GaugeHistory:
    """Track the frames, or take up what was tracked before, and read the gauges in each."""
    reader = _reader(test, setup)
    readings = []
    for done, match in enumerate(tracked_or_stored(test, setup, folder), start=1):
        readings.append(reader.read(match))
        if progress is not None:
            progress(done, len(setup.source))
    return gather(readings, setup.source.names, setup.source.time_s)


def _reader(test: TestFile, setup: Setup) -> GaugeReader:
    return GaugeReader(setup.reference, setup.region, _gauge_length(test, setup))


def _gauge_length(test: TestFile, setup: Setup) -> float | None:
    if test.gauge.length is None:
        return None
    if not np.isfinite(setup.scale_mm):
        raise TestFileError(
            "the scale is unknown because the coupon's edges are not in view",
            where="gauge.length",
            remedy='give camera.scale, for example "0.021 mm/px"',
        )
    return test.gauge.length / setup.scale_mm


def tracked_or_stored(test: TestFile, setup: Setup, folder: Path) -> Iterator[Match]:
    """Yield one match per frame, from the store if it holds this very tracking, else by tracking."""
    key = tracking_key(test, setup.source)
    if fields.stored_attributes(folder).get("tracking_key") == key:
        yield from fields.stored_matches(folder, setup.reference.grid)
    else:
        yield from _tracked(test, setup, folder, key)


def _tracked(test: TestFile, setup: Setup, folder: Path, key: str) -> Iterator[Match]:
    grid, source, window = setup.reference.grid, setup.source, test.maps.window
    attributes = {
        "tracking_key": key,
        "frames_sha256": source.sha256(),
        "subset_px": grid.subset,
        "step_px": grid.step,
        "map_gauge_px": gauge_size(window, grid.step, grid.subset),
        "strain_measure": "engineering, in coupon axes",
        "axis_angle_deg": setup.coupon.axis_angle_deg,
    }
    measured = 0
    folder.mkdir(parents=True, exist_ok=True)
    with fields.FieldsWriter(folder, grid, source.time_s, attributes) as writer:
        pictures = (source[index] for index in range(len(source)))
        for match in track(pictures, setup.reference):
            u, v = (fields.spread(part, grid.inside) for part in (match.u, match.v))
            writer.put(
                match, strain_map(u, v, window, grid.step, (setup.region.axial, setup.region.transverse))
            )
            measured += bool(match.converged.any())
            yield match
        # The reference itself always matches; alone it says nothing.
        if measured <= setup.reference.frames:
            raise TrackingError(
                "every subset was lost in every frame",
                where=test.frames.source,
                remedy="check that all frames show the same coupon, sharp and with the same light",
            )


def tracking_key(test: TestFile, source: FrameSource) -> str:
    """Return a digest of all that tracking depends on."""
    said = {
        "version": provenance.VERSION,
        "frames": source.listing(),
        "times": source.time_s.tolist(),
        "reference": test.frames.reference,
        "correlation": test.correlation.model_dump(),
        "maps": test.maps.model_dump(),
        "axis": test.gauge.axis,
        "region": test.gauge.region,
    }
    return hashlib.sha256(json.dumps(said, sort_keys=True).encode()).hexdigest()


def _evaluated(
    test: TestFile, setup: Setup, history: GaugeHistory, record: LoadRecord, clock: Clock, folder: Path
) -> Measurement:
    """Go from gauge histories to properties: seconds, and repeatable without tracking."""
    curve = make_curve(history, record, clock, test.specimen.area)
    found = evaluate(curve, test.specimen, test.load_record.force_uncertainty, clock, test.properties)
    stored = fields.stored_attributes(folder)
    extensometer_px = _reader(test, setup).extensometer_px
    grid = setup.reference.grid
    scene = Scene(
        photograph=_eight_bits(setup.image, setup.source.full_scale()),
        axis_angle_deg=setup.coupon.axis_angle_deg,
        axis_method=setup.coupon.axis_method,
        scale_mm=setup.scale_mm,
        region=setup.region.corners(),
        subset_px=grid.subset,
        step_px=grid.step,
        map_gauge_px=gauge_size(test.maps.window, grid.step, grid.subset),
        noise_grey=fields.median_noise(folder),
    )
    return Measurement(
        test=test,
        scene=scene,
        history=history,
        record=record,
        clock=clock,
        curve=curve,
        line=found.line,
        properties=found.properties,
        alignment=alignment(history, found),
        quality={
            **setup.quality,
            "gauge_region_length_px": setup.region.length,
            "gauge_region_width_px": setup.region.width,
            "extensometer_length_px": extensometer_px,
            "pixel_mm": setup.scale_mm,
            "subsets": float(grid.inside.sum()),
            "valid_fraction": float(np.nanmedian(history.valid_fraction)),
        },
        notices=(
            *setup.source.notices,
            *setup.notices,
            *_tracking_doubts(history),
            *_clock_doubts(history, curve),
            *property_doubts(found.properties, test.specimen, test.load_record.force_uncertainty),
        ),
        provenance=provenance.collect(test, record, str(stored["frames_sha256"])),
        folder=folder,
    )


def alignment(history: GaugeHistory, found: Evaluation) -> dict[str, float]:
    """Return how straight the coupon was pulled, from the frames in the modulus' window.

    Bending is the extra strain at the gauge's edge per mean strain (ASTM E1012's percent bending,
    in the picture's plane only).
    """
    line = found.line
    inside = (history.axial >= line.low) & (history.axial <= line.high)
    strain, bending, shear = history.axial[inside], history.bending[inside], history.shear[inside]
    if inside.sum() < 3:
        return {"bending_percent": float("nan"), "shear_percent": float("nan")}
    return {
        "bending_percent": float(100 * abs(np.polyfit(strain, bending, 1)[0])),
        "shear_percent": float(100 * abs(np.polyfit(strain, shear, 1)[0])),
    }


def _tracking_doubts(history: GaugeHistory) -> list[Notice]:
    found = []
    for code, missing, what in (
        ("frames_lost", np.isnan(history.axial), "could not be measured"),
        ("extensometer_lost", np.isnan(history.extensometer) & np.isfinite(history.axial),
         "have no extensometer reading because an end of the gauge left the picture or was lost"),
    ):  # fmt: skip
        if missing.any():
            first = history.name[int(np.argmax(missing))]
            found.append(
                Notice(
                    code,
                    f"{missing.sum()} of {len(history)} frames {what} (first: {first}); "
                    "see the column status of history.csv.",
                )
            )
    return found


def _clock_doubts(history: GaugeHistory, curve: Curve) -> list[Notice]:
    outside = np.isnan(curve.force_N)
    if not outside.any():
        return []
    return [
        Notice(
            "frames_outside_record",
            f"{outside.sum()} of {len(history)} frames lie outside the load record's time and have no force; "
            "check frames.rate or frames.times, and sync.offset.",
        )
    ]


def _eight_bits(image: NDArray[np.float64], full_scale: float) -> NDArray[np.uint8]:
    return np.clip(np.rint(image * (255.0 / full_scale)), 0, 255).astype(np.uint8)
