"""The result folder: nothing of somebody else's is touched, nothing of an earlier run stays."""

import os

import pytest

from dic.errors import StoreError
from dic.store.folder import claim_folder, remove_results
from dic.store.results import write_results, write_whole


def test_earlier_results_are_taken_out_and_nothing_else(measurement, tmp_path):
    write_results(measurement, tmp_path)
    write_whole(tmp_path, "figures/map-a.png", b"x")
    write_whole(tmp_path, "figures/my own.png", b"x")
    (tmp_path / "notes.txt").write_text("the user's own")
    claim_folder(tmp_path, [])
    assert {path.name for path in tmp_path.rglob("*.*")} == {"notes.txt", "my own.png"}


def test_a_new_folder_is_made(tmp_path):
    claim_folder(tmp_path / "deep" / "out", [])
    assert (tmp_path / "deep" / "out").is_dir()


@pytest.mark.parametrize(
    "name", ["history.csv", "results.json", "report.html", "fields.nc", "figures/map-a.png"]
)
def test_a_file_that_no_run_has_written_is_left_and_named(tmp_path, name):
    path = tmp_path / name
    path.parent.mkdir(exist_ok=True)
    path.write_text("Time (s),Force (N)\n0,1\n")
    with pytest.raises(StoreError, match=f"'{name}' that no earlier run|'{name}', but no earlier results"):
        claim_folder(tmp_path, [])
    remove_results(tmp_path)
    assert path.exists()


@pytest.mark.parametrize("link", [None, os.symlink, os.link])
def test_an_input_with_a_results_name_is_refused(measurement, tmp_path, link):
    """Even where it looks like a result, as an earlier history would, and however it is reached."""
    write_results(measurement, tmp_path)
    given = tmp_path / "history.csv"
    if link is not None:
        given = tmp_path / "record.csv"
        link(tmp_path / "history.csv", given)
    with pytest.raises(StoreError, match=r"'history\.csv' is read by the test"):
        claim_folder(tmp_path, [tmp_path / "absent", given])
    assert (tmp_path / "history.csv").exists()
    assert (tmp_path / "results.json").exists()


def test_frames_in_the_folder_of_figures_are_refused(tmp_path):
    (tmp_path / "figures").mkdir()
    with pytest.raises(StoreError, match="'figures' is read by the test"):
        claim_folder(tmp_path, [tmp_path / "figures"])


def test_a_folder_that_cannot_be_made_is_said(tmp_path):
    (tmp_path / "out").write_text("in the way")
    with pytest.raises(StoreError, match="cannot be made"):
        claim_folder(tmp_path / "out" / "deeper", [])


def test_an_earlier_result_that_stays_is_reported(measurement, tmp_path, monkeypatch):
    write_results(measurement, tmp_path)

    def fail(*_, **__):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("pathlib.Path.unlink", fail)
    with pytest.raises(StoreError, match=r"earlier result cannot be removed \(Permission denied\)"):
        claim_folder(tmp_path, [])


def test_a_file_in_place_of_the_folder_is_left_and_said(tmp_path):
    (tmp_path / "machine.csv").write_text("mine")
    with pytest.raises(StoreError, match="is a file, where the result folder should be"):
        claim_folder(tmp_path / "machine.csv", [])
    assert (tmp_path / "machine.csv").read_text() == "mine"
