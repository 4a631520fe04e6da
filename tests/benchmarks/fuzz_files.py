"""Damaged and random files, and what becomes of them: the cases behind ``python tests/benchmarks fuzz``.

As a program, it does some cases of one kind in a process of its own and prints one line of JSON each:
``python tests/benchmarks/fuzz_files.py KIND FIRST COUNT``.
"""

from __future__ import annotations

import io
import json
import sys
import tempfile
import traceback
import zipfile
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from dic.errors import FrameError, InputError

SEED = 2024
ROWS, COLUMNS = 24, 32
FOLDER = Path(__file__).parent


@dataclass(frozen=True)
class Kind:
    """One kind of file.

    `whole` writes a sound file's content for a generator of random numbers, `load` reads a folder that
    holds it as the public functions do, and `ending` is the file's.  Where `damage` is false, `whole` has
    already done the harm.
    """

    whole: Callable[[np.random.Generator], bytes]
    load: Callable[[Path], None]
    ending: str
    cases: int
    damage: bool = True


def load_frames(folder: Path) -> None:
    """Open the frames and read every one; a frame that cannot be read is refused by itself."""
    from dic.frames import open_frames
    from dic.testfile import Frames

    files = sorted(folder.iterdir())
    stack = files[0].suffix in (".avi", ".mkv", ".mp4") or files[0].name.startswith("stack")
    source = open_frames(Frames(source=files[0].name if stack else folder.name, rate="5 Hz"),
                         folder if stack else folder.parent)  # fmt: skip
    source.full_scale()
    refused = None
    for index in range(len(source)):
        try:
            grey = source[index]
        except FrameError as error:
            refused = error
            continue
        assert grey.shape == source.shape
        assert grey.dtype == source.pages[0].dtype
    if refused is not None:
        raise refused


def load_test(folder: Path) -> None:
    from dic.testfile import load

    load(next(folder.iterdir()))


def load_record(folder: Path) -> None:
    from dic.sync import look_at_record, read_load_record
    from dic.testfile import LoadRecord

    path = next(folder.iterdir())
    look_at_record(path)
    read = read_load_record(LoadRecord(source=path.name), path)
    assert np.isfinite(read.force_N).all()
    assert (np.diff(read.time_s) > 0).all()


def grey(rng: np.random.Generator, deep: bool = False, colour: bool = False) -> np.ndarray:
    shape = (ROWS, COLUMNS, 3) if colour else (ROWS, COLUMNS)
    return rng.integers(0, 65536 if deep else 256, shape).astype(np.uint16 if deep else np.uint8)


def tiff(rng: np.random.Generator) -> bytes:
    import tifffile

    out = io.BytesIO()
    packing = rng.choice(["none", "lzw", "zlib", "packbits"])
    how = {} if packing == "none" else {"compression": str(packing)}
    how |= {"tile": (16, 16)} if rng.random() < 0.3 else {"rowsperstrip": int(rng.choice([5, ROWS]))}
    picture = grey(rng, rng.random() < 0.5, rng.random() < 0.3)
    big, order = bool(rng.random() < 0.3), str(rng.choice(["<", ">"]))
    with tifffile.TiffWriter(out, bigtiff=big, byteorder=order) as writer:
        for _ in range(rng.choice([1, 1, 3])):
            writer.write(picture, contiguous=False, **how)
    return out.getvalue()


def by_pillow(name: str) -> Callable[[np.random.Generator], bytes]:
    def whole(rng: np.random.Generator) -> bytes:
        from PIL import Image

        out = io.BytesIO()
        deep = name == "PNG" and rng.random() < 0.3
        picture = grey(rng, deep, not deep and rng.random() < 0.4)
        options = {"progressive": bool(rng.random() < 0.5)} if name == "JPEG" else {}
        Image.fromarray(picture).save(out, name, **options)
        return out.getvalue()

    return whole


def pgm(rng: np.random.Generator) -> bytes:
    picture = grey(rng, rng.random() < 0.5)
    top = np.iinfo(picture.dtype).max
    if rng.random() < 0.5:
        rows = "\n".join(" ".join(map(str, row)) for row in picture.tolist())
        return f"P2\n# text\n{COLUMNS} {ROWS} {top}\n{rows}\n".encode()
    return b"P5 %d %d %d\n" % (COLUMNS, ROWS, top) + picture.astype(picture.dtype.newbyteorder(">")).tobytes()


