"""The main job: frames → pattern → correlation → strain → sync → properties → report.

The first three run once per set of frames and tracking settings (`dic.preparation`, `dic.sequence`);
the others take seconds and can be repeated with other windows or dimensions.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from threadpoolctl import threadpool_limits

from dic import provenance
from dic.comparison import ClipOn, compare
from dic.comparison import doubts as clip_on_doubts
from dic.errors import ClockError, InputError
from dic.frames import open_frames, unreadable_frames
from dic.gauges import NamedHistory, NamedReadings
from dic.judgement import loading_doubts, reading_doubts
from dic.measurement import Measurement, quality_of, scene_of
from dic.optics import bound, corrected, corrected_gauges, receding
from dic.preparation import Setup, set_up
from dic.properties import Curve, Evaluation, Sheet, evaluate, make_curve
from dic.properties import doubts as property_doubts
from dic.report import write_report
from dic.sequence import map_window, tracked_or_stored, unreadable
from dic.store import fields
from dic.store.folder import claim_folder, remove_results
from dic.store.results import write_results
from dic.strain import GaugeHistory, gather
from dic.strain.alignment import Alignment, elastic_part, find_alignment, frames_to_read, limit_of
from dic.strain.rates import gather_rates
from dic.sync import Clock, LoadRecord, fit_clock, known_clock, read_load_record
from dic.testfile import TestFile, load

#: Called with the frames done and the frames there are.
Progress = Callable[[int, int], None]


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
    test, folder = _opened(test, out)
    measurement = take_measurement(test, folder, progress)
    write_results(measurement, folder)
    with measurement.to_xarray() as stored:
        write_report(measurement, stored, folder)
    return measurement


# BLAS threads spin for a while after each small product, on the cores that the kernels need.
@threadpool_limits.wrap(1, user_api="blas")
def take_measurement(test: TestFile, folder: Path, progress: Progress | None = None) -> Measurement:
    """Go through all stages up to the report; the fields are written into the folder, which is there."""
    source = open_frames(test.frames, test.path.parent)
    record = read_load_record(test.load_record, test.beside(test.load_record.source))
    known_clock(source.time_s, record, test.sync, source.epoch)  # before tracking, which takes longest
    setup = set_up(test, source)
    history, named = read_gauges(test, setup, folder, progress)
    clock = _clock(test, setup, history, record)
    return judged(test, setup, history, named, record, clock, folder)


def _opened(test: TestFile | str | Path, out: str | Path | None) -> tuple[TestFile, Path]:
    """Return the test and its folder, free of what an earlier run left.

    First of all, so that a run that fails leaves no results that could be taken for its own.
    """
    path = test.path if isinstance(test, TestFile) else Path(test)
    folder = Path(out) if out is not None else default_folder(path)
    try:
        test = test if isinstance(test, TestFile) else load(test)
    except InputError:
        remove_results(folder)
        raise
    claim_folder(folder, test.inputs())
    return test, folder


def default_folder(test_path: Path) -> Path:
    """Return the result folder of a test file where none is named: ``NAME-results`` beside it."""
    return test_path.with_name(f"{test_path.stem}-results")


def read_gauges(
    test: TestFile, setup: Setup, folder: Path, progress: Progress | None
) -> tuple[GaugeHistory, list[NamedHistory]]:
    """Track the frames, or take up what was tracked before, and read the gauges in each."""
    reader, readings, still = setup.reader(), [], []
    named = NamedReadings(setup.subsets, setup.gauges, setup.silhouette)
    for done, followed in enumerate(tracked_or_stored(test, setup, folder), start=1):
        readings.append(reader.read(followed.match))
        named.read(followed.match, followed.widths)
        still.append(followed.patch)
        if progress is not None:
            progress(done, len(setup.source))
    history = gather(
        readings,
        setup.source.names,
        setup.source.time_s,
        correct=test.correlation.periodic != "off",
        averaged=setup.averaged(test.frames.first_reference),
    )
    if test.specimen.shape == "round":
        history = named.of_round_bar(history)
    seen = [one for one in still if one is not None]
    history, apparent, u = corrected(history, seen or None, receding(test.camera, test.specimen))
    gauges = named.histories(history.periodic, setup.scale_mm)
    return history, corrected_gauges(gauges, apparent, u)


def _clock(test: TestFile, setup: Setup, history: GaugeHistory, record: LoadRecord) -> Clock:
    """Fit the clock; if that fails, doubts about the frames that were met before may be the reason."""
    try:
        return fit_clock(
            history.time_s,
            history.axial,
            history.u_axial,
            record,
            test.sync,
            shift_px=history.shift_px[:, 0],
            epoch=setup.source.epoch,
        )
    except ClockError as error:
        doubts = [notice.text.rstrip(".") for notice in setup.source.notices]
        if not doubts:
            raise
        remedy = "; ".join([error.remedy, *doubts])
        raise ClockError(error.what, where=error.where, remedy=remedy) from error


def judged(
    test: TestFile,
    setup: Setup,
    history: GaugeHistory,
    named: list[NamedHistory],
    record: LoadRecord,
    clock: Clock,
    folder: Path,
) -> Measurement:
    """Go from gauge histories to properties."""
    curve = _curve(test, setup, history, record, clock)
    found = evaluate(
        Sheet(
            curve,
            test.specimen,
            test.load_record.relative_uncertainty,
            clock,
            test.properties,
            force_bounded=test.load_record.force_class is not None,
        )
    )
    clip_on = _clip_on(test, setup, history, record, clock, curve, found)
    straight = _alignment(test, setup, history, curve, found, folder)
    return Measurement(
        test=test,
        scene=scene_of(test, setup, folder),
        history=history,
        record=record,
        clock=clock,
        curve=curve,
        line=found.line,
        properties=found.properties,
        alignment=straight,
        quality=quality_of(setup, history),
        notices=(
            *setup.source.notices,
            *unreadable_frames(setup.source.names, unreadable(folder)),
            *record.notices,
            *clock.notices,
            *setup.notices,
            *found.notices,
            *loading_doubts(straight),
            *reading_doubts(history, curve, extensometer_asked=test.gauge.length is not None),
            *property_doubts(found.properties, test.specimen, test.load_record.relative_uncertainty),
            *clip_on_doubts(clip_on),
        ),
        provenance=provenance.collect(test, record, str(fields.stored_attributes(folder)["frames_sha256"])),
        folder=folder,
        clip_on=clip_on,
        gauges=tuple(named),
        optics=setup.optics.figures(test.camera, test.specimen),
    )


def _curve(test: TestFile, setup: Setup, history: GaugeHistory, record: LoadRecord, clock: Clock) -> Curve:
    """Lay stress beside strain, with what the camera may have falsified."""
    area, exposure_s = test.specimen.area, setup.source.exposure_s
    curve = make_curve(history, record, clock, area, exposure_s, setup.coupon.u_axis_deg)
    return replace(curve, u_towards=bound(test.camera), straightened=setup.optics.lens is not None)


def _clip_on(
    test: TestFile,
    setup: Setup,
    history: GaugeHistory,
    record: LoadRecord,
    clock: Clock,
    curve: Curve,
    found: Evaluation,
) -> ClipOn | None:
    """Compare with the clip-on extensometer in the load record, if there is one."""
    first = test.frames.first_reference
    return compare(
        record,
        clock,
        history,
        curve,
        found.properties["youngs_modulus"],
        reference=slice(first, first + setup.reference.frames),
        length_mm=test.load_record.extensometer_length,
    )


def _alignment(
    test: TestFile, setup: Setup, history: GaugeHistory, curve: Curve, found: Evaluation, folder: Path
) -> Alignment:
    """Judge how straight the coupon was pulled, from the stored fields of the elastic part."""
    inside = elastic_part(history, found.line.low, found.line.high)
    frames, grid = frames_to_read(inside), setup.grid
    rates = None
    if len(frames):
        moved = (setup.optics.straight_motion(one, grid) for one in fields.stored_motion(folder, frames))
        rates = gather_rates(moved, history.axial[frames], grid, setup.region, map_window(test, grid))
    limit = limit_of(test.alignment.limit, test.alignment.standard)
    return find_alignment(history, curve.force_N, inside, rates, limit, setup.coupon.u_axis_deg)
