"""The report: one page that opens in any browser with no network, and its figures as files."""

from __future__ import annotations

from base64 import b64encode
from dataclasses import dataclass
from importlib.resources import files
from math import isfinite
from pathlib import Path
from typing import TYPE_CHECKING, Any

from jinja2 import Environment, StrictUndefined
from markupsafe import Markup

from dic.comparison import ClipOn
from dic.measurement import Measurement, Scene
from dic.properties.result import Property
from dic.report import words
from dic.report.alignment import draw_alignment, sentences, sides, verdict
from dic.report.clip_on import agreement_rows, class_rows, draw_clip_on
from dic.report.clocks import draw_clocks
from dic.report.curves import draw_curves
from dic.report.figures import Drawing, house_style, render
from dic.report.gauges import draw_gauges, gauge_rows
from dic.report.maps import draw_maps, draw_scene
from dic.report.moments import choose_moments
from dic.report.optics import camera_rows
from dic.report.stress import draw_stress
from dic.rounding import (
    COVERAGE_FACTOR,
    decimals_for,
    fixed,
    three_digits,
    times_ten_to,
    uncertainty_alone,
    with_uncertainty,
)
from dic.store.folder import FIGURES
from dic.store.results import encoded, write_whole
from dic.store.tables import absent_in, called, found_in, stated, written_with
from dic.uncertainty import Row

if TYPE_CHECKING:
    import xarray as xr

_MEDIA = {"svg": "image/svg+xml", "png": "image/png"}


@dataclass(frozen=True)
class Picture:
    """A figure as the template sees it: its words and the picture itself as a data URI."""

    name: str
    title: str
    reading: str
    alt: str
    source: str


def write_report(measurement: Measurement, fields: xr.Dataset, folder: Path) -> Path:
    """Write ``report.html`` and ``figures/*.png`` and ``*.svg``.

    Parameters
    ----------
    measurement
        What the test gave.
    fields
        Displacement and strain fields on (frame, y, x); ``attrs`` say ``step_px``.
    folder
        The result folder.

    Returns
    -------
    Path
        The page.

    Raises
    ------
    StoreError
        If the folder cannot be written.
    """
    label = measurement.test.specimen.label
    with house_style():
        moments = choose_moments(measurement)
        stress, no_stress = draw_stress(measurement, fields)
        groups = {
            "curves": draw_curves(measurement, moments),
            "maps": draw_maps(measurement, fields, moments),
            "stress": stress,
            "scene": [draw_scene(measurement)],
            "alignment": draw_alignment(measurement),
            "clocks": draw_clocks(measurement),
            "clip_on": draw_clip_on(measurement),
            "gauges": draw_gauges(measurement),
        }
        pictures = {
            name: [_published(drawing, label, folder) for drawing in drawings]
            for name, drawings in groups.items()
        }
    _remove_stale(folder, {picture.name for group in pictures.values() for picture in group})
    return write_whole(folder, "report.html", encoded(_page(measurement, pictures, no_stress)))


def _published(drawing: Drawing, label: str, folder: Path) -> Picture:
    """Save a figure in both formats and return it as the page carries it."""
    content = render(drawing, label)
    for ending, data in content.items():
        write_whole(folder, f"figures/{drawing.name}.{ending}", data)
    ending = "svg" if drawing.vector else "png"
    source = f"data:{_MEDIA[ending]};base64,{b64encode(content[ending]).decode()}"
    return Picture(drawing.name, drawing.title, drawing.reading, drawing.alt, source)


def _remove_stale(folder: Path, names: set[str]) -> None:
    """Remove figures of an earlier evaluation that this one does not have."""
    for name in set(FIGURES) - names:
        for ending in _MEDIA:
            (folder / "figures" / f"{name}.{ending}").unlink(missing_ok=True)


def _page(measurement: Measurement, pictures: dict[str, list[Picture]], no_stress: str) -> str:
    room = files("dic.report")
    environment = Environment(
        autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True
    )
    environment.filters.update(breakable=words.breakable, share=words.share)
    template = environment.from_string(room.joinpath("page.html").read_text(encoding="utf-8"))
    test, shown = measurement.test, found_in(measurement.properties)
    return template.render(
        style=Markup(room.joinpath("page.css").read_text(encoding="utf-8")),  # noqa: S704  (our own file)
        specimen=test.specimen,
        kind="compression" if measurement.curve.peak_force_N < 0 else "tension",
        day=words.day(measurement.provenance),
        frames=len(measurement.history),
        area=f"{measurement.curve.area_mm2:.4g} mm²",
        k=f"{COVERAGE_FACTOR:g}",
        properties=[_entry(item) for item in shown],
        left_out=_left_out(shown),
        absent=[
            (reason, [(called(item), words.symbol(item.symbol)) for item in items])
            for reason, items in absent_in(measurement.properties)
        ],
        notices=measurement.notices,
        pictures=pictures,
        no_stress=no_stress,
        clock=measurement.clock,
        offset=with_uncertainty(
            measurement.clock.offset_s, COVERAGE_FACTOR * measurement.clock.offset_standard_uncertainty_s, "s"
        ),
        columns=measurement.record.columns,
        clip_on=_clip_on(measurement.clip_on),
        gauges=gauge_rows(measurement),
        alignment=words.labelled(_aligned(measurement), _sides(measurement.scene)),
        straight=verdict(measurement),
        looked_at=sentences(measurement),
        quality=words.labelled({"noise_grey": measurement.scene.noise_grey, **measurement.quality}),
        camera=camera_rows(measurement.optics),
        settings=words.flat(test.model_dump(mode="json", exclude_none=True)) + _worked_out(measurement.scene),
        provenance=words.grouped(
            # The test file has its own table already.
            {key: value for key, value in measurement.provenance.items() if key != "test_file"}
        ),
        cautions=words.CAUTIONS,
    )


