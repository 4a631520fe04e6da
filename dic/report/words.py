"""Numbers and names in the words of the page."""

from __future__ import annotations

import re
from collections.abc import Mapping
from datetime import datetime
from math import isfinite
from typing import Any

import numpy as np
from markupsafe import Markup

from dic.report.figures import strain_unit
from dic.rounding import COVERAGE_FACTOR, fixed, three_digits, uncertainty_alone, with_uncertainty

#: Keeps a number and its unit in one line.
NO_BREAK = "\N{NO-BREAK SPACE}"

#: Units that the end of a name stands for.
_UNITS = {
    "percent": "%",
    "deg": "°",
    "px": "px",
    "mm": "mm",
    "s": "s",
    "MPa": "MPa",
    "N": "N",
    "grey": "grey levels",
}

#: What people should know about a figure, by its name in ``results.json``.
MEANINGS = {
    "axis_angle_deg": (
        "Direction of loading",
        "Angle from the picture's vertical, clockwise; strains are turned into this direction first.",
    ),
    "bending_percent": (
        "Bending at the gauge's middle",
        "How much more the {right} edge is strained than the mean, in the picture's plane; negative where it "
        "is strained less. Bending through the thickness cannot be seen by one camera.",
    ),
    "bending_largest_percent": (
        "Largest bending in the gauge",
        "At one of its ends; the limit is for it.",
    ),
    "bending_change_percent": (
        "Bending at the {far} end less that at the middle",
        "Near zero for bending of one sign all along; as large as the largest where it changes sign.",
    ),
    "bending_lower_half_percent": (
        "Bending in the lower half of the elastic part",
        "Of the {right} edge, as above.",
    ),
    "bending_upper_half_percent": (
        "Bending in the upper half of it",
        "As large as in the lower half where bending grows in proportion to the force.",
    ),
    "uniformity_percent": (
        "Axial strain at the {far} end less that at the middle",
        "How uneven the strain is along its length; a taper or a nearby shoulder shows here.",
    ),
    "shear_percent": (
        "Shear per axial strain",
        "Should be small where the axis was found well and the material has no preferred direction.",
    ),
    "motion_angle_deg": (
        "Motion against the axis",
        "Direction in which the gauge moves, clockwise from its axis; near zero for a coupon clamped square.",
    ),
    "turning_per_percent_deg": (
        "Rotation of the middle per 1 % of strain",
        "Clockwise positive; a coupon that is loaded straight does not turn.",
    ),
    "turning_near_end_per_percent_deg": (
        "Rotation of the {near} end",
        "Opposite to the other end for a C, the same as the other for an S.",
    ),
    "turning_far_end_per_percent_deg": ("Rotation of the {far} end", "Per 1 % of strain, too."),
    "limit_percent": ("Limit", "Largest bending that the test file or its standard allows."),
    "valid_fraction": (
        "Subsets measured",
        "Share of the gauge's subsets that were recognised again, median over the frames; it should stay "
        "near 100 %.",
    ),
    "coupon_width_px": ("Coupon width", "Between the two long edges; it gives the scale."),
    "u_axis_deg": ("Standard uncertainty of the axis", "From the scatter along the coupon's edges."),
    "subsets": ("Subsets", "How many patches were followed in every frame."),
    "gauge_region_length_px": ("Gauge region, along", "Strain is averaged over this length."),
    "gauge_region_width_px": ("Gauge region, across", "Strain is averaged over this width."),
    "extensometer_length_px": (
        "Extensometer length",
        "Distance between the two end bands whose change is the extensometer reading in history.csv.",
    ),
    "pixel_mm": ("Size of a pixel", "On the coupon; strains do not depend on it."),
    "reference_frames": (
        "Frames in the reference",
        "Frames at rest that were averaged into the picture that strain counts from.",
    ),
    "periodic_error_px": (
        "Periodic error of the interpolation",
        "Amplitude C of C·sin(2πu) in the displacements as this test shows it, u in px; its uncertainty is "
        "from leaving out one frame at a time.",
    ),
    "periodic_error_second_px": ("Its second wave", "Amplitude of the part that has two waves per pixel."),
    "periodic_error_corrected": (
        "Corrected for it",
        "Only where the test determines an amplitude well.",
    ),
    "speckle_px": (
        "Speckle size",
        "3 to 5 px is good (common practice); larger ones want larger subsets and show less detail.",
    ),
    "grey_range_percent": (
        "Contrast",
        "Grey range of the speckles as a share of the camera's full scale; the more, the less noise in "
        "strain.",
    ),
    "saturated_fraction": ("Clipped pixels", "Share of pixels at full scale, where the pattern is lost."),
    "noise_grey": ("Camera noise", "Scatter of one pixel in one frame, from what matching left over."),
}

#: What lies behind each number of the report, in the order of importance.
CAUTIONS = (
    "The values describe this coupon in this test. A measured strength or modulus is not a design "
    "allowable; those come from many tests, a standard's statistics and a licensed engineer's judgement.",
    "Whether the test conforms to a standard is decided by that standard and, where it applies, by an "
    "accredited laboratory; this report states what was done, not that it conforms.",
    "One camera sees one face and one plane. Bending through the thickness is invisible to it and "
    "falsifies strains; where that matters, measure the opposite face as well.",
    "Motion of the coupon towards or away from the camera looks like strain, the same amount in both "
    "directions.",
    "Uncertainties contain what their tables list and nothing else; above them stands what is not included.",
)


