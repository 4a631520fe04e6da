"""The results as files that other programs read: ``results.json`` and ``history.csv``."""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from contextlib import suppress
from dataclasses import asdict
from math import isfinite
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from dic.comparison.clip_on import METHOD
from dic.errors import StoreError
from dic.rounding import COVERAGE_FACTOR, COVERAGE_PROBABILITY
from dic.store.tables import history_table

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from dic.comparison import ClipOn
    from dic.measurement import Measurement
    from dic.properties.result import Property


def write_results(measurement: Measurement, folder: Path) -> None:
    """Write ``results.json`` and ``history.csv``, each whole or not at all.

    Parameters
    ----------
    measurement
        What the test gave.
    folder
        Where the files go; made if it does not exist.

    Raises
    ------
    StoreError
        If the folder cannot be written.
    """
    table = history_table(measurement)
    table["name"] = [as_text(name) for name in table["name"]]
    rows = table.to_csv(index=False, na_rep="NaN", lineterminator="\n")
    text = json.dumps(results_of(measurement), indent=2, ensure_ascii=False, allow_nan=False)
    write_whole(folder, "history.csv", encoded(rows))
    if lines := _lines(measurement):
        write_whole(folder, "lines.csv", encoded(lines))
    write_whole(folder, "results.json", encoded(text + "\n"))


def as_text(cell: str) -> str:
    """Return a file name so that a spreadsheet shows it and does not take it for a formula.

    An apostrophe before what a formula may begin with; common practice (OWASP, "CSV injection").
    """
    return f"'{cell}" if cell.startswith(("=", "+", "-", "@", "\t", "\r")) else cell


def results_of(measurement: Measurement) -> dict[str, Any]:
    """Gather everything that ``results.json`` says, in types that JSON knows.

    Returns
    -------
    dict
        Numbers in internal units (MPa, s, deg, px); what is not a finite number is None.
    """
    test, clock, scene = measurement.test, measurement.clock, measurement.scene
    content = {
        "specimen": {"label": test.specimen.label, "material": test.specimen.material},
        "properties": {name: _property(item) for name, item in measurement.properties.items()},
        "sync": {
            "offset_s": clock.offset_s,
            "offset_standard_uncertainty_s": clock.offset_standard_uncertainty_s,
            "drift": clock.drift,
            "drift_standard_uncertainty": clock.drift_standard_uncertainty,
            "method": clock.method,
            "notes": clock.notes,
        },
        "alignment": {
            "axis_angle_deg": scene.axis_angle_deg,
            "axis_method": scene.axis_method,
            **measurement.alignment.figures(),
        },
        "optics": measurement.optics,
        "quality": measurement.quality,
        **({"gauges": _gauges(measurement)} if measurement.gauges else {}),
        **({"clip_on": _clip_on(measurement.clip_on)} if measurement.clip_on is not None else {}),
        "warnings": [{"code": notice.code, "text": notice.text} for notice in measurement.notices],
        "provenance": measurement.provenance,
    }
    plain: dict[str, Any] = _plain(content)
    return plain


def _clip_on(found: ClipOn) -> dict[str, Any]:
    """Say the comparison with a clip-on extensometer; the line over all frames compared stands first."""
    return {
        **asdict(found.whole),
        "modulus_window": asdict(found.window),
        "method": METHOD,
        "gauge_length_mm": found.gauge_length_mm,
        "used_until_s": found.used_until_s,
        "ended": found.ended,
        "stations": {
            "strain": found.station_strain,
            "difference": found.station_difference,
            "u_difference": found.u_station,
            "coverage_factor": found.coverage_factor,
        },
        "classes": [asdict(one) for one in found.classes],
        "notes": found.notes,
    }


def _gauges(measurement: Measurement) -> dict[str, Any]:
    """Say where the named gauges sit; their readings stand in ``history.csv``."""
    return {
        one.gauge.name: {
            "kind": one.gauge.kind,
            "length_px": one.gauge.length_px,
            "length_mm": one.length_mm,
            "columns": [name for name in one.columns() if not name.startswith("status_")],
            "largest_strain": largest(one.strain),
            "frames_lost": sum(said != "ok" for said in one.status),
            "outlines_px": one.gauge.outlines,
            "notes": [one.gauge.note] if one.gauge.note else [],
        }
        for one in measurement.gauges
    }


