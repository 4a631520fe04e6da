"""Frame times against stamps that Pillow and tifffile wrote, and against Python's own strptime."""

import os
from datetime import datetime, timedelta

import numpy as np
import pytest
import tifffile
from PIL import Image
from PIL.TiffImagePlugin import ImageFileDirectory_v2

from dic.errors import FrameError, InputError, TestFileError
from dic.frames import look_at_frames, open_frames
from dic.frames.even import even_rate
from dic.frames.names import name_pattern, suggested_pattern
from dic.testfile import Frames, read_toml

RNG = np.random.default_rng(11)
BEGIN = datetime(2026, 5, 4, 23, 59, 58, 250_000)


def grey():
    return RNG.integers(0, 255, (12, 16)).astype(np.uint8)


def exif(moment, digits="%f", exposure=0.004):
    """Exif as a camera has it: tags and their numbers from Exif 2.32 (CIPA DC-008), 4.6."""
    tags = {36867: moment.strftime("%Y:%m:%d %H:%M:%S"), 33434: exposure}
    if digits:
        tags[37521] = moment.strftime(digits)
    return tags


def write_tiff(path, moment, **how):
    directory = ImageFileDirectory_v2()
    directory[306] = "2001:01:01 00:00:00"  # when it was last saved, which is not what counts
    directory[34665] = exif(moment, **how)
    Image.fromarray(grey()).save(path, tiffinfo=directory)


def write_branch(path, moment, **how):
    """As DNG has it: a small view in front, with the tags, and the picture in a branch."""
    seconds = moment.strftime("%Y:%m:%d %H:%M:%S") + f".{moment.microsecond:06d}"
    tags = [(36867, 2, 0, seconds, True), (33434, 5, 1, (1, 250), True)]
    with tifffile.TiffWriter(path) as file:
        file.write(grey()[::4, ::4], subifds=1, subfiletype=1, extratags=tags, metadata=None)
        file.write(grey(), metadata=None)


def write_still(path, moment, **how):
    data = Image.Exif()
    data[306] = "2001:01:01 00:00:00"
    data.get_ifd(34665).update(exif(moment, **how))
    Image.fromarray(grey()).save(path, exif=data)


def moments(*seconds):
    return [BEGIN + timedelta(seconds=one) for one in seconds]


def opened(folder, **keys):
    return open_frames(Frames(**{"source": "frames", **keys}), folder)


def codes(source):
    return [notice.code for notice in source.notices]


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "frames").mkdir()
    return tmp_path


@pytest.mark.parametrize(
    ("ending", "write"),
    [("tif", write_tiff), ("dng", write_branch), ("png", write_still), ("jpg", write_still)],
)
def test_exif_stamps_with_sub_seconds_run_over_midnight(folder, ending, write):
    for k, moment in enumerate(moments(0, 0.125, 2.0, 2.130)):
        write(folder / "frames" / f"f{k}.{ending}", moment)
    source = opened(folder, clock="tags")
    np.testing.assert_allclose(source.time_s, [0, 0.125, 2.0, 2.130], rtol=0, atol=1e-9)
    assert source.epoch == BEGIN
    assert source.exposure_s == pytest.approx(0.004)
    assert "frames_dropped" in codes(source)


def test_baseline_datetime_that_tifffile_wrote(folder):
    """TIFF 6.0, section 8, DateTime; sub-seconds behind the seconds, as some cameras write them."""
    for k, moment in enumerate(moments(0, 0.5, 1.0)):
        text = moment.strftime("%Y:%m:%d %H:%M:%S") + f".{moment.microsecond // 1000:03d}"
        tifffile.imwrite(
            folder / "frames" / f"f{k}.tif", grey(), metadata=None, extratags=[(306, 2, 0, text, True)]
        )
    np.testing.assert_allclose(opened(folder, clock="tags").time_s, [0, 0.5, 1.0], atol=1e-9)