def video(rng: np.random.Generator) -> bytes:
    import av

    codec, name = [("ffv1", "matroska"), ("mjpeg", "avi"), ("mpeg4", "mp4")][rng.integers(3)]
    out = io.BytesIO()
    with av.open(out, "w", format=name) as container:
        stream = container.add_stream(codec, rate=25)
        stream.width, stream.height = COLUMNS, ROWS
        stream.pix_fmt = {"ffv1": "gray", "mjpeg": "yuvj420p", "mpeg4": "yuv420p"}[codec]
        for _ in range(5):
            frame = av.VideoFrame.from_ndarray(grey(rng), format="gray").reformat(format=stream.pix_fmt)
            container.mux(stream.encode(frame))
        container.mux(stream.encode(None))
    return out.getvalue()


def record(rng: np.random.Generator) -> bytes:
    separator = str(rng.choice([",", ";", "\t"]))
    time = np.arange(60) / 20
    rows = [f"{t:.3f}{separator}{force:.2f}" for t, force in zip(time, 900 * time, strict=True)]
    return "\n".join([f"Time (s){separator}Force (N)", *rows, ""]).encode()


def machine_record(rng: np.random.Generator) -> bytes:
    """Write a record in one of the ways in which machines do."""
    separator, decimal = [(",", "."), (";", ","), (";", "."), ("\t", ","), ("|", "."), (" ", ",")][
        rng.integers(6)
    ]
    time = np.arange(60) / 20
    spell_time = [lambda t: f"{t:.3f}", lambda t: f"00:00:{t:06.3f}", lambda t: f"2026-12-01T10:00:{t:06.3f}"]
    spell = spell_time[rng.integers(3)]
    rows = [[spell(t), f"{900 * t:.2f}", f"{t / 9:.4f}"] for t in time]
    if rng.random() < 0.3:
        rows[int(rng.integers(60))][1] = str(rng.choice(["OVL", "---", "NaN", "1e999", ""]))
    units = rng.random() < 0.5
    heads = [["Time", "Force", "Weg"], ["s", "N", "mm"]] if units else [["Zeit_s", "Force[N]", "Weg/mm"]]
    lines = [separator.join(cell.replace(".", decimal) for cell in row) for row in rows]
    if rng.random() < 0.3:
        lines[30:30] = [str(rng.choice(["", "# pause", "Segment 2", "-----"])), separator.join(heads[0])]
    above = ["Test report 7", "", "Prüfer: N. N."][: rng.integers(4)]
    text = str(rng.choice(["\n", "\r\n"])).join([*above, *map(separator.join, heads), *lines, ""])
    return text.encode(str(rng.choice(["utf-8", "utf-8-sig", "utf-16", "cp1252"])))


def workbook(rng: np.random.Generator) -> bytes:
    import openpyxl

    book = openpyxl.Workbook()
    page = book.active
    for row in [["Test 7"], ["Time (s)", "Force (N)"], *((t / 20, 45.0 * t) for t in range(60))]:
        page.append(row)
    out = io.BytesIO()
    book.save(out)
    return out.getvalue()


def workbook_of_damaged_parts(rng: np.random.Generator) -> bytes:
    """Damage what an archive holds and leave the archive sound, so that the harm gets to its reader."""
    out = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(workbook(rng))) as whole, zipfile.ZipFile(out, "w") as archive:
        hit = rng.choice(whole.namelist())
        for name in whole.namelist():
            part = whole.read(name)
            archive.writestr(name, damaged(rng, part) if name == hit else part)
    return out.getvalue()


def test_file(rng: np.random.Generator) -> bytes:
    return b"""[specimen]
label = "sheet 7"
width = "12.51 mm"
thickness = "1.02 mm"
[frames]
source = "frames"
rate = "5 Hz"
reference = [0, 3]
[load_record]
source = "machine.csv"
time = "Time"
force = "Force"
units = { Force = "kN" }
[gauge]
axis = "2.5 deg"
region = [1, 2, 300, 400]
[properties]
modulus = { strain = [0.0005, 0.0025] }
proof = [0.002]
"""


