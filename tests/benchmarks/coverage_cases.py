"""Virtual tests whose properties are known: drawn, measured, and held against the truth."""

from __future__ import annotations

import tempfile
from pathlib import Path
from typing import Any

import numpy as np

from dic.pipeline import take_measurement
from dic.properties import Sheet, evaluate, make_curve
from dic.strain.history import GaugeHistory
from dic.sync import fit_clock
from dic.sync.record import LoadRecord
from dic.testfile import TestFile, load
from synthetic_images.files import render, test_file
from synthetic_images.materials import Elastic, Material
from synthetic_images.readings import gauge_history
from synthetic_images.variety import varied
from synthetic_images.virtual_test import VirtualTest

#: What is held against the truth.
NAMES = ("youngs_modulus", "poissons_ratio", "proof_stress_0_2", "tensile_strength")
#: Noise of the strains per share of grey noise that a 130 px wide gauge has, along and across
#: (measured on such pictures); and the amplitude of a periodic error left in both.
NOISE = (3.0e-4, 8e-4)
PERIODIC = 4e-7


def pictureless(seed: int) -> list[dict[str, Any]]:
    """Evaluate a drawn test whose strains are the truth, noise and a small periodic error."""
    virtual = VirtualTest(varied(seed))
    test = TestFile.model_validate(test_file(virtual))
    history = _history(virtual, seed)
    time, travel, force = virtual.record()
    record = LoadRecord(Path("machine.csv"), time, force, displacement_mm=travel)
    clock = fit_clock(history.time_s, history.axial, history.u_axial, record, test.sync)
    curve = make_curve(history, record, clock, test.specimen.area)
    found = evaluate(
        Sheet(curve, test.specimen, test.load_record.relative_uncertainty, clock, test.properties)
    )
    return _rows(virtual, seed, found.properties, clock, len(history))


def with_pictures(seed: int) -> list[dict[str, Any]]:
    """Render a drawn test, track it, and evaluate it."""
    virtual = VirtualTest(varied(seed))
    with tempfile.TemporaryDirectory() as folder:
        test = load(render(virtual.scenario, Path(folder)))
        results = Path(folder) / "results"
        results.mkdir()
        found = take_measurement(test, results)
    return _rows(virtual, seed, found.properties, found.clock, len(found.history))


def _history(virtual: VirtualTest, seed: int) -> GaugeHistory:
    scenario, time = virtual.scenario, virtual.frame_times
    state, draw = virtual.at(time), np.random.default_rng([seed, 99])
    noise = [scenario.camera.noise * part for part in NOISE]
    n = len(time)
    wave = PERIODIC * np.sin(2 * np.pi * (state.rise_mm / scenario.scale + draw.uniform()))
    # What counts from the reference frames carries their noise too, averaged over ten.
    axial, across = (
        strain + u * draw.standard_normal(n) + u * draw.standard_normal() / np.sqrt(10)
        for strain, u in zip((state.axial, state.transverse), noise, strict=True)
    )
    broken = time >= virtual.fracture_time
    axial, across = (np.where(broken, np.nan, strain + wave) for strain in (axial, across))
    u_axial, u_across = (np.full(n, u) for u in noise)
    return gauge_history(
        time - scenario.camera.offset, axial, across, u_axial,
        name=tuple(f"{k:04d}.tif" for k in range(n)), u_transverse=u_across,
    )  # fmt: skip


def _rows(
    virtual: VirtualTest, seed: int, properties: dict[str, Any], clock: Any, frames: int
) -> list[dict[str, Any]]:
    truth = {name: value for name, (value, _) in virtual.properties().items()}
    rows = []
    for name in NAMES:
        if name not in properties or not np.isfinite(truth[name]):
            continue
        item = properties[name]
        true = truth[name]
        if name in NAMES[:2] and item.window:
            true = by_definition(virtual.material, item.window["strain"])[NAMES.index(name)]
        rows.append(
            {
                "seed": seed,
                "kind": virtual.scenario.specimen.label.split()[0],
                "property": name,
                "value": item.value,
                "truth": true,
                "u": item.standard_uncertainty,
                "contributions": item.contributions,
                "notes": list(item.notes),
                "clock_error_s": clock.offset_s - virtual.scenario.camera.offset,
                "u_clock_s": clock.offset_standard_uncertainty_s,
                "frames": frames,
            }
        )
    return rows


def by_definition(material: Material, window: tuple[float, float]) -> tuple[float, float]:
    """Return what the stated method gives on the exact curve: slopes over stress in a window of strain.

    A curve that bends has no other modulus than that of its window (ISO 527-1).
    """
    if isinstance(material, Elastic):
        return material.youngs_modulus, material.poissons_ratio
    strain = np.linspace(*window, 2001)
    stress = material.stress(strain)
    axial, across = (np.polyfit(stress, each, 1)[0] for each in (strain, material.transverse(strain)))
    return float(1 / axial), float(-across / axial)
