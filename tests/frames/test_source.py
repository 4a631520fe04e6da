"""Frames written by independent libraries (tifffile, Pillow, OpenCV) read to identical pixels."""

from pathlib import Path

import numpy as np
import pytest
import tifffile

from dic.errors import FrameError
from dic.frames import open_frames
from dic.testfile import Frames

RNG = np.random.default_rng(3)


def grey(bits=8, shape=(30, 44)):
    kind = np.uint8 if bits == 8 else np.uint16
    return RNG.integers(0, 2**bits, shape).astype(kind)


def section(**keys):
    return Frames(**{"source": "frames", "rate": "5 Hz", **keys})


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "frames").mkdir()
    return tmp_path


def test_natural_order_and_foreign_files(folder):
    for name in ("cam_10.tif", "cam_9.tif", "cam_1.tif", ".cam_0.tif", "notes.txt", "Thumbs.db"):
        path = folder / "frames" / name
        tifffile.imwrite(path, grey()) if name.endswith("tif") else path.write_text("x")
    assert open_frames(section(), folder).names == ("cam_1.tif", "cam_9.tif", "cam_10.tif")


def test_a_pattern_selects(folder):
    for name in ("a1.tif", "a2.tif", "a3.tif", "b1.tif"):
        tifffile.imwrite(folder / "frames" / name, grey())
    assert len(open_frames(section(source="frames/a*.tif"), folder)) == 3


def test_pages_of_one_file(folder):
    stack = np.stack([grey() for _ in range(4)])
    tifffile.imwrite(folder / "stack.tif", stack, photometric="minisblack")
    source = open_frames(section(source="stack.tif", start="2 s"), folder)
    assert source.names[1] == "stack.tif#2"
    assert np.array_equal(source[3], stack[3])
    np.testing.assert_allclose(source.time_s, [2, 2.2, 2.4, 2.6])


def write(folder, images):
    for k, image in enumerate(images):
        tifffile.imwrite(folder / "frames" / f"f{k}.tif", image)


def test_times_from_a_file_by_name_whatever_the_order(folder):
    write(folder, [grey() for _ in range(3)])
    (folder / "t.csv").write_text("frame,time (ms)\nf2.tif,700\nf0.tif,100\nf1.tif,450\n")
    source = open_frames(Frames(source="frames", times="t.csv"), folder)
    np.testing.assert_allclose(source.time_s, [0.1, 0.45, 0.7])


def test_names_without_their_endings_are_names_too(folder):
    """Taken for rows in the frames' order, they would give the frames one another's times."""
    write(folder, [grey() for _ in range(3)])
    (folder / "t.csv").write_text("frame,time (s)\nf2,0\nf0,1\nf1,2\n")
    source = open_frames(Frames(source="frames", times="t.csv"), folder)
    assert source.names == ("f2.tif", "f0.tif", "f1.tif")
    np.testing.assert_allclose(source.time_s, [0, 1, 2])


def test_times_from_a_file_by_row(folder):
    write(folder, [grey() for _ in range(3)])
    (folder / "t.csv").write_text("time (s)\n0\n1.5\n2\n")
    np.testing.assert_allclose(
        open_frames(Frames(source="frames", times="t.csv"), folder).time_s, [0, 1.5, 2]
    )


@pytest.mark.parametrize("separator", [";", "\t"])
def test_times_may_have_a_decimal_comma_where_the_separator_is_another(folder, separator):
    write(folder, [grey() for _ in range(3)])
    rows = [("frame", "time (s)"), ("f0.tif", "0,5"), ("f1.tif", "1,25"), ("f2.tif", "2")]
    (folder / "t.csv").write_text("\ufeff" + "\n".join(separator.join(row) for row in rows), "utf-8")
    source = open_frames(Frames(source="frames", times="t.csv"), folder)
    np.testing.assert_allclose(source.time_s, [0.5, 1.25, 2])


def test_numbers_of_frames_are_no_names(folder):
    write(folder, [grey() for _ in range(3)])
    (folder / "t.csv").write_text("frame,time_s\n1,0\n2,1.5\n3,2\n")
    np.testing.assert_allclose(
        open_frames(Frames(source="frames", times="t.csv"), folder).time_s, [0, 1.5, 2]
    )


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ("time (s)\n0\n1\n", "lists 2 times for 3 frames"),
        ("time (s)\n0\n1\n1\n", "does not increase"),
        ("time (s)\n0\nx\n1\n", r"row 3, column 'time \(s\)': 'x' is not a number"),
        ("time\n0\n1\n2\n", "says no unit"),
        ("clock\n0\n1\n2\n", "no column 'time'"),
        ("time (kg)\n0\n1\n2\n", "'kg' is not a unit"),
        ("", "is empty"),
        ("frame,time (s)\nf0.tif,0\nf1.tif,1\nf3.tif,2\n", "has no row for frame f2.tif"),
        ("time (s),frame\n0,f0.tif\n1,f1.tif\n", "has no row for frame f2.tif"),
        ("frame,time (s)\na0.tif,0\na1.tif,1\na2.tif,2\n", "has no row for frame f0.tif and 2 more"),
        ("frame,time (s)\nf0.tif,0\nf1.tif,1\nf2.tif,2\nf1.tif,3\n", "row 5: names f1.tif twice"),
        ("frame,time (s)\nf0.tif,0,5\nf1.tif,1,5\nf2.tif,2,5\n", "more than the 2 cells"),
    ],
)
def test_times_files_that_cannot_be_used(folder, content, said):
    write(folder, [grey() for _ in range(3)])
    (folder / "t.csv").write_text(content)
    with pytest.raises(FrameError, match=said):
        open_frames(Frames(source="frames", times="t.csv"), folder)


def test_no_frames(folder):
    with pytest.raises(FrameError, match="no frames found"):
        open_frames(section(), folder)
    with pytest.raises(FrameError, match="no frames found"):
        open_frames(section(source="elsewhere"), folder)


def test_a_folder_that_may_not_be_read(folder, monkeypatch):
    """Root may read everything, so the system's refusal is played here."""

    def refused(path):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "iterdir", refused)
    with pytest.raises(FrameError, match=r"frames: cannot be read .Permission denied.; check frames.source"):
        open_frames(section(), folder)


def test_fewer_than_three(folder):
    write(folder, [grey(), grey()])
    with pytest.raises(FrameError, match="holds 2 frames, and a test needs at least 3"):
        open_frames(section(), folder)