#: Values that a test file may hold under any key, from sensible to hostile.
ODD_VALUES = [
    "0", "-1", "1", "3", "2.5", "nan", "-inf", "1e308", "9" * 30, "9" * 5000, "true", "1979-05-27",
    "1979-05-27T07:32:00", "[]", "[[]]", "[0, 1]", "[1, 0]", "[-5, 1e9]", "{}", "{ strain = [0, 1] }",
    "{ stress = ['1 MPa', '2 MPa'] }", "{ a = { b = 1 } }", "[" * 200 + "]" * 200, '""', '" "', '"auto"',
    '"12 mm"', '"-12 mm"', '"12,5 mm"', '"5 Hz"', '"2 ms"', '"1e400 mm"', '"1 mm^9"', '"9**9**9 mm"',
    '"0 K"', '"1 " ', '"' + "9" * 300 + ' mm"', '"\\u0000"', '"\\u001b[2J"', '"\\uFFFF"', '"a\\nb"',
    '"' + "x" * 5000 + '"', '"' + "a/" * 3000 + '"', '"frames"', '"frames/*.tif"', '"**"', '"*"', '"["',
    '"."', '"/"', '".."', '"/dev/zero"', '"/dev/null"', '"machine.csv"', '"test.toml"', '"Time"', '"Force"',
    '"tags"', '"names"', '"modified"', '"f_{frame}"', '"f{number}"', '"{text}{text}{text}{text}"', '"%Y%m%d"',
    '"%"', '"{"', '"all"', '"round"', '"flat"', '"__import__(\'os\').system(\'true\')"',
]  # fmt: skip


#: What belongs under a key, for half of the changes, so that they get as far as the files.
FITTING = {
    "source": ['"frames"', '"frames/*.tif"', '"machine.csv"', '"frames/f_0.tif"', '"/dev/zero"'],
    "start": ['"1 s"', "-1e9"], "rate": ['"1e-9 Hz"', '"1e300 Hz"'], "exposure": ['"2 ms"', '"1 h"'],
    "reference": ["0", "[0, 1]", "[1, 0]", "-1", "99"], "time": ["1", "2", "0", '"Force"'], "force": ["2"],
    "displacement": ["2", "1"], "extensometer": ["2"], "trigger": ["1", "3"], "decimal": ['","', '"."'],
    "segment": ['"all"', "1", "2", "0"], "tare": ["true", '"1 s"', '"1 h"'], "sheet": ['"a"'],
    "units": ['{ Force = "N" }', '{ force = "kN" }', '{ time = "N" }', '{ x = "N" }'],
    "offset": ['"1 s"', '"100 s"', "1e308", "nan"], "drift": ["0.01", "-0.09"], "scale": ["1e-300", "1e300"],
    "width": ["1e-300", "1e300", '"1 km"'], "thickness": ["1e-300", "1e300"], "label": ['"[red]x[/red]"'],
}  # fmt: skip


def odd_test_file(rng: np.random.Generator) -> bytes:
    """Return a sound test file in which some keys have other values, and some strange keys are added."""
    import tomllib

    from dic.testfile import TestFile

    known = [(name, key) for name, section in TestFile.model_fields.items() if not section.exclude
             for key in getattr(section.annotation, "model_fields", {})]  # fmt: skip
    content = {name: {key: json.dumps(value) for key, value in section.items() if not isinstance(value, dict)}
               for name, section in tomllib.loads(test_file(rng).decode()).items()}  # fmt: skip
    content["gauge"].pop("region")
    inputs = [(name, key) for name, key in known if name in ("frames", "load_record", "sync")]
    for _ in range(rng.integers(1, 4)):
        among = inputs if rng.random() < 0.6 else known
        name, key = among[rng.integers(len(among))]
        values = ODD_VALUES
        if rng.random() < 0.6:
            values = FITTING.get(key, ODD_VALUES)
        elif rng.random() < 0.1:
            key = str(rng.choice(["", "\n", "widht", "\x1b[2J", "k" * 3000]))
        content.setdefault(name, {})[key] = values[rng.integers(len(values))]
    lines = []
    for name, section in content.items():
        lines += [f"[{name}]", *(f"{json.dumps(key)} = {value}" for key, value in section.items())]
    return "\n".join(lines).encode()


def inspect_test(folder: Path) -> None:
    """Read all that a test file names, beside frames and a record that are sound."""
    import tifffile

    from dic.inspection import inspect
    from dic_cli.inspected import as_json

    rng = np.random.default_rng(0)
    (folder / "frames").mkdir()
    for k in range(4):
        tifffile.imwrite(folder / "frames" / f"f_{k}.tif", grey(rng))
    (folder / "machine.csv").write_bytes(record(rng))
    found = inspect(folder / "f0.toml")
    json.loads(as_json(found))
    if found.errors:
        raise InputError(found.errors[0].removesuffix("."))


