"""What a test file's inputs hold and what will be assumed, found before anything is computed."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np

from dic.errors import FrameError, InputError, Notice, TestFileError
from dic.frames import FrameSource, check_damage, open_frames, unreadable_frames
from dic.inspection.doubts import dimension_doubts, frame_doubts, missing_uncertainties, record_doubts
from dic.inspection.looking import Progress, look_at_frames, look_at_record, survey_record
from dic.inspection.seen import FramesSeen, Inspection, RecordSeen
from dic.sync import LoadRecord, known_clock, read_load_record
from dic.testfile import (
    Camera,
    Correlation,
    Frames,
    Gauge,
    Properties,
    Specimen,
    Sync,
    TestFile,
    bare_quantities,
    load,
    sound_sections,
)
from dic.testfile import LoadRecord as RecordSection


def inspect(test: TestFile | str | Path, progress: Progress | None = None) -> Inspection:
    """Read everything that a test file names, and compute nothing.

    Where one input is at fault, its error is kept and the other is still inspected.

    Parameters
    ----------
    test
        A test file, or its path.
    progress
        Called after each frame that was read.

    Returns
    -------
    Inspection
        What was seen; its `errors` are empty if a run can begin.

    Raises
    ------
    TestFileError
        If the test file is missing or is not TOML.
    """
    errors: list[str] = []
    warnings: list[Notice] = []
    path = test.path if isinstance(test, TestFile) else Path(test)
    sections = _sections(test, errors)
    source = _attempt(lambda: _opened_frames(sections, path), errors)
    record = _attempt(lambda: _opened_record(sections, path), errors)
    seen = None
    if source is not None:
        warnings += source.notices
        seen = _attempt(lambda: look_at_frames(source, sections["frames"], progress), errors)
    if seen is not None:
        warnings += frame_doubts(seen)
        damage = {source.names.index(name): why for name, why in seen.unreadable.items()}
        warnings += unreadable_frames(source.names, damage)
        _attempt(lambda: _check_damage(damage, source, sections["frames"]), errors)
        _attempt(lambda: _check_places(source, sections), errors)
    if record is not None:
        warnings += record_doubts(record)
    warnings += _specimen_doubts(sections, record, seen)
    return Inspection(
        test_file=str(path),
        frames=seen,
        record=_seen_record(record, sections, path),
        overlap=_overlap(source, record, sections, errors, warnings),
        assumed=(*bare_quantities(path), *assumptions(sections)),
        errors=tuple(errors),
        warnings=tuple(warnings),
    )


def _sections(test: TestFile | str | Path, errors: list[str]) -> dict[str, Any]:
    """Return the sections that are right, under their names; all of them if the test file is."""
    if isinstance(test, TestFile):
        return dict(test)
    try:
        return dict(load(test))
    except InputError as error:
        found = sound_sections(Path(test))
        errors.append(str(error))
        return dict(found)


def _attempt(read: Callable[[], Any], errors: list[str]) -> Any:
    try:
        return read()
    except InputError as error:
        errors.append(str(error))
        return None


def _opened_frames(sections: dict[str, Any], path: Path) -> FrameSource | None:
    section: Frames | None = sections.get("frames")
    return None if section is None else open_frames(section, path.parent)


def _check_damage(damage: dict[int, str], source: FrameSource, section: Frames) -> None:
    """Refuse frames of which most, or those that strain counts from, cannot be used."""
    check_damage(damage, len(source), section.source)
    first, last = source.reference(section.reference)
    for index in range(first, last + 1):
        if index in damage:
            raise FrameError(
                damage[index],
                where=source.names[index],
                remedy="strain counts from it, so say another one with frames.reference",
            )


def _check_places(source: FrameSource, sections: dict[str, Any]) -> None:
    """Refuse a gauge region, or a named gauge's place, outside the picture."""
    gauge = sections.get("gauge")
    if gauge is not None and gauge.region != "auto":
        from dic.preparation import given_region  # the correlation behind it takes a moment to load

        given_region(source.shape, gauge.region)
    for name, named in (sections.get("gauges") or {}).items():
        for place in (named.start, named.end, named.centre, *(named.points or ())):
            if place is None or isinstance(place[0], str):  # lengths count from what is only found by a run
                continue
            if not (0 <= place[0] < source.shape[1] and 0 <= place[1] < source.shape[0]):
                raise TestFileError(
                    f"[{place[0]:g}, {place[1]:g}] px is not inside the picture",
                    where=f"gauges.{name}",
                    remedy=f"the picture is {source.shape[1]} px wide and {source.shape[0]} px high",
                )


def _seen_record(record: LoadRecord | None, sections: dict[str, Any], path: Path) -> RecordSeen | None:
    """Return what the record holds; of one that cannot be used yet what can be told without the test file."""
    section: RecordSection | None = sections.get("load_record")
    if section is None:
        return None
    if record is not None:
        return look_at_record(record, section)
    return _attempt(lambda: survey_record(path.parent / section.source, section), [])