def test_pages_of_one_file_have_their_own_stamps(folder):
    with tifffile.TiffWriter(folder / "stack.tif") as file:
        for moment in moments(0, 10, 20):
            file.write(grey(), datetime=moment, metadata=None, contiguous=False)
    source = opened(folder, source="stack.tif", clock="tags")
    # Whole seconds ten seconds apart: an even rate explains them to a fraction of a second.
    np.testing.assert_allclose(np.diff(source.time_s), 10, atol=1e-9)


@pytest.mark.parametrize("start", ["0 s", "2.5 s"])
def test_epoch_is_the_date_of_the_cameras_time_zero(folder, start):
    for k, moment in enumerate(moments(0, 0.2, 0.4)):
        write_tiff(folder / "frames" / f"f{k}.tif", moment)
    source = opened(folder, clock="tags", start=start)
    assert source.epoch + timedelta(seconds=source.time_s[1]) == BEGIN + timedelta(seconds=0.2)


def test_frames_are_put_in_order_of_their_stamps(folder):
    for k, moment in enumerate(moments(0, 0.2, 0.6, 0.4, 0.8)):
        write_tiff(folder / "frames" / f"f{k}.tif", moment)
    source = opened(folder, clock="tags")
    assert source.names == ("f0.tif", "f1.tif", "f3.tif", "f2.tif", "f4.tif")
    np.testing.assert_allclose(np.diff(source.time_s), 0.2, atol=1e-9)
    (notice,) = source.notices
    assert notice.code == "frames_reordered"
    assert "f2.tif" in notice.text


@pytest.mark.parametrize("empty", [2, 4])
def test_a_damaged_frame_without_a_stamp_leaves_the_others_their_times(folder, empty):
    for k, moment in enumerate(moments(0, 0.2, 0.4, 0.6, 0.8)):
        write_tiff(folder / "frames" / f"f{k}.tif", moment)
    (folder / "frames" / f"f{empty}.tif").write_bytes(b"")
    source = opened(folder, clock="tags")
    np.testing.assert_allclose(source.time_s, [0, 0.2, 0.4, 0.6, 0.8], atol=1e-6)
    assert list(source.damage) == [empty]


def test_a_damaged_first_frame_is_what_is_said(folder):
    for k, moment in enumerate(moments(0, 0.2, 0.4, 0.6)):
        write_tiff(folder / "frames" / f"f{k}.tif", moment)
    (folder / "frames" / "f0.tif").write_bytes(b"")
    with pytest.raises(FrameError, match=r"f0\.tif: cannot be read as a picture"):
        opened(folder, clock="tags")


def test_equal_stamps_are_named(folder):
    for k, moment in enumerate(moments(0, 0.2, 0.2, 0.4)):
        write_tiff(folder / "frames" / f"f{k}.tif", moment)
    with pytest.raises(FrameError, match=r"f1\.tif and f2\.tif have the same time"):
        opened(folder, clock="tags")


@pytest.mark.parametrize("interval", [0.2, 0.0417, 0.73])
def test_whole_second_stamps_give_the_even_rate(folder, interval):
    count = 60
    for k, moment in enumerate(moments(*(interval * np.arange(count)))):
        write_tiff(folder / "frames" / f"f{k}.tif", moment, digits="")
    source = opened(folder, clock="tags")
    assert codes(source) == ["stamps_whole_seconds"]
    even = even_rate(np.floor(0.25 + interval * np.arange(count)).astype(np.int64))
    assert np.diff(source.time_s) == pytest.approx(even.interval_s)
    # The truth lies in the range that the stamps leave: √3 standard uncertainties, by construction.
    assert abs(even.interval_s - interval) <= np.sqrt(3) * even.u_interval_s + 1e-9
    assert even.u_interval_s < 1 / count
    # All stamps were rounded down, so that the first one is within a second of the truth.
    assert abs((source.epoch - BEGIN).total_seconds()) < 1


