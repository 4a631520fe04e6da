"""What the page says of the named gauges."""

import dataclasses

import numpy as np
import pytest

from dic.gauges.histories import NamedHistory
from dic.gauges.placing import Placed
from dic.report.figures import house_style
from dic.report.gauges import draw_gauges, gauge_rows
from dic.report.page import write_report
from dic.store.results import results_of, write_results


@pytest.fixture(scope="module")
def with_gauges(measurement):
    axial = measurement.history.axial
    n, box = len(axial), np.array([[100.0, 300.0], [200.0, 300.0], [200.0, 400.0], [100.0, 400.0]])
    u, status = np.full(n, 2e-6), tuple("ok" if np.isfinite(one) else "lost" for one in axial)
    places = (50.0, 100.0, 150.0)
    parts = axial[:, None] * np.array([0.9, 1.0, 1.1])
    gauges = (
        NamedHistory(
            Placed("patch", "area", (), (), (box,), 100.0), axial, u, status,
            axial[:, None], u[:, None], 5.68,
        ),
        NamedHistory(
            Placed("along", "line", (), (), (box[:2],), 200.0, places, note="windows of 93 px"),
            parts.mean(axis=1), u, status, parts, 0 * parts + 5e-6, 11.4,
        ),
    )  # fmt: skip
    return dataclasses.replace(measurement, gauges=gauges)


def test_page_shows_where_they_sit_and_what_they_read(with_gauges, fields, tmp_path):
    page = write_report(with_gauges, fields, tmp_path).read_text()
    for words in (
        "Gauges of the test file",
        "mean of an area",
        "windows of 93 px",
        "Strain along the line along",
    ):
        assert words in page, words
    for name in ("named-gauges", "named-gauges-in-time", "line-1"):
        assert f'id="{name}"' in page
        assert (tmp_path / "figures" / f"{name}.png").stat().st_size > 0


def test_without_gauges_nothing_is_drawn(measurement):
    with house_style():
        assert draw_gauges(measurement) == []
    assert "gauges" not in results_of(measurement)


def test_rows_have_the_largest_strain_with_its_uncertainty(with_gauges):
    (name, value, said), _ = gauge_rows(with_gauges)
    largest = np.nanmax(with_gauges.history.axial)
    assert name == "patch"
    assert float(value.split(" ± ")[0]) == pytest.approx(100 * largest, abs=4e-4)
    assert "not wholly measured in 1 of 70 frames" in said


def test_lines_are_written_place_by_place(with_gauges, tmp_path):
    import pandas as pd

    write_results(with_gauges, tmp_path)
    table = pd.read_csv(tmp_path / "lines.csv")
    assert len(table) == 70 * 3
    last = table[(table.frame == 60) & (table.place_px == 150.0)]
    assert last.strain.item() == pytest.approx(1.1 * with_gauges.history.axial[60])
    assert last.place_mm.item() == pytest.approx(150 * with_gauges.scene.scale_mm)
    history = pd.read_csv(tmp_path / "history.csv")
    assert {"patch", "u_patch", "status_patch", "along"} <= set(history)