def _opened_record(sections: dict[str, Any], path: Path) -> LoadRecord | None:
    section: RecordSection | None = sections.get("load_record")
    return None if section is None else read_load_record(section, path.parent / section.source)


def _specimen_doubts(
    sections: dict[str, Any], record: LoadRecord | None, seen: FramesSeen | None
) -> Iterator[Notice]:
    specimen: Specimen | None = sections.get("specimen")
    if specimen is None:
        return
    camera = sections.get("camera")
    yield from dimension_doubts(
        specimen,
        most_force=None if record is None else float(np.nanmax(np.abs(record.force_N))),
        scale=None if camera is None else camera.scale,
        picture=None if seen is None else max(seen.rows, seen.columns),
    )
    section = sections.get("load_record")
    yield from missing_uncertainties(specimen, None if section is None else section.relative_uncertainty)


def _overlap(
    source: FrameSource | None,
    record: LoadRecord | None,
    sections: dict[str, Any],
    errors: list[str],
    warnings: list[Notice],
) -> str:
    """Say how frames and record lie on one clock, as far as that is known before tracking."""
    if source is None or record is None or not source.timed:
        missing = "the load record" if source is not None and source.timed else "the frames' clock"
        return f"unknown as long as {missing} is not known"
    section: Sync = sections.get("sync") or Sync()
    filmed = float(source.time_s[-1] - source.time_s[0]) * (1 + section.assumed_drift)
    recorded = float(record.time_s[-1] - record.time_s[0])
    try:
        clock = known_clock(source.time_s, record, section, source.epoch)
    except InputError as error:
        errors.append(str(error))
        return "none"
    if clock is None:
        if filmed > recorded:
            warnings.append(
                Notice(
                    "record_shorter",
                    f"The frames last {filmed:.4g} s and the record {recorded:.4g} s, so some frames will "
                    "have no force; check the frames' clock, and that the whole test was exported.",
                )
            )
        return (
            f"the offset will be found from the start of loading; the frames last {filmed:.4g} s, the record "
            f"{recorded:.4g} s{_by_dates(source, record)}"
        )
    at = clock.machine_time(source.time_s)
    inside = (at >= record.time_s[0]) & (at <= record.time_s[-1])
    if not inside.all():
        warnings.append(
            Notice(
                "frames_outside",
                f"{int((~inside).sum())} of {len(at)} frames lie outside the record and will have no force; "
                "check sync.offset.",
            )
        )
    return (
        f"{int(inside.sum())} of {len(at)} frames lie within the record; they run from {at[0]:.4g} s to "
        f"{at[-1]:.4g} s of its clock"
    )


def _by_dates(source: FrameSource, record: LoadRecord) -> str:
    """Say what the dates in frames and record would make of the offset, where both hold some."""
    if source.epoch is None or record.epoch is None:
        return ""
    apart = (source.epoch - record.epoch).total_seconds()
    return f'; by the dates in the files it would be "{apart:.6g} s", if both clocks were set alike'


def assumptions(sections: dict[str, Any]) -> Iterator[str]:
    """Say each default in force that bears on the result, a sentence each.

    Parameters
    ----------
    sections
        The sections of a test file that are right, under their names.
    """
    frames = sections.get("frames")
    # Of these every key has a default, so that a section that is left out holds them all.
    camera, gauge = sections.get("camera", Camera()), sections.get("gauge", Gauge())
    correlation, sync = sections.get("correlation", Correlation()), sections.get("sync", Sync())
    properties = sections.get("properties", Properties())
    if frames is not None and frames.reference is None:
        yield "Strain counts from the frames at rest at the beginning, up to 16 of them (frames.reference)."
    if camera.scale is None:
        yield "The scale follows from the coupon's width between its long edges (camera.scale)."
    if gauge.axis == "auto":
        yield "The direction of the pull is found from the coupon's long edges (gauge.axis)."
    if gauge.region == "auto":
        yield "Strain is averaged over the whole textured part of the coupon (gauge.region)."
    if gauge.length is None:
        yield "No extensometer length is asked for: its reading covers the whole region (gauge.length)."
    if correlation.subset % 2 == 0:
        taken = correlation.subset + 1
        yield f"A patch has a middle pixel: correlation.subset = {correlation.subset} is taken as {taken}."
    else:
        yield f"Patches of {correlation.subset} px are followed (correlation.subset)."
    if sync.offset == "auto":
        yield "The clocks are joined where loading starts; some rest must be filmed first (sync.offset)."
    if sync.drift == "auto":
        yield "Camera and machine clock run equally fast unless the test's end says otherwise (sync.drift)."
    if properties.modulus == "auto":
        yield "The modulus window is found from the curve (properties.modulus)."
    shown = ", ".join(f"{100 * offset:g} %" for offset in properties.proof) or "none"
    yield f"Proof stresses at offsets of {shown} (properties.proof)."
