"""Results on disk: what other programs read, whole or not at all."""

import csv
import dataclasses
import json
import os
from io import StringIO
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from dic.errors import StoreError
from dic.properties.result import Property
from dic.store.results import encoded, results_of, write_results, write_whole


def test_json_says_what_was_measured(measurement, tmp_path):
    write_results(measurement, tmp_path / "out")
    read = json.loads((tmp_path / "out" / "results.json").read_text(encoding="utf-8"))
    assert read == results_of(measurement)
    assert {"properties", "sync", "alignment", "quality", "warnings", "provenance"} <= set(read)
    for name, item in measurement.properties.items():
        shown = read["properties"][name]
        assert {"value", "unit", "standard_uncertainty", "method", "window", "notes"} <= set(shown)
        assert shown["unit"] == item.unit
        assert shown["notes"] == [*item.notes, *(f"not included: {one}" for one in item.missing)]
        if np.isfinite(item.value):
            assert shown["value"] == item.value
            assert shown["standard_uncertainty"] == item.standard_uncertainty
            assert shown["expanded_uncertainty"] == shown["coverage_factor"] * item.standard_uncertainty
    assert read["properties"]["youngs_modulus"]["window"]["strain"] == [0.0004, 0.0016]
    assert read["sync"]["offset_s"] == measurement.clock.offset_s
    assert read["sync"]["offset_standard_uncertainty_s"] == measurement.clock.offset_standard_uncertainty_s
    assert read["alignment"]["axis_angle_deg"] == measurement.scene.axis_angle_deg
    assert read["warnings"] == [dataclasses.asdict(notice) for notice in measurement.notices]
    assert read["provenance"]["sha256"] == measurement.provenance["sha256"]


def test_what_is_missing_is_null_with_its_reason(measurement, tmp_path):
    write_results(measurement, tmp_path)
    text = (tmp_path / "results.json").read_text(encoding="utf-8")

    def refuse(constant):
        raise AssertionError(f"{constant} is not JSON")

    read = json.loads(text, parse_constant=refuse)
    shown = read["properties"]["proof_stress_5"]
    assert shown["value"] is None
    assert shown["standard_uncertainty"] is None
    assert shown["notes"] == ["the strain never reached this offset"]
    assert read["alignment"]["shear_percent"] is None


def test_a_missing_value_never_stands_without_a_reason(measurement):
    silent = {"tensile_strength": Property("tensile_strength", "Rm", np.nan, "MPa", np.nan, "")}
    read = results_of(dataclasses.replace(measurement, properties=silent))
    assert read["properties"]["tensile_strength"]["notes"] != []


def test_numpy_and_paths_become_plain(measurement):
    odd = {"path": Path("a") / "b", "n": np.int64(3), "x": np.array([1.5, np.nan]), "yes": np.True_}
    read = results_of(dataclasses.replace(measurement, provenance=odd))
    assert read["provenance"] == {"path": str(Path("a") / "b"), "n": 3, "x": [1.5, None], "yes": True}


def test_csv_brings_back_the_very_numbers(measurement, tmp_path):
    write_results(measurement, tmp_path)
    table = measurement.to_pandas()
    with (tmp_path / "history.csv").open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert list(rows[0]) == list(table.columns)
    for column in table.columns:
        read = [row[column] for row in rows]
        if column in {"status", "name"}:
            assert read == table[column].tolist()
        else:
            np.testing.assert_array_equal([float(text) for text in read], table[column])


def test_csv_writes_nan_out(measurement, tmp_path):
    write_results(measurement, tmp_path)
    raw = pd.read_csv(StringIO((tmp_path / "history.csv").read_text()), dtype=str, keep_default_na=False)
    assert (raw["strain_axial"] == "NaN").sum() == 1
    assert not (raw == "").to_numpy().any()


def test_a_file_name_that_is_not_text_does_not_stop_the_job(measurement, tmp_path):
    history = measurement.history
    broken = os.fsdecode(b"cam_\xff.tif")
    named = dataclasses.replace(history, name=(broken, *history.name[1:]))
    write_results(dataclasses.replace(measurement, history=named), tmp_path)
    assert len(pd.read_csv(tmp_path / "history.csv")) == len(history)
    assert encoded("µ") == "µ".encode()


def test_nothing_but_the_results_is_left(measurement, tmp_path):
    write_results(measurement, tmp_path)
    write_results(measurement, tmp_path)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["history.csv", "results.json"]


def test_an_interrupted_write_leaves_the_old_file(tmp_path, monkeypatch):
    write_whole(tmp_path, "report.html", b"old")

    def fail(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "replace", fail)
    with pytest.raises(StoreError, match="No space left"):
        write_whole(tmp_path, "report.html", b"new")
    assert [path.name for path in tmp_path.iterdir()] == ["report.html"]
    assert (tmp_path / "report.html").read_bytes() == b"old"


def test_a_folder_that_is_a_file_is_refused(measurement, tmp_path):
    (tmp_path / "out").write_text("in the way")
    with pytest.raises(StoreError, match="cannot be written"):
        write_results(measurement, tmp_path / "out")


def test_nothing_is_written_outside_the_folder(tmp_path):
    outside, folder = tmp_path / "outside", tmp_path / "out"
    outside.mkdir()
    folder.mkdir()
    (folder / "figures").symlink_to(outside)
    for name in ("figures/a.png", "../a.png"):
        with pytest.raises(StoreError, match="outside the result folder"):
            write_whole(folder, name, b"x")
    assert list(outside.iterdir()) == []


def test_a_link_in_the_folder_is_replaced_and_not_followed(tmp_path):
    elsewhere, folder = tmp_path / "precious.txt", tmp_path / "out"
    elsewhere.write_text("precious")
    folder.mkdir()
    (folder / "results.json").symlink_to(elsewhere)
    write_whole(folder, "results.json", b"{}")
    assert elsewhere.read_text() == "precious"
    assert (folder / "results.json").read_bytes() == b"{}"


def test_a_name_that_a_spreadsheet_would_compute_is_text(measurement, tmp_path):
    history = measurement.history
    names = ("=1+1.tif", "@x.tif", "+1.tif", "-1.tif", *history.name[4:])
    write_results(
        dataclasses.replace(measurement, history=dataclasses.replace(history, name=names)), tmp_path
    )
    read = pd.read_csv(tmp_path / "history.csv")["name"]
    assert read[:4].tolist() == ["'=1+1.tif", "'@x.tif", "'+1.tif", "'-1.tif"]
    assert read[4:].tolist() == list(history.name[4:])
