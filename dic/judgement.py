"""Doubts about the gauge readings and about the loading, with their remedies."""

from __future__ import annotations

import numpy as np

from dic.correlation.flags import MEANING, Flag
from dic.errors import Notice
from dic.properties import Curve
from dic.strain import GaugeHistory
from dic.strain.alignment import BEYOND, Alignment


def reading_doubts(history: GaugeHistory, curve: Curve, *, extensometer_asked: bool) -> list[Notice]:
    """Return a warning for frames without strain, without force, or without an extensometer asked for."""
    strain, ends = np.isnan(history.axial), np.isnan(history.extensometer)
    repeated = np.array([status == MEANING[Flag.REPEATED_PICTURE] for status in history.status])
    cases = (
        (
            "frames_repeated",
            repeated,
            "show the picture of the frame before, so the camera froze, and have no reading",
            "check the camera's connection and the speed of its disk",
        ),
        ("frames_lost", strain & ~repeated, "could not be measured", "see the column status of history.csv"),
        (
            "extensometer_lost",
            ends & ~strain & extensometer_asked,
            "have no extensometer reading because an end of the gauge left the picture or was lost",
            "see the column status of history.csv",
        ),
        (
            "frames_outside_record",
            np.isnan(curve.force_N),
            "lie outside the load record's time and have no force",
            "check frames.rate or frames.times, and sync.offset",
        ),
    )
    found = [
        Notice(
            code,
            f"{missing.sum()} of {len(history)} frames {what} "
            f"(first: {history.name[int(np.argmax(missing))]}); {remedy}.",
        )
        for code, missing, what, remedy in cases
        if missing.any()
    ]
    if len(curve.spikes_s):
        found.append(
            Notice(
                "force_spikes",
                f"{len(curve.spikes_s)} single peaks in the force were left out (first: at "
                f"{curve.spikes_s[0]:.4g} s); check the load cell's cable and the record.",
            )
        )
    return found


def loading_doubts(alignment: Alignment) -> list[Notice]:
    """Return a warning where bending exceeds its limit."""
    if alignment.verdict != BEYOND:
        return []
    largest, limit = alignment.largest, alignment.limit or 0.0
    return [
        Notice(
            "bending",
            f"Bending in the picture's plane reaches {100 * largest.value:.1f} % ± {200 * largest.u:.1f} % "
            f"of the mean strain, beyond the {100 * limit:g} % of {alignment.limit_source}; the report's "
            "section on alignment says what to look at.",
        )
    ]