def symbol(text: str) -> Markup:
    """Set a property's symbol as standards print it: a letter in italics, its index lowered."""
    letter, index = text[:1], text[1:]
    return (
        Markup("<i>{}</i><sub>{}</sub>").format(letter, index)
        if index
        else Markup("<i>{}</i>").format(letter)
    )


def breakable(text: str) -> Markup:
    """Allow a key to go on in the next line after its dots and underscores."""
    pieces = re.split(r"(?<=[._])", text)
    return Markup("<wbr>").join(pieces)


def unbroken(text: str) -> str:
    """Keep a number with its uncertainty and unit in one line."""
    return text.replace(" ", NO_BREAK)


def share(percent: float) -> str:
    """Say a share, a small one without pretending that it is none."""
    return "< 1 %" if 0 < percent < 1 else f"{percent:.0f} %"


def window(bounds: Mapping[str, tuple[float, float]]) -> str:
    """Say the bounds of the data that were used."""
    return "; ".join(_range(name, low, high) for name, (low, high) in bounds.items())


def _range(name: str, low: float, high: float) -> str:
    stem, _, ending = name.rpartition("_")
    scale, unit = 1.0, _UNITS.get(ending, "")
    if name == "strain":
        scale, unit = strain_unit(np.array([low, high]))
    low_text, high_text = f"{low * scale:.4g}", f"{high * scale:.4g}"
    bounds = low_text if low_text == high_text else f"{low_text} to {high_text}"
    return f"{stem if unit and stem else name} {bounds}{NO_BREAK if unit else ''}{unit}"


def labelled(
    figures: Mapping[str, Any], sides: Mapping[str, str] | None = None
) -> list[tuple[str, str, str]]:
    """Return label, value with unit, and meaning of figures whose names end in their units.

    A figure and its standard uncertainty, named alike with ``u_`` before it, make one row, k = 2.  `sides`
    names the coupon's sides and ends where a meaning speaks of them.
    """
    rows = [
        _labelled(name, value, figures.get(f"u_{name}"))
        for name, value in figures.items()
        if name.removeprefix("u_") == name or name.removeprefix("u_") not in figures
    ]
    if sides is None:
        return rows
    return [(label.format(**sides), value, meaning.format(**sides)) for label, value, meaning in rows]


def _labelled(name: str, value: Any, u: float | None) -> tuple[str, str, str]:
    stem, _, ending = name.rpartition("_")
    unit = _UNITS.get(ending, "")
    label, meaning = MEANINGS.get(name, (heading(stem if unit else name), ""))
    if not isinstance(value, int | float | np.number):
        return label, str(value), meaning
    if not isfinite(value):
        return label, "not determined", meaning
    if name.endswith("_corrected"):
        return label, "yes" if value else "no", meaning
    if u is not None:
        return label, with_uncertainty(float(value), COVERAGE_FACTOR * u, unit), meaning
    if name.startswith("u_"):
        return label, uncertainty_alone(float(value), unit), meaning
    if ending == "fraction":
        return label, f"{100 * value:.3g} %", meaning
    if "strain" in name and not unit:
        scale, unit = strain_unit(float(value))
        return label, f"{three_digits(value * scale)} {unit}", meaning
    if unit == "°":
        return label, f"{fixed(float(value), 2)}°", meaning
    # Whole numbers are counts; of the rest three digits tell enough.
    text = f"{value:.0f}" if float(value).is_integer() else three_digits(float(value))
    return label, f"{text} {unit}".rstrip(), meaning


def heading(name: str) -> str:
    """Turn a key into words."""
    words = name.replace("_", " ").strip()
    return words[:1].upper() + words[1:]


def day(provenance: Mapping[str, Any]) -> str:
    """Return the day of the evaluation, or say that it was not recorded."""
    try:
        return datetime.fromisoformat(str(provenance["made"])).strftime("%Y-%m-%d %H:%M %Z").strip()
    except (KeyError, ValueError):
        return "date not recorded"


def flat(content: Mapping[str, Any], prefix: str = "") -> list[tuple[str, str]]:
    """Return keys and values of nested settings as rows, inner keys behind a dot."""
    rows: list[tuple[str, str]] = []
    for key, value in content.items():
        name = f"{prefix}{key}"
        if isinstance(value, Mapping):
            rows += flat(value, f"{name}.")
        elif isinstance(value, list | tuple):
            rows.append(
                (name, ", ".join(f"{item:g}" if isinstance(item, float) else str(item) for item in value))
            )
        elif isinstance(value, float):
            rows.append((name, f"{value:.6g}"))
        else:
            rows.append((name, str(value)))
    return rows


def grouped(content: Mapping[str, Any]) -> list[tuple[str, list[tuple[str, str]]]]:
    """Return nested content as tables: a heading and its rows, loose values first."""
    loose = {key: value for key, value in content.items() if not isinstance(value, Mapping)}
    tables = [("General", flat(loose))] if loose else []
    nested = {key: value for key, value in content.items() if isinstance(value, Mapping)}
    return tables + [(_CAPTIONS.get(key, heading(key)), flat(value)) for key, value in nested.items()]


_CAPTIONS = {"sha256": "Fingerprints of the inputs (SHA-256)"}


def identifier(name: str) -> str:
    """Return a name that can serve as an anchor."""
    return re.sub(r"[^a-z0-9]+", "-", name.lower()).strip("-")
