"""Files written by independent libraries (tifffile, Pillow, imageio, OpenCV, PyAV), or byte by byte from
the published formats, read to identical values."""

import struct
import sys

import av
import cv2
import imageio.v3 as imageio
import numpy as np
import pytest
import tifffile
from PIL import Image

from dic.errors import FrameError
from dic.frames import open_frames
from dic.frames.video import CONTAINERS
from dic.testfile import VIDEO_ENDINGS, Frames

RNG = np.random.default_rng(3)
ROWS, COLUMNS = 30, 44


def picture(bits=8, channels=1):
    shape = (ROWS, COLUMNS) if channels == 1 else (ROWS, COLUMNS, channels)
    return RNG.integers(0, 2**bits, shape).astype(np.uint8 if bits == 8 else np.uint16)


def weighted(colour):
    """The rule for colour, in double precision."""
    red, green, blue = (colour[..., k].astype(float) for k in range(3))
    return (red + 2 * green + blue) / 4


def opened(folder, **keys):
    return open_frames(Frames(**{"source": "frames", "rate": "5 Hz", **keys}), folder)


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "frames").mkdir()
    return tmp_path


def codes(source):
    return {notice.code for notice in source.notices}


def by_tifffile(**keys):
    return lambda path, image: tifffile.imwrite(path, image, **keys)


def by_opencv(path, image):
    cv2.imwrite(str(path), image[..., ::-1] if image.ndim == 3 else image)


def by_opencv_with_alpha(path, image):
    cv2.imwrite(str(path), image[..., [2, 1, 0, 3]])


def by_pillow(path, image):
    Image.fromarray(image).save(path)


def pgm(path, image):
    top = next(top for top in (255, 4095, 65535) if image.max() <= top)
    values = image.astype(">u2") if top > 255 else image
    path.write_bytes(b"P5\n# one comment\n%d %d\n%d\n" % (COLUMNS, ROWS, top) + values.tobytes())


def plain_pgm(path, image):
    rows = "\n".join(" ".join(map(str, row)) for row in image.tolist())
    path.write_text(f"P2 {COLUMNS} {ROWS} {np.iinfo(image.dtype).max}\n{rows}\n")


WRITERS = {
    "tifffile": (".tif", by_tifffile(), (8, 12, 16), (1, 3)),
    "tifffile big-endian": (".tif", by_tifffile(byteorder=">"), (8, 12, 16), (1, 3)),
    "BigTIFF": (".tif", by_tifffile(bigtiff=True), (8, 16), (1, 3)),
    "LZW": (".tif", by_tifffile(compression="lzw", predictor=True), (8, 16), (1, 3)),
    "deflate": (".tif", by_tifffile(compression="zlib", rowsperstrip=7), (8, 16), (1, 3)),
    "PackBits": (".tif", by_tifffile(compression="packbits"), (8, 16), (1,)),
    "tiles": (".tif", by_tifffile(tile=(16, 16), compression="zlib"), (8, 16), (1, 3)),
    "TIFF by OpenCV": (".tif", by_opencv, (8, 16), (1, 3)),
    "TIFF by Pillow": (".tiff", by_pillow, (8, 16), (1,)),
    "TIFF by imageio": (".tif", imageio.imwrite, (8, 16), (1,)),
    "PNG by OpenCV": (".png", by_opencv, (8, 12, 16), (1, 3)),
    "PNG by Pillow": (".png", by_pillow, (8, 12, 16), (1,)),
    "PNG by imageio": (".png", imageio.imwrite, (8, 16), (1,)),
    "BMP by Pillow": (".bmp", by_pillow, (8,), (1, 3)),
    "BMP by OpenCV": (".bmp", by_opencv, (8,), (1, 3)),
    "PGM by OpenCV": (".pgm", by_opencv, (8, 16), (1,)),
    "PGM by Pillow": (".pgm", by_pillow, (8, 16), (1,)),
    "PGM": (".pgm", pgm, (8, 12, 16), (1,)),
    "PGM, plain": (".pgm", plain_pgm, (8, 16), (1,)),
}


@pytest.mark.parametrize("kind", WRITERS)
def test_values_are_identical_whoever_wrote_them(folder, kind):
    ending, write, depths, channels = WRITERS[kind]
    for bits in depths:
        for count in channels:
            images = [picture(bits, count) for _ in range(3)]
            for k, image in enumerate(images):
                write(folder / "frames" / f"f{k}{ending}", image)
            source = opened(folder)
            for k, image in enumerate(images):
                expected = weighted(image) if count == 3 else image
                assert source[k].shape == source.shape == (ROWS, COLUMNS)
                np.testing.assert_array_equal(source[k], expected)
            assert source[0].dtype == (np.float32 if count == 3 else images[0].dtype)
            assert source.full_scale() == 2**bits - 1
            assert codes(source) <= {"frames_in_colour", "colour_clipped"}


