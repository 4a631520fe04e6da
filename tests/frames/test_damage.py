"""Frames that cannot be read, do not belong, or claim to be what they are not."""

import struct
import zlib

import numpy as np
import pytest
import tifffile
from PIL import Image

from dic.errors import FrameError
from dic.frames import open_frames
from dic.testfile import Frames

RNG = np.random.default_rng(5)


def grey(shape=(30, 44)):
    return RNG.integers(0, 256, shape).astype(np.uint8)


def opened(folder, **keys):
    return open_frames(Frames(**{"source": "frames", "rate": "5 Hz", **keys}), folder)


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "frames").mkdir()
    return tmp_path


def write(folder, images, ending="tif", **keys):
    for k, image in enumerate(images):
        path = folder / "frames" / f"f{k}.{ending}"
        tifffile.imwrite(path, image, **keys) if ending == "tif" else Image.fromarray(image).save(path)


def cut(path, bytes_left=0.6):
    content = path.read_bytes()
    path.write_bytes(content[: int(len(content) * bytes_left)])


@pytest.mark.parametrize("ending", ["tif", "png", "bmp", "jpg", "pgm"])
def test_a_cut_frame_is_one_missing_frame(folder, ending):
    write(folder, [grey() for _ in range(5)], ending)
    path = folder / "frames" / f"f2.{ending}"
    cut(path)
    source = opened(folder)
    assert len(source) == 5
    with pytest.raises(FrameError, match=rf"f2\.{ending}: cannot be read as a picture") as caught:
        source[2]
    assert str(caught.value).count("\n") == 0
    assert source[3].shape == (30, 44)


@pytest.mark.parametrize("compression", ["lzw", "zlib", "packbits"])
@pytest.mark.parametrize("tile", [None, (16, 16)])
def test_a_strip_that_is_cut_or_empty_is_not_filled_up(folder, compression, tile):
    write(
        folder,
        [grey() for _ in range(4)],
        compression=compression,
        tile=tile,
        rowsperstrip=None if tile else 8,
    )
    cut(folder / "frames" / "f1.tif", 0.8)
    path = folder / "frames" / "f2.tif"
    with tifffile.TiffFile(path, mode="r+b") as tiff:
        tag = tiff.pages[0].tags["TileByteCounts" if tile else "StripByteCounts"]
        tag.overwrite((0, *tag.value[1:]))
    source = opened(folder)
    assert "ends after" in source.damage[1]
    assert "a strip or tile is empty" in source.damage[2]


def test_junk_in_the_middle_is_listed_and_junk_in_front_refused(folder):
    write(folder, [grey() for _ in range(4)])
    (folder / "frames" / "f1.tif").write_bytes(b"II*\0garbage")
    assert "cannot be read as a picture" in opened(folder).damage[1]
    (folder / "frames" / "f0.tif").write_bytes(b"")
    with pytest.raises(FrameError, match=r"f0\.tif: cannot be read as a picture"):
        opened(folder)


def test_a_stack_that_breaks_off_keeps_what_is_before(folder):
    stack = np.stack([grey() for _ in range(6)])
    path = folder / "stack.tif"
    for image in stack:
        tifffile.imwrite(path, image, append=True, contiguous=False)
    with tifffile.TiffFile(path) as tiff:
        at = tiff.pages[4].offset
    path.write_bytes(path.read_bytes()[: at + 3])
    source = opened(folder, source="stack.tif")
    assert len(source) == 5
    np.testing.assert_array_equal(source[3], stack[3])
    assert "damaged from here on" in source.damage[4]


def test_a_frame_of_another_size_is_missing(folder):
    write(folder, [grey(), grey((30, 45)), grey(), grey().astype(np.uint16)])
    damage = opened(folder).damage
    assert damage == {
        1: "is 45 × 30 px, 8-bit grey where f0.tif is 44 × 30 px, 8-bit grey",
        3: "is 44 × 30 px, 16-bit grey where f0.tif is 44 × 30 px, 8-bit grey",
    }


def test_when_most_frames_are_damaged_the_test_is_refused(folder):
    write(folder, [grey()] + [grey((20, 20)) for _ in range(3)])
    with pytest.raises(FrameError, match=r"3 of 4 frames cannot be used; .*frame 1, is 20 × 20"):
        opened(folder)


def notices(source):
    return {notice.code: notice.text for notice in source.notices}