def test_a_damaged_frame_takes_no_part_in_the_even_rate(folder):
    for k, moment in enumerate(moments(*(0.2 * np.arange(30)))):
        write_tiff(folder / "frames" / f"f{k:02d}.tif", moment, digits="")
    whole = opened(folder, clock="tags").time_s
    (folder / "frames" / "f13.tif").write_bytes(b"")
    # One stamp less bounds the rate as well: at 5 Hz, four of five stamps do not.
    np.testing.assert_allclose(opened(folder, clock="tags").time_s, whole, atol=0.02)


def test_whole_second_stamps_that_no_even_rate_explains(folder):
    early = [0.1 * k for k in range(20)]
    for k, moment in enumerate(moments(*early, *(7 + one for one in early))):
        write_tiff(folder / "frames" / f"f{k}.tif", moment, digits="")
    with pytest.raises(FrameError, match=r"have the same time.* stamps are whole seconds: give a rate"):
        opened(folder, clock="tags")


def test_whole_second_stamps_of_slow_uneven_frames_are_taken_with_a_word(folder):
    for k, moment in enumerate(moments(0, 10, 20, 47, 57)):
        write_tiff(folder / "frames" / f"f{k}.tif", moment, digits="")
    source = opened(folder, clock="tags")
    np.testing.assert_allclose(source.time_s, [0, 10, 20, 47, 57])
    assert "up to 1 s" in source.notices[0].text
    assert "27 s after f2.tif" in source.notices[1].text


@pytest.mark.parametrize(
    "text", ["0000:00:00 00:00:00", "    :  :     :  :  ", "2026:13:01 00:00:00", "x" * 500]
)
def test_stamps_that_are_none_are_refused_in_one_sentence(folder, text):
    for k in range(3):
        tags = [(306, 2, 0, text, True)]
        tifffile.imwrite(folder / "frames" / f"f{k}.tif", grey(), metadata=None, extratags=tags)
    with pytest.raises(FrameError, match=r"no time stamp common to all frames \(f0\.tif, f1\.tif, f2\.tif\)"):
        opened(folder, clock="tags")


def test_damaged_tags_are_no_time(folder):
    """Each byte of header and directories of a stamped file turned round: a time or one sentence."""
    for k, moment in enumerate(moments(0, 0.2, 0.4)):
        write_tiff(folder / "frames" / f"f{k}.tif", moment)
    path = folder / "frames" / "f1.tif"
    whole = path.read_bytes()
    places = np.random.default_rng(5).choice(len(whole) - 12 * 16, 150, replace=False)
    refused = 0
    for place in places:
        damaged = bytearray(whole)
        damaged[place] ^= 0xFF
        path.write_bytes(damaged)
        try:
            assert np.isfinite(opened(folder, clock="tags").time_s).all()
        except InputError:
            refused += 1
    assert 0 < refused < len(places)


NAMES = ("cam_%Y%m%d_%H%M%S_%f", "%y-%m-%d %H.%M.%S,%f", "a%%b %d.%m.%Y %H-%M-%S.%f")


@pytest.mark.parametrize("written", NAMES)
def test_names_are_read_as_strptime_reads_them(written):
    rng = np.random.default_rng(2)
    for _ in range(50):
        moment = datetime(1970, 1, 2) + timedelta(microseconds=int(rng.integers(0, 3e15)))
        name = moment.strftime(written)
        expected = datetime.strptime(name, written) - datetime(1970, 1, 1)
        assert name_pattern(written).read(f"{name}.tif") == expected // timedelta(microseconds=1) * 1000


@pytest.mark.parametrize(
    ("written", "names", "expected"),
    [
        ("c{seconds}", ["c1.5", "c2", "c2,25"], [0, 0.5, 0.75]),
        ("c{milliseconds}_{number}", ["c100_7", "c350_8", "c1600_9"], [0, 0.25, 1.5]),
        ("{text}_{microseconds}", ["a_0", "b_1_20", "c_500000"], [0, 2e-5, 0.5]),
        (
            "{nanoseconds}",
            ["1760000000000000001", "1760000000000000005", "1760000001000000001"],
            [0, 4e-9, 1],
        ),
        ("%H%M%S.{milliseconds}", ["235959.900", "000000.100", "000000.300"], [0, 0.2, 0.4]),
    ],
)
def test_times_in_names(folder, written, names, expected):
    for name in names:
        tifffile.imwrite(folder / "frames" / f"{name}.tif", grey())
    source = opened(folder, clock="names", name_time=written)
    np.testing.assert_allclose(source.time_s, expected, rtol=0, atol=1e-12)
    assert source.epoch is None