def three(folder, write, ending, images):
    for k, image in enumerate(images):
        write(folder / "frames" / f"f{k}{ending}", image)
    return opened(folder)


def test_colour_planes_of_their_own(folder):
    images = [picture(16, 3) for _ in range(3)]
    write = by_tifffile(photometric="rgb", planarconfig="separate", compression="lzw")
    source = three(folder, lambda path, image: write(path, np.moveaxis(image, -1, 0)), ".tif", images)
    np.testing.assert_array_equal(source[1], weighted(images[1]))


@pytest.mark.parametrize(
    ("ending", "write", "channels"),
    [
        (".tif", by_tifffile(photometric="rgb", extrasamples=["unassalpha"]), 4),
        (".png", by_pillow, 4),
        (".png", lambda path, image: Image.fromarray(image, "LA").save(path), 2),
        (
            ".png",
            by_opencv_with_alpha,
            4,
        ),
    ],
)
@pytest.mark.filterwarnings("ignore:'mode' parameter is deprecated")
def test_transparency_is_ignored_and_said(folder, ending, write, channels):
    images = [picture(8, channels) for _ in range(3)]
    source = three(folder, write, ending, images)
    expected = images[2][..., 0] if channels == 2 else weighted(images[2])
    np.testing.assert_array_equal(source[2], expected)
    assert "alpha_ignored" in codes(source)


def test_white_as_zero_is_turned(folder):
    """TIFF 6.0, PhotometricInterpretation 0: the value 0 is white, 2^BitsPerSample − 1 is black."""
    images = [picture() for _ in range(3)]
    source = three(folder, by_tifffile(photometric="miniswhite"), ".tif", images)
    np.testing.assert_array_equal(source[0], 255 - images[0])


def test_packed_twelve_bits(folder):
    """Two values in three bytes, the first one's high bits first (TIFF 6.0, FillOrder 1)."""
    values = RNG.integers(0, 4096, (ROWS, COLUMNS))
    pairs = values.reshape(-1, 2)
    packed = np.stack(
        [pairs[:, 0] >> 4, (pairs[:, 0] & 15) << 4 | pairs[:, 1] >> 8, pairs[:, 1] & 255], axis=1
    ).astype(np.uint8)
    for k in range(3):
        (folder / "frames" / f"f{k}.tif").write_bytes(baseline("<", packed.tobytes(), 12))
    source = opened(folder)
    np.testing.assert_array_equal(source[1], values)
    assert source.full_scale() == 4095


def baseline(order, data, bits, photometric=1):
    """A grey TIFF with the tags that TIFF 6.0 requires (section 4), written byte by byte, in one strip."""
    short, long, rational = 3, 4, 5
    entries = [
        (256, short, COLUMNS), (257, short, ROWS), (258, short, bits), (259, short, 1),
        (262, short, photometric), (273, long, None), (278, short, ROWS), (279, long, len(data)),
        (282, rational, None), (283, rational, None), (296, short, 2),
    ]  # fmt: skip
    behind = 8 + 2 + 12 * len(entries) + 4
    head = {"<": b"II", ">": b"MM"}[order] + struct.pack(order + "HI", 42, 8)
    out = struct.pack(order + "H", len(entries))
    for tag, kind, value in entries:
        if value is None:
            value = behind if kind == rational else behind + 8
        cell = struct.pack(order + "HH", value, 0) if kind == short else struct.pack(order + "I", value)
        out += struct.pack(order + "HHI", tag, kind, 1) + cell
    return head + out + struct.pack(order + "I", 0) + struct.pack(order + "II", 72, 1) + data


@pytest.mark.parametrize("order", ["<", ">"])
@pytest.mark.parametrize("bits", [8, 16])
def test_baseline_tags_in_both_byte_orders(folder, order, bits):
    image = picture(bits)
    data = image.astype(f"{order}u{bits // 8}").tobytes()
    for k in range(3):
        (folder / "frames" / f"f{k}.tif").write_bytes(baseline(order, data, bits))
    np.testing.assert_array_equal(opened(folder)[2], image)


def test_jpeg_works_and_is_doubted(folder):
    """Smooth pictures at the best quality come within 2 levels; Pillow's own decoding is the same."""
    y, x = np.mgrid[:ROWS, :COLUMNS]
    image = (127 + 100 * np.sin(x / 9) * np.cos(y / 7)).astype(np.uint8)
    source = three(
        folder, lambda path, im: Image.fromarray(im).save(path, quality=100), ".jpg", [image, image, image]
    )
    assert np.abs(source[0].astype(int) - image).max() <= 2
    np.testing.assert_array_equal(source[1], np.asarray(Image.open(folder / "frames" / "f1.jpg")))
    assert codes(source) == {"frames_compressed"}


