"""``tauten new``: from files as a laboratory has them to a test file that runs once its blanks are filled."""

import os
import sys
import tomllib
from datetime import datetime, timedelta

import av
import numpy as np
import pytest
import tifffile

from dic.drafting import draft, write_draft
from dic.errors import InputError, StoreError, TestFileError
from dic.frames import look_at_frames
from dic.inspection import inspect
from dic.pipeline import measure
from dic.testfile import load


def lay_out(folder, record, *, encoding="utf-8", stamped=False):
    """Write six small frames and a record."""
    (folder / "frames").mkdir(exist_ok=True)
    rng = np.random.default_rng(0)
    for k in range(6):
        at = datetime(2026, 5, 4, 10, 0, 0) + timedelta(seconds=k / 4)
        name = f"cam_{at:%Y%m%d_%H%M%S_%f}" if stamped else f"cam_{k}"
        tifffile.imwrite(folder / "frames" / f"{name}.tif", rng.integers(40, 200, (20, 30)).astype(np.uint8))
    (folder / "machine.csv").write_bytes(record.encode(encoding))
    return folder / "frames", folder / "machine.csv", folder


def rows(line="{t},{f}", count=40):
    return "\n".join(line.format(t=f"{k / 10:.1f}", f=f"{max(0, k - 9) * 12.5:.2f}") for k in range(count))


PLAIN = f"Time (s),Force (N)\n{rows()}\n"
HEADING = "Prüfprotokoll;Nr. 7\nPrüfer;A. B.\n\n"
GERMAN = f"{HEADING}Prüfzeit;Kraft\ns;N\n" + rows("{t};{f}").replace(".", ",")


def test_from_two_folders_to_a_report(small_test, tmp_path):
    """A German export: heading lines, a units row, semicolons and decimal commas, Latin-1."""
    made = small_test.parent
    table = np.loadtxt(made / "machine.csv", delimiter=",", skiprows=1)
    lines = [f"{t:.4f};{travel:.5f};{1000 * kilo:.2f}".replace(".", ",") for t, travel, kilo in table]
    (tmp_path / "lab").mkdir()
    (tmp_path / "lab" / "Prüfung.csv").write_text(
        f"{HEADING}Prüfzeit;Weg;Kraft\ns;mm;N\n" + "\n".join(lines), "latin-1"
    )
    path = tmp_path / "test.toml"
    blanks = write_draft(made / "frames", tmp_path / "lab" / "Prüfung.csv", path)
    assert blanks == ["specimen.width", "specimen.thickness", "frames.rate"]
    with pytest.raises(TestFileError, match=r"fill in specimen.width, specimen.thickness and frames.rate"):
        measure(path)
    text = path.read_text("utf-8")
    for key, value in (("width", "10 mm"), ("thickness", "2 mm"), ("rate", "2 Hz")):
        text = text.replace(f'{key} = ""', f'{key} = "{value}"')
    path.write_text(text, "utf-8")
    assert inspect(path).errors == ()
    found = measure(path)
    modulus = found.properties["youngs_modulus"]
    # the scenario's value; beyond three standard uncertainties lie 0.3 % of all draws
    assert abs(modulus.value - 70e3) < 3 * modulus.standard_uncertainty
    assert (tmp_path / "test-results" / "report.html").exists()


def test_the_command_says_what_is_left_to_fill_in(tauten, tmp_path):
    lay_out(tmp_path, PLAIN)
    for status, said in ((0, "Fill in specimen.width"), (2, "exists already")):
        found = tauten("new", "frames", "machine.csv", cwd=tmp_path)
        assert found.returncode == status
        assert said in found.stdout + found.stderr


def test_what_was_found_is_written(tmp_path):
    text, blanks = draft(*lay_out(tmp_path, GERMAN, encoding="cp1252"))
    content = tomllib.loads(text)
    assert content["frames"] == {"source": "frames", "rate": ""}
    assert content["load_record"] == {
        "source": "machine.csv", "time": "Prüfzeit", "force": "Kraft"
    }  # fmt: skip
    assert "semicolon" in text
    assert "decimal comma" in text
    assert blanks == ["specimen.width", "specimen.thickness", "frames.rate"]


def test_a_clock_in_the_names_is_taken(tmp_path):
    text, blanks = draft(*lay_out(tmp_path, PLAIN, stamped=True))
    filled = text.replace('width = ""', "width = 10").replace('thickness = ""', "thickness = 1")
    (tmp_path / "test.toml").write_text(filled)
    assert load(tmp_path / "test.toml").frames.clock == "names"
    assert inspect(tmp_path / "test.toml").frames.interval_s == pytest.approx(0.25)
    assert blanks == ["specimen.width", "specimen.thickness"]


@pytest.mark.parametrize(
    ("record", "blank"),
    [
        (f"Time (s),Force 1 (N),Force 2 (N)\n{rows('{t},{f},{f}')}\n", "load_record.force"),
        (f"Time (s),Force\n{rows()}\n", "load_record.units.force"),
        (f"Time (s),Force (N)\n{rows()}\n{rows()}\n", "load_record.segment"),
    ],
)
def test_what_cannot_be_told_is_left_blank_and_asked_for(tmp_path, record, blank):
    frames, machine, folder = lay_out(tmp_path, record)
    assert blank in write_draft(frames, machine, folder / "test.toml")
    with pytest.raises(TestFileError, match=f"fill in .*{blank}"):
        load(folder / "test.toml")


