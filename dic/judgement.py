"""What the gauge readings say beside the properties: alignment, and doubts with their remedies."""

from __future__ import annotations

import numpy as np

from dic.correlation.flags import MEANING, Flag
from dic.errors import Notice
from dic.properties import Curve, Evaluation
from dic.strain import GaugeHistory


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
