"""A test file makes the program read only what it names, and write only below its result folder."""

import os

import numpy as np
import pytest
import tifffile

from dic.errors import InputError, StoreError
from dic.frames import open_frames
from dic.pipeline import measure
from dic.store.fields import FieldsWriter
from dic.store.folder import claim_folder
from dic.store.results import write_whole
from dic.sync import read_load_record
from dic.testfile import load

TEST = """
[specimen]
label = "../../../escaped"
width = 10
thickness = 1
[frames]
source = {frames}
times = {times}
[load_record]
source = {record}
time = "Time"
force = "Force"
"""


def opened(folder, *, frames="frames", times="t.csv", record="machine.csv"):
    """Write a test around six frames, and read all that it names."""
    (folder / "frames").mkdir(exist_ok=True)
    for k in range(6):
        tifffile.imwrite(folder / "frames" / f"cam_{k}.tif", np.full((20, 30), 40 + k, np.uint8))
    (folder / "t.csv").write_text("time (s)\n" + "\n".join(map(str, range(6))))
    (folder / "machine.csv").write_text("Time (s),Force (N)\n" + "\n".join(f"{k},{k}" for k in range(20)))
    text = TEST.format(frames=f'"{frames}"', times=f'"{times}"', record=f'"{record}"')
    (folder / "test.toml").write_text(text)
    test = load(folder / "test.toml")
    return open_frames(test.frames, folder), read_load_record(
        test.load_record, test.beside(test.load_record.source)
    )


def test_what_is_named_may_lie_anywhere(tmp_path):
    (tmp_path / "deep").mkdir()
    opened(tmp_path)
    source, record = opened(
        tmp_path / "deep", frames="../frames", times=tmp_path / "t.csv", record="../machine.csv"
    )
    assert {page.path.resolve().parent for page in source.pages} == {tmp_path / "frames"}
    assert record.path.resolve() == tmp_path / "machine.csv"


@pytest.mark.parametrize("key", ["frames", "times", "record"])
@pytest.mark.parametrize("kind", ["/dev/zero", "/dev/stdin", "pipe", "pipe.tif", "link.tif"])
def test_what_has_no_end_is_refused(tmp_path, key, kind):
    """A pipe nobody writes to would be waited for for ever, a device read for ever."""
    for name in ("pipe", "pipe.tif"):
        os.mkfifo(tmp_path / name)
    (tmp_path / "link.tif").symlink_to("/dev/zero")
    with pytest.raises(InputError):
        opened(tmp_path, **{key: kind})


def test_a_pipe_among_the_frames_is_left_alone(tmp_path):
    (tmp_path / "frames").mkdir()
    os.mkfifo(tmp_path / "frames" / "cam_9.tif")
    assert len(opened(tmp_path)[0]) == 6


@pytest.fixture(scope="module")
def outside(tmp_path_factory):
    folder = tmp_path_factory.mktemp("outside")
    (folder / "kept.txt").write_text("kept")
    return folder


def test_a_run_writes_only_into_its_folder(copy, tmp_path):
    path = copy
    path.write_text(path.read_text().replace('label = "small"', 'label = "../../../escaped"'))
    before = {found: found.stat().st_mtime_ns for found in tmp_path.rglob("*") if found.is_file()}
    measure(path, tmp_path / "out")
    after = {
        found: found.stat().st_mtime_ns
        for found in tmp_path.rglob("*")
        if found.is_file() and tmp_path / "out" not in found.parents
    }
    assert after == before


@pytest.mark.parametrize("name", ["report.html", "results.json", "history.csv", "fields.nc"])
def test_a_link_with_a_results_name_is_not_written_through(tmp_path, outside, name):
    (tmp_path / name).symlink_to(outside / "kept.txt")
    with pytest.raises(StoreError, match="that no earlier run has written"):
        claim_folder(tmp_path, [])
    (tmp_path / name).unlink()
    (tmp_path / name).symlink_to(outside / "new.txt")
    with pytest.raises(StoreError, match="that no earlier run has written"):
        claim_folder(tmp_path, [])
    assert [path.name for path in outside.iterdir()] == ["kept.txt"]


def test_a_link_in_place_of_the_figures_is_refused(tmp_path, outside):
    (tmp_path / "figures").symlink_to(outside)
    with pytest.raises(StoreError, match="figures"):
        claim_folder(tmp_path, [])


def test_the_fields_are_not_written_through_a_link(tmp_path, outside, prepared):
    from dic.correlation import lay_grid

    (tmp_path / "fields.nc.part").symlink_to(outside / "kept.txt")
    grid = lay_grid(np.ones((60, 60), bool), 31, 10)
    with FieldsWriter(tmp_path, grid, np.arange(3.0), {"tracking_key": "x"}):
        pass
    assert (outside / "kept.txt").read_text() == "kept"
    assert not (tmp_path / "fields.nc").is_symlink()


def test_a_pipe_with_a_results_name_is_not_waited_for(tmp_path):
    for name in ("report.html", "fields.nc"):
        os.mkfifo(tmp_path / name)
        with pytest.raises(StoreError, match="that no earlier run has written"):
            claim_folder(tmp_path, [])
        (tmp_path / name).unlink()


def test_a_whole_file_replaces_a_link_instead_of_following_it(tmp_path, outside):
    (tmp_path / "report.html").symlink_to(outside / "kept.txt")
    write_whole(tmp_path, "report.html", b"new")
    assert (outside / "kept.txt").read_text() == "kept"
    assert (tmp_path / "report.html").read_bytes() == b"new"