def test_a_frame_counter_and_a_rate_keep_the_others_in_place_where_frames_are_missing(folder):
    for k in (1, 2, 3, 6, 7, 8):
        tifffile.imwrite(folder / "frames" / f"cam_{k:04d}.tif", grey())
    source = opened(folder, clock="names", name_time="cam_{frame}", rate="4 Hz")
    np.testing.assert_allclose(source.time_s, [0, 0.25, 0.5, 1.25, 1.5, 1.75])
    assert "0.75 s after cam_0003.tif" in source.notices[0].text
    (notice,) = opened(folder, rate="4 Hz").notices
    assert notice.code == "frame_numbers_missing"
    assert "{frame}" in notice.text


@pytest.mark.parametrize(
    ("written", "said"),
    [
        ("cam_%Q", "'%Q' is not understood"),
        ("cam_{hours}", "'{hours}' is not understood"),
        ("cam_%Y%m%d", "says no seconds"),
        ("{text}{number}{seconds}{milliseconds}{microseconds}", "at most 4 placeholders"),
        ("%S%S", "holds 'S' twice"),
        ("%", "'%' is not understood"),
        ("{", "'{' is not understood"),
        ("%S" + "x" * 300, "at most 200 characters"),
        ("cam_%S", "cam_a1.tif: does not fit the pattern"),
        ("(cam_)+%S", "does not fit the pattern"),
    ],
)
def test_patterns_that_cannot_be_used(folder, written, said):
    for k in range(3):
        tifffile.imwrite(folder / "frames" / f"cam_a{k + 1}.tif", grey())
    with pytest.raises(FrameError, match=said.replace("(", r"\(").replace("+", r"\+")):
        opened(folder, clock="names", name_time=written)


def test_file_dates_only_with_a_warning(folder):
    for k in range(3):
        path = folder / "frames" / f"f{k}.tif"
        tifffile.imwrite(path, grey())
        os.utime(path, ns=(0, 1_700_000_000_125_000_000 + k * 250_000_000))
    source = opened(folder, clock="modified")
    np.testing.assert_allclose(source.time_s, [0, 0.25, 0.5])
    assert source.epoch == datetime.fromtimestamp(1_700_000_000) + timedelta(seconds=0.125)
    assert codes(source) == ["clock_modified"]
    os.utime(path, ns=(0, 1_700_000_000_000_000_000))
    with pytest.raises(FrameError, match="the files were copied"):
        opened(folder, clock="modified")


def test_a_times_file_with_dates_gives_the_epoch_and_the_order(folder):
    for k in range(3):
        tifffile.imwrite(folder / "frames" / f"f{k}.tif", grey())
    rows = [
        f"f{k}.tif,2026-05-04T10:00:0{second}"
        for k, second in enumerate(("0.5+02:00", "1.25+02:00", "0.75+02:00"))
    ]
    (folder / "t.csv").write_text("\n".join(["frame,time", *rows]))
    source = opened(folder, times="t.csv")
    assert source.names == ("f0.tif", "f2.tif", "f1.tif")
    np.testing.assert_allclose(source.time_s, [0, 0.25, 0.75])
    assert source.epoch == datetime(2026, 5, 4, 10, 0, 0, 500_000)
    assert "frames_reordered" in codes(source)