KINDS = {
    "TIFF": Kind(tiff, load_frames, ".tif", 800),
    "PNG": Kind(by_pillow("PNG"), load_frames, ".png", 300),
    "BMP": Kind(by_pillow("BMP"), load_frames, ".bmp", 150),
    "PGM": Kind(pgm, load_frames, ".pgm", 150),
    "JPEG": Kind(by_pillow("JPEG"), load_frames, ".jpg", 200),
    "video": Kind(video, load_frames, "", 150),
    "CSV": Kind(machine_record, load_record, ".csv", 600),
    "XLSX": Kind(workbook, load_record, ".xlsx", 200),
    "XLSX parts": Kind(workbook_of_damaged_parts, load_record, ".xlsx", 200, damage=False),
    "TOML": Kind(test_file, load_test, ".toml", 300),
    "TOML values": Kind(odd_test_file, inspect_test, ".toml", 500, damage=False),
}


def _video_ending(content: bytes) -> str:
    return ".avi" if content[:4] == b"RIFF" else ".mkv" if content[:4] == b"\x1aE\xdf\xa3" else ".mp4"


def damaged(rng: np.random.Generator, content: bytes) -> bytes:
    """Damage a file: single bytes, numbers in its header, a piece lost, doubled or foreign, or all of it."""
    out = bytearray(content)
    way = rng.integers(8)
    # Half of the damage goes where sizes and offsets stand, at either end.
    ends = rng.random() < 0.5
    places = np.concatenate([np.arange(min(len(out), 300)), np.arange(max(len(out) - 300, 0), len(out))])

    def choose(n: int) -> NDArray[np.integer]:
        return rng.choice(places, n) if ends else rng.integers(0, len(out), n)

    if way <= 2:
        for at in choose(rng.integers(1, 9)):
            out[at] = rng.choice([0, 1, 127, 128, 255, int(rng.integers(256))])
    elif way == 3:
        for at in choose(2):
            out[at : at + 4] = int(rng.choice([0, 1, 2**16, 2**31 - 1, 2**32 - 1])).to_bytes(4, "little")
    elif way == 4:
        del out[int(choose(1)[0]) :]
    elif way == 5:
        at, length = int(choose(1)[0]), int(rng.integers(1, 64))
        del out[at : at + length]
    elif way == 6:
        at = int(choose(1)[0])
        out[at:at] = rng.bytes(int(rng.integers(1, 64))) if rng.random() < 0.5 else out[at : at + 64]
    else:
        keep = int(rng.integers(0, 32))
        out[keep:] = rng.bytes(int(rng.integers(1, 4000)))
    return bytes(out)


def one_case(name: str, number: int, folder: Path) -> tuple[str, str]:
    """Do one case in an empty folder: ``good``, ``refused`` or ``traceback``, and what was said."""
    kind = KINDS[name]
    rng = np.random.default_rng([SEED, sorted(KINDS).index(name), number])
    sound = kind.whole(rng)
    content = damaged(rng, sound) if kind.damage else sound
    ending = kind.ending or _video_ending(sound)
    frames = kind.load is load_frames and name != "video"
    for k in range(3 if frames else 1):
        (folder / f"f{k}{ending}").write_bytes(content)
    try:
        kind.load(folder)
    except InputError as error:
        said = str(error)
        return ("refused", said) if "\n" not in said else ("traceback", f"more than one line: {said}")
    except BaseException:
        return "traceback", traceback.format_exc()
    return "good", ""


def main(name: str, first: int, count: int) -> None:
    import resource

    # Far above what is allowed, so that what goes beyond it shows, but not at the machine's cost.
    resource.setrlimit(resource.RLIMIT_AS, (6 * 2**30, 6 * 2**30))
    for number in range(first, first + count):
        with tempfile.TemporaryDirectory() as folder:
            outcome, said = one_case(name, number, Path(folder))
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
        print(json.dumps({"case": number, "outcome": outcome, "said": said, "peak": peak}), flush=True)


if __name__ == "__main__":
    main(sys.argv[1], int(sys.argv[2]), int(sys.argv[3]))