def test_what_else_lies_in_the_folder(folder):
    """Hidden files belong to operating systems; others were put there by someone."""
    write(folder, [grey() for _ in range(3)])
    for name in ("notes.txt", "run.log", ".DS_Store", "Thumbs.db", ".hidden.tif", "times.csv"):
        (folder / "frames" / name).write_text("time (s)\n0\n1\n2\n")
    (folder / "frames" / "more").mkdir()
    (folder / "frames" / "old.tif").mkdir()
    source = opened(folder, rate=None, times="frames/times.csv")
    assert source.names == ("f0.tif", "f1.tif", "f2.tif")
    assert "ignored: notes.txt, run.log." in notices(source)["files_ignored"]
    assert len(source.notices) == 1


def test_of_two_formats_the_one_without_loss_is_taken(folder):
    write(folder, [grey() for _ in range(3)])
    write(folder, [grey() for _ in range(3)], "jpg")
    source = opened(folder)
    assert source.names == ("f0.tif", "f1.tif", "f2.tif")
    assert "left out were: f0.jpg, f1.jpg, f2.jpg." in notices(source)["frames_twice"]


def test_several_formats_are_one_series(folder):
    write(folder, [grey() for _ in range(3)], "png")
    tifffile.imwrite(folder / "frames" / "f10.tif", grey())
    source = opened(folder)
    assert source.names == ("f0.png", "f1.png", "f2.png", "f10.tif")
    assert "frames_mixed" in notices(source)


def chunk(kind, data):
    return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))


def huge_png(path):
    header = struct.pack(">IIBBBBB", 100_000, 100_000, 8, 0, 0, 0, 0)
    path.write_bytes(
        b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", header) + chunk(b"IDAT", b"") + chunk(b"IEND", b"")
    )


def huge_bmp(path):
    Image.fromarray(grey((30, 44))).save(path)
    content = bytearray(path.read_bytes())
    content[18:26] = struct.pack("<ii", 100_000, 100_000)
    path.write_bytes(content)


def huge_jpeg(path):
    """SOF0 holds the size; 65535 is the most that it can say (ITU-T T.81, B.2.2)."""
    Image.fromarray(grey()).save(path)
    content = bytearray(path.read_bytes())
    at = content.index(b"\xff\xc0")
    content[at + 5 : at + 9] = struct.pack(">HH", 65535, 65535)
    path.write_bytes(content)


def huge_tiff(path):
    tifffile.imwrite(path, grey())
    with tifffile.TiffFile(path, mode="r+b") as tiff:
        for tag in ("ImageWidth", "ImageLength"):
            tiff.pages[0].tags[tag].overwrite(100_000)


def huge_tile(path):
    tifffile.imwrite(path, grey(), tile=(16, 16))
    with tifffile.TiffFile(path, mode="r+b") as tiff:
        for tag in ("TileWidth", "TileLength"):
            tiff.pages[0].tags[tag].overwrite(60_000)
        for tag in ("TileOffsets", "TileByteCounts"):
            tiff.pages[0].tags[tag].overwrite(tiff.pages[0].tags[tag].value[:1])


def huge_colour(path):
    """Each side is modest, and the whole 300 MB."""
    header = struct.pack(">IIBBBBB", 10_000, 5_000, 16, 2, 0, 0, 0)
    path.write_bytes(b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", header) + chunk(b"IEND", b""))


@pytest.mark.parametrize(
    ("make", "ending", "said"),
    [
        (huge_png, "png", "claims 100000 × 100000 px"),
        (huge_bmp, "bmp", "claims 100000 × 100000 px"),
        (huge_jpeg, "jpg", "claims 65535 × 65535 px"),
        (huge_tiff, "tif", "claims 100000 × 100000 px"),
        (huge_tile, "tif", "claims strips or tiles"),
        (huge_colour, "png", "claims 10000 × 5000 px, and .* 200 MB"),
        (lambda path: path.write_text("P5 100000 100000 255\n"), "pgm", "claims 100000 × 100000 px"),
        (lambda path: path.write_text("P5 999999999999 1 255\n"), "pgm", "does not begin like a PGM"),
        (lambda path: path.write_text("P5 0 4 255\n"), "pgm", "holds an empty picture"),
    ],
)
def test_an_absurd_size_is_refused_before_it_is_allocated(folder, make, ending, said):
    """A header may claim anything; 10^10 px would be 10 GB."""
    for k in range(3):
        make(folder / "frames" / f"f{k}.{ending}")
    with pytest.raises(FrameError, match=said):
        opened(folder)
