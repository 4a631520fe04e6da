"""A measurement made up from closed forms, for everything that shows or stores results."""

import dataclasses
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from scipy.optimize import brentq

from dic.errors import Notice
from dic.measurement import Measurement, Scene
from dic.properties.result import Curve, ModulusLine, Property
from dic.strain.alignment import Alignment, Estimate
from dic.strain.causes import Causes
from dic.strain.rates import Stations
from dic.sync.record import Clock, LoadRecord
from dic.testfile import TestFile
from synthetic_images.readings import gauge_history

# An invented aluminium-like sheet: Ramberg-Osgood, strain = s/E + 0.002 (s/s02)^n.
E, S02, EXPONENT, NU, AREA = 70_000.0, 250.0, 14.0, 0.33, 25.0
STEP, SUBSET, MAP_GAUGE = 16, 31, 95.0
LOST, BROKEN = 24, 67  # a frame that was not measured; the first frame after fracture


def stress_at(strain):
    return brentq(lambda s: s / E + 0.002 * (s / S02) ** EXPONENT - strain, 0.0, 600.0)


def transverse_at(strain, stress):
    elastic = stress / E
    return -NU * elastic - 0.5 * (strain - elastic)


def make_histories():
    rng = np.random.default_rng(7)
    n = 70
    camera = np.arange(n) / 5.0
    strain = np.clip((camera - 2.0) * 1e-3, 0.0, 0.0045) + np.clip((camera - 6.5) * 3e-3, 0.0, None)
    stress = np.array([stress_at(value) for value in strain])
    strain[BROKEN:] -= stress[BROKEN:] / E  # the halves spring back
    stress[BROKEN:] = 0.0
    transverse = transverse_at(strain, stress) + rng.normal(0, 4e-6, n)
    axial = strain + rng.normal(0, 4e-6, n)
    axial[LOST] = transverse[LOST] = np.nan
    u = np.where(np.isfinite(axial), 4e-6, np.nan)
    history = gauge_history(
        camera,
        axial,
        transverse,
        u,
        name=tuple(f"cam_{k:05d}.tif" for k in range(n)),
        shear=rng.normal(0, 6e-6, n),
        extensometer=axial + 1e-6,
        u_shear=1.5 * u,
        u_extensometer=1.2 * u,
        shift_px=np.stack([-4000 * strain, 0.1 * camera], axis=1),
        valid_fraction=np.where(np.isfinite(axial), 0.998, 0.2),
        status=tuple("too few subsets measured" if k == LOST else "ok" for k in range(n)),
        bending=0.04 * axial,
    )
    clock = Clock(3.37, 0.0041, 0.0, "found from when loading starts", ("The drift was taken as zero.",))
    times = clock.machine_time(camera)
    machine = np.arange(0, 18.5, 0.02)
    record = LoadRecord(Path("machine.csv"), machine, AREA * np.interp(machine, times, stress))
    curve = Curve(
        time_s=times,
        force_N=AREA * stress,
        stress_MPa=stress,
        axial=axial,
        transverse=transverse,
        u_axial=u,
        u_transverse=u,
        area_mm2=AREA,
        peak_force_N=AREA * stress.max(),
        u_peak_force_N=1.3,
        peak_time_s=float(times[BROKEN - 1]),
    )
    return history, record, clock, curve


def make_properties(curve):
    window = {"strain": (0.0004, 0.0016), "stress_MPa": (28.0, 112.0), "time_s": (5.77, 6.97)}
    line, peak = "line of strain on stress (ISO 6892-1)", (curve.peak_time_s, curve.peak_time_s)
    shared = {"force calibration": 0.25, "section": 0.25}
    missing, strength = ("the strain never reached this offset",), curve.peak_force_N / AREA
    spread = {"scatter": 35.0, "section": 98.0}
    rows = [
        ("youngs_modulus", "E", E, "MPa", 104.0, line, window, ("r² = 0.99998",), spread),
        ("poissons_ratio", "ν", NU, "", 0.0009, "slopes (ASTM E132)", window, (), {"scatter": 0.0009}),
        ("shear_modulus", "G", E / (2 * (1 + NU)), "MPa", 43.0, "E / 2(1 + ν)", {}, (), {"scatter": 43.0}),
        ("proof_stress_0_2", "Rp0.2", S02, "MPa", 0.36, line, {"strain": (0.004, 0.007)}, (), shared),
        ("proof_stress_5", "Rp5", np.nan, "MPa", np.nan, "not determined", {}, missing, {}),
        ("tensile_strength", "Rm", strength, "MPa", 0.41, "largest force", {"time_s": peak}, (), shared),
    ]
    return {row[0]: Property(*row) for row in rows}


def make_scene():
    rng = np.random.default_rng(3)
    y, x = np.mgrid[0:1100, 0:320]
    waves = [np.cos(kx * x + ky * y + p) for kx, ky, p in rng.uniform(-1.0, 1.0, (20, 3))]
    photograph = np.clip(128 + 28 * np.sum(waves, axis=0), 10, 245)
    photograph[:, :50] = photograph[:, 270:] = 205.0
    region = np.array([[70.0, 150.0], [250.0, 150.0], [250.0, 950.0], [70.0, 950.0]])
    return Scene(
        photograph=photograph.astype(np.uint8),
        axis_angle_deg=0.4,
        axis_method="from the coupon's edges",
        scale_mm=0.0568,
        region=region,
        subset_px=SUBSET,
        step_px=STEP,
        map_gauge_px=MAP_GAUGE,
        noise_grey=2.55,
    )