def test_a_times_file_with_times_of_day_counts_from_midnight_on(folder):
    for k in range(3):
        tifffile.imwrite(folder / "frames" / f"f{k}.tif", grey())
    (folder / "t.csv").write_text("time\n23:59:59.25\n23:59:59.875\n0:00:00.5\n")
    source = opened(folder, times="t.csv")
    np.testing.assert_allclose(source.time_s, [86399.25, 86399.875, 86400.5])
    assert source.epoch is None


def test_a_times_file_may_hold_nothing_but_dates(folder):
    """The blank between date and time of day separates no columns."""
    for k in range(3):
        tifffile.imwrite(folder / "frames" / f"f{k}.tif", grey())
    (folder / "t.csv").write_text("time\n" + "".join(f"2026-05-04 10:00:0{k}.125\n" for k in range(3)))
    source = opened(folder, times="t.csv")
    np.testing.assert_allclose(source.time_s, [0, 1, 2])
    assert source.epoch == datetime(2026, 5, 4, 10, 0, 0, 125_000)


@pytest.mark.parametrize(
    ("keys", "said"),
    [
        ('rate = "5 Hz"\nclock = "tags"', "give one of rate, times or clock"),
        ('clock = "names"', "belong together"),
        ('clock = "tags"\nname_time = "%S"', "belong together"),
        ('clock = "names"\nname_time = "{frame}"', "needs rate beside it"),
        ('clock = "names"\nname_time = "%S"\nrate = "5 Hz"', "give one of"),
        ('clock = "guess"', "tags"),
    ],
)
def test_clocks_that_contradict_one_another(tmp_path, keys, said):
    (tmp_path / "t.toml").write_text(f'source = "frames"\n{keys}\n')
    with pytest.raises(TestFileError, match=said):
        read_toml(tmp_path / "t.toml", Frames)


def test_exposure_as_given_goes_before_the_files(folder):
    for k, moment in enumerate(moments(0, 0.2, 0.4)):
        write_tiff(folder / "frames" / f"f{k}.tif", moment)
    assert opened(folder, rate="5 Hz").exposure_s == pytest.approx(0.004)
    assert opened(folder, rate="5 Hz", exposure="2 ms").exposure_s == 0.002


@pytest.mark.parametrize(
    ("names", "expected"),
    [
        (["a_20260504_101112_100", "a_20260504_101112_300"], "a_%Y%m%d_%H%M%S_%f"),
        (["2026-05-04T10.11.12", "2026-05-04T10.11.13"], None),
        (["1 20260504101112.5 x", "2 20260504101112.7 x"], "{number} %Y%m%d%H%M%S.%f x"),
        (["20260504_101112_7", "20260504_101113_8"], "%Y%m%d_%H%M%S_%f"),
        (["cam_1", "cam_2"], None),
        (["img_200ms", "img_1000ms"], "img_{milliseconds}ms"),
        (["3 at 0.5s", "4 at 1,25s"], "{number} at {seconds}s"),
        (["img_200ms", "img_100ms"], None),
        (["a_20260504_101113", "a_20260504_101112"], None),
    ],
)
def test_patterns_are_suggested_only_where_all_names_fit(names, expected):
    found = suggested_pattern([f"{name}.tif" for name in names])
    assert found == expected or (expected is None and names[0].startswith("2026-05") and found)


def test_a_survey_finds_what_is_there(folder):
    for k, moment in enumerate(moments(0, 0.2, 0.4, 1.0, 1.2)):
        write_tiff(folder / "frames" / moment.strftime(f"c{k}_%Y%m%d_%H%M%S_%f.tif"), moment)
    survey = look_at_frames(folder / "frames")
    assert (len(survey.source), survey.source.shape, survey.source.depth.bits) == (5, (12, 16), 8)
    assert survey.clocks["names"].keys["name_time"] == "c{number}_%Y%m%d_%H%M%S_%f"
    for name in ("tags", "names"):
        clock = survey.clocks[name]
        assert clock.rate_hz == pytest.approx(5)
        assert clock.duration_s == pytest.approx(1.2)
        assert [notice.code for notice in clock.notices] == ["frames_dropped"]