def largest(strain: NDArray[np.float64]) -> float:
    """Return the strain of the largest size, with its sign; NaN where none was measured."""
    return float(max(strain[np.isfinite(strain)], key=abs, default=np.nan))


def _lines(measurement: Measurement) -> str:
    """Write the strain along the named lines: one row for each place and frame."""
    import pandas as pd

    tables = [
        pd.DataFrame(
            {
                "gauge": one.gauge.name,
                "frame": np.repeat(measurement.history.frame, len(one.gauge.places_px)),
                "time_s": np.repeat(measurement.history.time_s, len(one.gauge.places_px)),
                "place_px": np.tile(one.gauge.places_px, len(one.strain)),
                "place_mm": np.tile(one.gauge.places_px, len(one.strain)) * measurement.scene.scale_mm,
                "strain": one.parts.ravel(),
                "u_strain": one.u_parts.ravel(),
            }
        )
        for one in measurement.gauges
        if one.gauge.places_px
    ]
    return pd.concat(tables).to_csv(index=False, na_rep="NaN", lineterminator="\n") if tables else ""


def _property(item: Property) -> dict[str, Any]:
    notes = item.notes
    if not isfinite(item.value) and not notes:
        notes = ("The value could not be determined; no reason was recorded.",)
    return {
        "value": item.value,
        "qualifier": item.qualifier,
        "unit": item.unit,
        "standard_uncertainty": item.standard_uncertainty,
        "method": item.method,
        "window": item.window,
        "notes": [*notes, *(f"not included: {one}" for one in item.missing)],
        "symbol": item.symbol,
        "coverage_factor": COVERAGE_FACTOR,
        "expanded_uncertainty": COVERAGE_FACTOR * item.standard_uncertainty,
        "coverage_probability": COVERAGE_PROBABILITY,
        "interval_95": item.interval_95,
        "draws_standard_deviation": item.draws_standard_deviation,
        "contributions": item.contributions,
        "budget": [asdict(row) for row in item.budget],
    }


def _plain(content: Any) -> Any:
    """Turn paths, arrays and NumPy scalars into what JSON knows, and NaN, which it lacks, into None."""
    if isinstance(content, Mapping):
        return {str(key): _plain(value) for key, value in content.items()}
    if isinstance(content, list | tuple):
        return [_plain(value) for value in content]
    if isinstance(content, np.ndarray | np.generic):
        return _plain(content.tolist())
    if isinstance(content, float):
        return content if isfinite(content) else None
    if content is None or isinstance(content, str | int):
        return content
    return str(content)


def encoded(text: str) -> bytes:
    """Encode as UTF-8, with an escape for what a broken file name may carry."""
    return text.encode("utf-8", "backslashreplace")


def write_whole(folder: Path, name: str, content: bytes) -> Path:
    """Write a file below `folder` so that it is there whole or not at all.

    Parameters
    ----------
    folder
        The result folder.
    name
        File name, or relative path, below it.
    content
        What to write.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    StoreError
        If the file cannot be written, or would lie outside the folder.
    """
    path = folder / name
    if not path.parent.resolve().is_relative_to(folder.resolve()):
        raise StoreError(
            f"'{name}' would lie outside the result folder",
            where=str(folder),
            remedy="remove the link that leads out of it",
        )
    # In the same folder, because a rename is whole only within one file system.
    temporary = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        temporary.unlink(missing_ok=True)
        # "x" follows no link that somebody may have laid there.
        with temporary.open("xb") as file:
            file.write(content)
        os.replace(temporary, path)
    except OSError as error:
        raise StoreError(
            f"cannot be written ({error.strerror})",
            where=str(path),
            remedy="check the folder's rights and free space, and close the file where it is open",
        ) from error
    finally:
        with suppress(OSError):
            temporary.unlink(missing_ok=True)
    return path