def make_alignment():
    """An S of 4 % at the gauge's ends, moving at 1° to the axis."""
    places, across = np.linspace(-300.0, 300.0, 5), np.linspace(-80.0, 80.0, 7)
    bending, u = 0.04 * places / 300, np.full(5, 0.004)
    sides = np.outer(np.linspace(0.04, -0.04, 50), np.linspace(-1, 1, 11))
    return Alignment(
        frames=7,
        bending=Estimate(0.002, 0.003),
        bending_change=Estimate(0.04, 0.003),
        largest=Estimate(0.042, 0.004),
        bending_low=Estimate(0.002, 0.004),
        bending_high=Estimate(0.003, 0.004),
        motion_deg=Estimate(1.0, 0.1),
        causes=Causes(("tilt",), (), False, 0.8),
        limit=0.05,
        limit_source="ASTM E606",
        stations=Stations(
            places, np.ones(5), u, bending, u, across,
            1 + np.outer(bending, across / 90), np.full((5, 7), 0.01),
        ),
        sides=sides,
        ends=sides[:, ::-1],
        columns=np.arange(80.0, 241.0, STEP),
        rows=np.arange(160.0, 941.0, STEP),
    )  # fmt: skip


def make_test(label):
    return TestFile.model_validate(
        {
            "specimen": {"label": label, "material": "invented alloy", "width": 12.5, "thickness": 2.0},
            "frames": {"source": "frames", "rate": "5 Hz"},
            "load_record": {"source": "machine.csv", "time": "Time", "force": "Force"},
            "properties": {"proof": [0.002, 0.05]},
        }
    )


@pytest.fixture(scope="session")
def measurement():
    history, record, clock, curve = make_histories()
    test = make_test("Blatt 7/3 <b>")
    return Measurement(
        test=test,
        scene=make_scene(),
        history=history,
        record=record,
        clock=clock,
        curve=curve,
        line=ModulusLine(slope=E, intercept=0.0, low=0.0004, high=0.0016),
        properties=make_properties(curve),
        alignment=make_alignment(),
        quality={"speckle_px": 4.6, "saturated_fraction": 0.0, "subsets": 541.0, "valid_fraction": 0.998},
        notices=(
            Notice("frames_lost", "1 of 70 frames was not measured; look at it in history.csv."),
            Notice("no_section_uncertainty", "No uncertainty of width and thickness is given; add them."),
        ),
        provenance={
            "made": "2031-02-03T04:05:06+00:00",
            "versions": {"tauten": "0.1.0", "numpy": np.__version__},
            "sha256": {"load_record": "0" * 64, "frames": "f" * 64},
            "test_file": test.model_dump(mode="json"),
        },
    )


@pytest.fixture(scope="session")
def pressed(measurement):
    """Return the same test with every sign of loading turned."""
    curve, line, history = measurement.curve, measurement.line, measurement.history
    turned = ("axial", "transverse", "force_N", "stress_MPa", "peak_force_N")
    return dataclasses.replace(
        measurement,
        curve=dataclasses.replace(curve, **{name: -getattr(curve, name) for name in turned}),
        history=dataclasses.replace(
            history, axial=-history.axial, transverse=-history.transverse, shear=-history.shear
        ),
        record=dataclasses.replace(measurement.record, force_N=-measurement.record.force_N),
        line=dataclasses.replace(line, low=-line.high, high=-line.low),
        properties={
            name: dataclasses.replace(item, value=-item.value) if item.symbol.startswith("R") else item
            for name, item in measurement.properties.items()
        },
    )


@pytest.fixture(scope="session")
def lost(measurement):
    """Return the same test without an elastic part."""
    gone = {
        name: dataclasses.replace(
            item, value=np.nan, standard_uncertainty=np.nan, method="not determined", window={},
            notes=("no elastic part was found",), contributions={},
        )
        for name, item in measurement.properties.items()
        if name in ("youngs_modulus", "poissons_ratio", "shear_modulus")
    }  # fmt: skip
    return dataclasses.replace(
        measurement,
        properties=measurement.properties | gone,
        line=ModulusLine(np.nan, np.nan, np.nan, np.nan),
    )


@pytest.fixture(scope="session")
def fields():
    """Homogeneous strain plus slight bending, strains in coupon axes, one map for each frame."""
    history, *_ = make_histories()
    y, x = np.arange(160.0, 941.0, STEP), np.arange(80.0, 241.0, STEP)
    rng = np.random.default_rng(5)
    shape = (len(history), y.size, x.size)
    bending = 1.0 + 0.04 * (x - 160.0) / 80.0
    axial = history.axial[:, None, None] * bending + rng.normal(0, 6e-5, shape)
    transverse = history.transverse[:, None, None] * bending + rng.normal(0, 6e-5, shape)
    axial[:, :2, :3] = np.nan
    on_grid = ("frame", "y", "x")
    return xr.Dataset(
        {
            "strain_axial": (on_grid, axial),
            "strain_transverse": (on_grid, transverse),
            "strain_shear": (on_grid, rng.normal(0, 6e-5, shape)),
            "u_strain_axial": (on_grid, np.full(shape, 6e-5)),
            "map_flag": (on_grid, np.zeros(shape, np.uint8)),
        },
        coords={"frame": history.frame, "time": ("frame", history.time_s), "y": y, "x": x},
        attrs={"map_gauge_px": MAP_GAUGE, "subset_px": SUBSET, "step_px": STEP},
    )
