"""A virtual test on disk, as a laboratory would have it: frames, load record, test file; and the truth."""

from __future__ import annotations

import json
import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor, as_completed
from math import isfinite
from pathlib import Path
from typing import Any

import numpy as np
import tifffile
import tomli_w

from dic.errors import StoreError
from synthetic_images.scenario import Scenario
from synthetic_images.virtual_test import VirtualTest

#: The truth file's first key tells an earlier render from somebody's own folder.
_MARK = "virtual_test"
#: From this force on the record is in kN.
_KILO_FROM = 1000.0


def render(scenario: Scenario, out: Path, progress: Callable[[int, int], None] | None = None) -> Path:
    """Make a virtual test; the same scenario gives the same bytes.

    Parameters
    ----------
    scenario
        Its description.
    out
        Folder to fill; must be new, empty or an earlier render, which is replaced.
    progress
        Called with the number of frames done and the number of all.

    Returns
    -------
    Path
        The test file, ready to be run.

    Raises
    ------
    StoreError
        If the folder holds something else or cannot be written.
    InputError
        If the scenario's texture would not fit into memory.
    """
    out = Path(out)
    test = VirtualTest(scenario)
    try:
        _clear(out)
        # The mark first, so that a render that was cut short can be made anew; the test file last,
        # so that one that was cut short cannot be taken for a whole one.
        _write_json(out / "truth.json", truth(test))
        _write_frames(test, out / "frames", progress)
        _write_record(test, out / "machine.csv")
        path = out / "test.toml"
        path.write_bytes(tomli_w.dumps(test_file(test)).encode())
    except OSError as error:
        raise StoreError(
            f"cannot be written ({error.strerror})", where=str(out), remedy="choose another folder"
        ) from error
    return path


def _clear(out: Path) -> None:
    """Make the folder and take out an earlier render's files, but nothing else."""
    if out.is_dir() and any(out.iterdir()) and not _is_render(out):
        raise StoreError(
            "holds files that no render has made",
            where=str(out),
            remedy="name a new or empty folder",
        )
    (out / "frames").mkdir(parents=True, exist_ok=True)
    for old in [out / "test.toml", out / "machine.csv", *(out / "frames").glob("cam_*.tif")]:
        old.unlink(missing_ok=True)


def _is_render(out: Path) -> bool:
    try:
        return _MARK in json.loads((out / "truth.json").read_text(encoding="utf-8"))
    except (OSError, ValueError, TypeError):
        return False


def _write_frames(test: VirtualTest, folder: Path, progress: Callable[[int, int], None] | None) -> None:
    motions = test.motions()
    digits = max(5, len(str(len(motions))))

    def make(k: int) -> None:
        path = folder / f"cam_{k + 1:0{digits}d}.tif"
        tifffile.imwrite(path, test.frame(k, motions[k]), photometric="minisblack", metadata=None)

    # Each thread owns whole frames, so their number cannot show in the bytes.
    with ThreadPoolExecutor(os.cpu_count() or 1) as pool:
        jobs = [pool.submit(make, k) for k in range(len(motions))]
        try:
            for done, job in enumerate(as_completed(jobs), start=1):
                job.result()
                if progress is not None:
                    progress(done, len(jobs))
        except BaseException:
            pool.shutdown(wait=False, cancel_futures=True)
            raise


def _write_record(test: VirtualTest, path: Path) -> None:
    time, crosshead, force = test.record()
    kilo = np.abs(force).max() >= _KILO_FROM
    header = f"Time (s),Crosshead (mm),Force ({'kN' if kilo else 'N'})"
    columns, formats = [time, crosshead, force / 1000 if kilo else force], ["%.4f", "%.5f", "%.6f"]
    if (contact := test.contact_strain()) is not None:
        header += ",Extensometer (%)"
        columns.append(100 * contact)
        formats.append("%.6f")
    np.savetxt(
        path,
        np.column_stack(columns),
        fmt=formats,
        delimiter=",",
        header=header,
        comments="",
        encoding="utf-8",
    )


def test_file(test: VirtualTest) -> dict[str, Any]:
    """Return the test file's content, as someone in the laboratory would have filled it in."""
    scenario, readings = test.scenario, test.readings()
    specimen, record = scenario.specimen, scenario.load_record
    content: dict[str, Any] = {
        "specimen": {
            "label": specimen.label,
            "material": specimen.material,
            "shape": specimen.shape,
            **{name: f"{size:.5g} mm" for name, size in readings.section_mm.items()},
        },
        "frames": {"source": "frames", "rate": f"{scenario.camera.rate:.15g} Hz"},
        "load_record": {
            "source": "machine.csv",
            "time": "Time",
            "force": "Force",
            "displacement": "Crosshead",
        },
    }
    for side in specimen.dimensions:
        if uncertainty := getattr(specimen, f"{side}_uncertainty"):
            content["specimen"][f"{side}_uncertainty"] = f"{uncertainty:.6g} mm"
    if record.force_uncertainty:
        content["load_record"]["force_uncertainty"] = f"{100 * record.force_uncertainty:.6g} %"
    if record.extensometer_gain is not None:
        content["load_record"]["extensometer"] = "Extensometer"
        if record.extensometer_length is not None:
            content["load_record"]["extensometer_length"] = f"{record.extensometer_length:.6g} mm"
    for name in ("gauge", "properties"):
        if (section := getattr(scenario, name)) is not None:
            content[name] = section.model_dump(exclude_none=True, exclude_unset=True)
    return content


def truth(test: VirtualTest) -> dict[str, Any]:
    """Return everything that is known of a virtual test and that a measurement has to find.

    Returns
    -------
    dict
        Ready for JSON; what is not reached in the test is None.
    """
    scenario, readings, state = test.scenario, test.readings(), test.at(test.frame_times)
    return {
        _MARK: "every number here is invented; no real material, machine or camera is meant",
        "properties": {
            name: {"value": value if isfinite(value) else None, "unit": unit}
            for name, (value, unit) in test.properties().items()
        },
        "sync": {
            "offset_s": scenario.camera.offset,
            "drift": 0.0,
            "loading_starts_s": scenario.machine.start,
        },
        "alignment": {
            "axis_angle_deg": scenario.view.axis_angle,
            "bending_percent": 100 * scenario.machine.bending,
        },
        "specimen": {
            **{f"{name}_mm": getattr(scenario.specimen, name) for name in readings.section_mm},
            "area_mm2": test.area_mm2,
            "scale_mm_per_px": scenario.scale,
            "centre_px": list(test.centre),
        },
        "errors": {
            "force_factor": readings.force_factor,
            **{
                f"{name}_mm": size - getattr(scenario.specimen, name)
                for name, size in readings.section_mm.items()
            },
            "extensometer_gain": scenario.load_record.extensometer_gain,
            "extensometer_offset": scenario.load_record.extensometer_offset,
        },
        "frames": {
            "machine_time_s": test.frame_times.tolist(),
            "strain_axial": state.axial.tolist(),
            "strain_transverse": state.transverse.tolist(),
            "force_N": state.force_N.tolist(),
            "stress_MPa": (state.force_N / test.area_mm2).tolist(),
            "rise_px": (state.rise_mm / scenario.scale).tolist(),
            "sideways_px": (state.sideways_mm / scenario.scale).tolist(),
        },
        "fracture_time_s": test.fracture_time if isfinite(test.fracture_time) else None,
        "scenario": scenario.model_dump(exclude_none=True),
    }


def _write_json(path: Path, content: dict[str, Any]) -> None:
    path.write_text(json.dumps(content, indent=1, allow_nan=False) + "\n", encoding="utf-8")