@pytest.mark.parametrize("pattern", ["RGGB", "BGGR", "GRBG", "GBRG"])
def test_a_mosaics_mean_is_neither_shifted_nor_patterned(folder, pattern):
    """Any plane in each colour comes out as (r + 2 g + b)/4 of the planes, inside the border.

    A shift of the picture, or one that differs between sites, would show as a slope times the shift;
    100 levels of slope per px and exact arithmetic leave no room for either.
    """
    y, x = np.mgrid[:ROWS, :COLUMNS]
    planes = {"R": 40000 - 100 * x + 20 * y, "G": 9000 + 400 * x - 60 * y, "B": 12000 + 8 * x + 100 * y}
    mosaic = np.empty((ROWS, COLUMNS), np.uint16)
    for site, colour in enumerate(pattern):
        mosaic[site // 2 :: 2, site % 2 :: 2] = planes[colour][site // 2 :: 2, site % 2 :: 2]
    for k in range(3):
        tifffile.imwrite(folder / "frames" / f"f{k}.tif", mosaic)
    grey = opened(folder, mosaic=pattern)[0]
    expected = (planes["R"] + 2 * planes["G"] + planes["B"]) / 4
    assert grey.dtype == np.float32
    np.testing.assert_array_equal(grey[1:-1, 1:-1], expected[1:-1, 1:-1])


def test_an_even_mosaic_keeps_its_value_up_to_the_border(folder):
    sites = np.where(np.add.outer(np.arange(ROWS), np.arange(COLUMNS)) % 2, 200, 100).astype(np.uint8)
    source = three(folder, by_tifffile(), ".tif", [sites] * 3)
    assert source[0].dtype == np.uint8
    assert (opened(folder, mosaic="RGGB")[0] == 150).all()


def test_a_mosaic_names_itself(folder):
    """CFA tags of TIFF/EP (ISO 12234-2) and DNG: the size, and the colours as 0 red, 1 green, 2 blue."""
    image = picture(16)
    tags = [(33421, 3, 2, (2, 2), True), (33422, 1, 4, bytes([1, 0, 2, 1]), True)]
    for k in range(3):
        tifffile.imwrite(folder / "frames" / f"f{k}.dng", image, photometric=32803, extratags=tags)
    named = opened(folder)[0]
    for k in range(3):
        (folder / "frames" / f"f{k}.dng").unlink()
        tifffile.imwrite(folder / "frames" / f"f{k}.tif", image)
    np.testing.assert_array_equal(named, opened(folder, mosaic="GRBG")[0])


@pytest.mark.parametrize(
    ("bits", "shift", "full_scale"),
    [
        *((8, 0, 255), (10, 0, 1023), (12, 0, 4095), (14, 0, 16383)),
        *((8, 8, 65280), (10, 6, 65472), (12, 4, 65520), (14, 2, 65532)),
    ],
)
def test_full_scale_is_that_of_the_depth_in_use(folder, bits, shift, full_scale):
    images = [picture(16) >> (16 - bits) << shift for _ in range(3)]
    assert three(folder, by_tifffile(), ".tif", images).full_scale() == full_scale


def test_depth_shows_in_a_later_frame(folder):
    """The first frame may be dark."""
    images = [picture(16) >> 7, picture(16) >> 7, picture(16) >> 4]
    assert three(folder, by_tifffile(), ".tif", images).full_scale() == 4095


def film(path, images, codec, stamps=None, form="gray", **options):
    with av.open(str(path), "w") as container:
        stream = container.add_stream(codec, rate=25, options=options)
        stream.width, stream.height, stream.pix_fmt = COLUMNS, ROWS, form
        for k, image in enumerate(images):
            frame = av.VideoFrame.from_ndarray(image, format="rgb24" if image.ndim == 3 else "gray")
            frame = frame.reformat(format=form)
            if stamps is not None:
                frame.pts = stamps[k]
            container.mux(stream.encode(frame))
        container.mux(stream.encode(None))


@pytest.mark.parametrize(
    ("ending", "codec", "form", "channels"),
    [
        (".mkv", "ffv1", "gray", 1),
        (".avi", "ffv1", "gray", 1),
        (".avi", "rawvideo", "gray", 1),
        (".mov", "png", "rgb24", 3),
        (".mkv", "ffv1", "bgr0", 3),
    ],
)
def test_video_without_loss_reads_to_identical_values(folder, ending, codec, form, channels):
    images = [picture(8, channels) for _ in range(6)]
    film(folder / f"test{ending}", images, codec, form=form)
    source = open_frames(Frames(source=f"test{ending}"), folder)
    np.testing.assert_allclose(source.time_s, np.arange(6) / 25, atol=1e-3)
    for k in (0, 1, 5, 2, 2, 0):  # forward, and back
        expected = weighted(images[k]) if channels == 3 else images[k]
        np.testing.assert_array_equal(source[k], expected)
    assert source.full_scale() == 255
    assert "frames_compressed" not in codes(source)


@pytest.mark.parametrize(("reordered", "gap"), [(2, 0), (0, 5)])
@pytest.mark.parametrize("ending", [".mp4", ".mkv"])
def test_video_in_order_of_its_own_times(folder, ending, reordered, gap):
    """Whether the codec sends later frames first, or the camera paused; luma 235 is white."""
    levels = np.array([40 + 12 * (5 * k % 13) for k in range(13)])
    images = [np.full((ROWS, COLUMNS), level, np.uint8) for level in levels]
    stamps = [k + gap * (k > 6) for k in range(13)]
    film(
        folder / f"test{ending}",
        images,
        "mpeg4",
        stamps,
        form="yuv420p",
        bf=str(reordered),
        qmin="1",
        qmax="1",
    )
    source = open_frames(Frames(source=f"test{ending}", start="2 s"), folder)
    np.testing.assert_allclose(source.time_s, 2 + np.array(stamps) / 25, atol=1e-3)
    seen = [float(source[k].mean()) for k in range(13)]
    # 0 to 255 becomes 16 to 235; lossy at the finest quantiser, so within two levels.
    np.testing.assert_allclose(seen, 16 + levels * 219 / 255, atol=2)
    assert source.full_scale() == 235
    assert "frames_compressed" in codes(source)


def test_video_at_a_rate_of_its_own(folder):
    """A fast camera's film plays slowly: a rate that is given counts."""
    film(folder / "test.avi", [picture() for _ in range(4)], "ffv1")
    source = open_frames(Frames(source="test.avi", rate="1 kHz"), folder)
    np.testing.assert_allclose(source.time_s, [0, 0.001, 0.002, 0.003])


def test_what_brings_its_own_times_is_what_is_read_as_video():
    assert set(VIDEO_ENDINGS) == set(CONTAINERS)


def test_video_without_its_library_is_said(folder, monkeypatch):
    film(folder / "test.avi", [picture() for _ in range(4)], "ffv1")
    monkeypatch.setitem(sys.modules, "av", None)
    with pytest.raises(FrameError, match=r"PyAV, which is not installed; install it with: pip install"):
        open_frames(Frames(source="test.avi"), folder)


def palette(path):
    Image.fromarray(picture(8, 3)).quantize(64).save(path)


def one_bit(path):
    Image.fromarray(picture() > 99).save(path)


@pytest.mark.parametrize(
    ("write_one", "ending", "said"),
    [
        (palette, "png", "neither grey nor RGB"),
        (palette, "tif", r"neither grey nor RGB values \(its colours are palette\)"),
        (palette, "bmp", "neither grey nor RGB"),
        (one_bit, "png", "holds 1-bit values"),
        (one_bit, "tif", "holds 1-bit values"),
        (one_bit, "bmp", "holds 1-bit values"),
        (lambda p: tifffile.imwrite(p, picture().astype(np.float32)), "tif", "32-bit signed or floating"),
        (lambda p: tifffile.imwrite(p, picture().astype(np.int16)), "tif", "16-bit signed or floating"),
        (lambda p: tifffile.imwrite(p, picture(), compression="zstd"), "tif", "compressed in a way"),
        (lambda p: Image.fromarray(picture(8, 3)).convert("CMYK").save(p), "jpg", r"RGB values \(CMYK\)"),
        (lambda p: p.write_text("P5 9 9 100\n"), "pgm", "holds 7-bit values"),
    ],
)
def test_numbers_that_are_no_brightness_are_refused(folder, write_one, ending, said):
    for k in range(3):
        write_one(folder / "frames" / f"f{k}.{ending}")
    with pytest.raises(FrameError, match=said):
        opened(folder)


def test_a_video_of_which_nothing_can_be_decoded_is_said(folder):
    """Cut off within its first frame."""
    film(folder / "test.avi", [picture() for _ in range(4)], "ffv1")
    whole = (folder / "test.avi").read_bytes()
    at = whole.index(b"movi")
    (folder / "test.avi").write_bytes(whole[: at + 200])
    with pytest.raises(FrameError, match="none of its frames can be decoded"):
        open_frames(Frames(source="test.avi"), folder)


def test_frames_at_rest_in_a_video_with_loss_are_measured(folder):
    """Of a picture that does not change such a codec sends nothing, so that it decodes to the same values."""
    image = picture()
    film(folder / "test.mp4", [picture(), image, image, image], "mpeg4", form="yuv420p")
    source = open_frames(Frames(source="test.mp4"), folder)
    watch = source.watch()
    assert source.lossy
    assert not any(watch.frozen(source[k]) for k in range(4))
    assert (source[1] == source[2]).all()