def _clip_on(found: ClipOn | None) -> dict[str, Any] | None:
    """Return the comparison with a clip-on extensometer as the template shows it."""
    if found is None:
        return None
    until = (
        f"{found.used_until_s:.4g} s of the machine's clock" if isfinite(found.used_until_s) else "no frame"
    )
    return {
        "agreements": agreement_rows(found),
        "classes": class_rows(found),
        "ended": found.ended,
        "until": until,
        "notes": found.notes,
    }


def _aligned(measurement: Measurement) -> dict[str, Any]:
    """Return the figures on alignment that are shown as a table; the stations have their figure."""
    found = measurement.alignment
    shown = {name: value for name, value in found.figures().items() if isinstance(value, float)}
    del shown["bending_strain_per_N"], shown["u_bending_strain_per_N"]
    # With its sign, so that it can be held beside the halves of the elastic part.
    shown["bending_percent"] = 100 * found.bending.value
    return {"axis_angle_deg": measurement.scene.axis_angle_deg, **shown}


def _sides(scene: Scene) -> dict[str, str]:
    """Return what the coupon's sides and ends are called in the picture."""
    return dict(zip(("left", "right", "near", "far"), sides(scene), strict=True))


def _worked_out(scene: Scene) -> list[tuple[str, str]]:
    """Return the settings that the program chose or found itself."""
    return [
        ("scale in force", f"{scene.scale_mm:.5g} mm/px" if isfinite(scene.scale_mm) else "unknown"),
        ("subset in force", f"{scene.subset_px} px, one every {scene.step_px} px"),
        ("strain window of the maps", f"{scene.map_gauge_px:g} px"),
        ("axis in force", f"{fixed(scene.axis_angle_deg, 3)}° from the vertical, {scene.axis_method}"),
    ]


def _entry(item: Property) -> dict[str, Any]:
    """Return a property as the template shows it."""
    value, standard = map(words.unbroken, stated(item))
    return {
        "anchor": words.identifier(item.name),
        "title": called(item),
        "symbol": words.symbol(item.symbol),
        "value": value,
        "standard": standard,
        "method": item.method,
        "window": words.window(item.window),
        # One range names the window; the others say the same in other quantities.
        "short_window": words.window(dict(list(item.window.items())[:1])),
        "notes": item.notes,
        "contributions": _contributions(item),
        "interval": _interval(item),
    }


def _left_out(items: list[Property]) -> list[tuple[str, list[Markup]]]:
    """Return what uncertainties do not include, each once, with the symbols of the properties concerned."""
    found: dict[str, list[Markup]] = {}
    for item in items:
        for source in item.missing:
            found.setdefault(source, []).append(words.symbol(item.symbol))
    return list(found.items())


def _interval(item: Property) -> str:
    """Return the ends of the interval by draws, to two digits of the uncertainty; empty where unknown."""
    if not isfinite(item.interval_95[0]) or not item.standard_uncertainty > 0:
        return ""
    scale, unit, power = written_with(item)
    decimals = decimals_for(COVERAGE_FACTOR * item.standard_uncertainty * scale)
    low, high = (fixed(end * scale, decimals, power) for end in item.interval_95)
    both = f"({low} to {high})" if power else f"{low} to {high}"
    return both + words.unbroken(times_ten_to(power, unit))


def _contributions(item: Property) -> list[tuple[str, str, str, str, float]]:
    """Return source, input, sensitivity, contribution and share in percent, the largest first."""
    known = {source: abs(u) for source, u in item.contributions.items() if isfinite(u)}
    total = sum(u**2 for u in known.values())
    scale, unit, power = written_with(item)
    behind = {row.source: _input(row, unit, scale) for row in item.budget if row.included}
    return [
        (
            source,
            *behind.get(source, ("", "")),
            words.unbroken(uncertainty_alone(u * scale, unit, power)),
            100 * u**2 / total if total else 0.0,
        )
        for source, u in sorted(known.items(), key=lambda pair: -pair[1])
    ]


def _input(row: Row, unit: str, scale: float) -> tuple[str, str]:
    """Return an input with its standard uncertainty, and the property's change per unit of it."""
    if not isfinite(row.value):
        return "the readings themselves", "1"
    said = f"{row.value:.6g} {row.unit}".rstrip()
    per = f"{unit}/{row.unit}" if row.unit else unit
    sensitivity = (
        f"{three_digits(row.sensitivity * scale)} {per}".rstrip() if isfinite(row.sensitivity) else ""
    )
    alone = uncertainty_alone(row.standard_uncertainty, row.unit)
    return f"{words.unbroken(said)} ({words.unbroken(alone)})", words.unbroken(sensitivity)