@pytest.mark.parametrize(
    "header",
    ['Force "a" \\ (N)', "Force ''' (N)", "Force # (N)", "Force\u2028[frames]\u2028x (N)",
     "Force" + " long" * 20 + " (N)"],
)  # fmt: skip
def test_a_strangers_header_stays_a_header(tmp_path, header):
    """Whatever stands in it, the draft holds the same keys and reads the same column."""
    quoted = '"' + header.replace('"', '""') + '"'
    frames, machine, folder = lay_out(tmp_path, f"Time (s),{quoted}\n{rows()}\n")
    text, _ = draft(frames, machine, folder)
    content = tomllib.loads(text)
    assert set(content) == {"specimen", "frames", "load_record"}
    assert set(content["load_record"]) == {"source", "time", "force"}
    assert content["load_record"]["force"] in (2, header)
    assert all(line.isprintable() for line in text.splitlines())
    assert max(map(len, text.splitlines())) < 130


def test_names_count_from_the_test_files_folder(tmp_path):
    frames, machine, _ = lay_out(tmp_path, PLAIN)
    (tmp_path / "deep").mkdir()
    content = tomllib.loads(draft(frames, machine, tmp_path / "deep")[0])
    assert content["frames"]["source"] == "../frames"
    assert content["load_record"]["source"] == "../machine.csv"


def test_a_folder_without_a_name_of_its_own(tmp_path, monkeypatch):
    frames, machine, folder = lay_out(tmp_path, PLAIN)
    monkeypatch.chdir(frames)
    assert tomllib.loads(draft(frames.__class__("."), machine, folder)[0])["frames"]["source"] == "frames"


def test_a_video_in_a_folder_is_named_itself(tmp_path):
    """Only then are its own times taken; the file's times come from PyAV, which wrote it."""
    _, machine, folder = lay_out(tmp_path, PLAIN)
    film = tmp_path / "film"
    film.mkdir()
    with av.open(str(film / "test.mkv"), "w") as out:
        stream = out.add_stream("ffv1", rate=10)
        stream.width, stream.height, stream.pix_fmt = 64, 48, "gray"
        for k in range(4):
            picture = np.random.default_rng(k).integers(0, 255, (48, 64)).astype(np.uint8)
            out.mux(stream.encode(av.VideoFrame.from_ndarray(picture, format="gray")))
        out.mux(stream.encode())
    text, _ = draft(film, machine, folder)
    filled = text.replace('width = ""', "width = 10").replace('thickness = ""', "thickness = 1")
    (tmp_path / "test.toml").write_text(filled)
    assert tomllib.loads(text)["frames"] == {"source": "film/test.mkv"}
    found = inspect(tmp_path / "test.toml")
    assert found.errors == ()
    assert found.frames.interval_s == pytest.approx(0.1)


@pytest.mark.skipif(sys.platform == "win32", reason="names are always text there")
def test_names_of_frames_need_not_be_text(tmp_path):
    """Names in another encoding, as old archives unpack to, cannot stand in a test file and need not."""
    frames, machine, folder = lay_out(tmp_path, PLAIN, stamped=True)
    for path in list(frames.iterdir()):
        path.rename(path.with_name(os.fsdecode(b"Pr\xfcfung_") + path.name))
    content = tomllib.loads(draft(frames, machine, folder)[0])
    assert content["frames"] == {"source": "frames", "rate": ""}
    assert len(look_at_frames(frames).source.listing()) == 64


@pytest.mark.parametrize("lay", [lambda p: p.write_text("mine"), lambda p: p.mkdir(),
                                 lambda p: p.symlink_to(p.parent / "nowhere")])  # fmt: skip
def test_nothing_is_overwritten(tmp_path, lay):
    frames, machine, folder = lay_out(tmp_path, PLAIN)
    lay(folder / "test.toml")
    with pytest.raises(StoreError, match="exists already"):
        write_draft(frames, machine, folder / "test.toml")
    assert not (folder / "nowhere").exists()


def test_a_folder_that_is_not_there(tmp_path):
    frames, machine, folder = lay_out(tmp_path, PLAIN)
    with pytest.raises(StoreError, match="cannot be written"):
        write_draft(frames, machine, folder / "none" / "test.toml")


@pytest.mark.parametrize("name", ["frames", "machine.csv"])
def test_an_input_that_is_missing(tmp_path, name):
    frames, machine, folder = lay_out(tmp_path, PLAIN)
    inputs = [frames.with_name("none") if one.name == name else one for one in (frames, machine)]
    with pytest.raises(InputError, match="none"):
        write_draft(*inputs, folder / "test.toml")
    assert not os.path.lexists(folder / "test.toml")


def test_times_of_day_are_written_as_such(tmp_path):
    record = "Time,Force (N)\n" + "".join(f"10:20:{k:02d}.500,{k}.0\n" for k in range(20))
    assert "Time, times of day, 10:20:00.500 to 10:20:19.500" in draft(*lay_out(tmp_path, record))[0]
