"""The command line as a person meets it: exit statuses, messages, help."""

import subprocess
import sys
from io import BytesIO, TextIOWrapper
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
import tifffile

from dic.properties import Property
from dic_cli.main import main
from dic_cli.screen import show_measurement


@pytest.mark.parametrize("command", [[], ["run"], ["demo"], ["render"]])
def test_help(tauten, command):
    found = tauten(*command, "--help")
    assert found.returncode == 0
    assert "Usage" in found.stdout


def test_help_imports_nothing_heavy():
    code = "import sys, dic_cli.main; print(*sys.modules)"
    loaded = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    ).stdout.split()
    assert not {"numpy", "numba", "scipy", "cv2", "pandas", "pint", "pydantic", "matplotlib"} & set(loaded)


def test_a_wrong_input_is_status_2_and_one_sentence(tmp_path):
    (tmp_path / "test.toml").write_text("[specimen]\nwidth = 3\n")
    command = [sys.executable, "-m", "dic_cli.main", "run", str(tmp_path / "test.toml")]
    found = subprocess.run(command, capture_output=True, text=True, check=False)
    assert found.returncode == 2
    assert found.stderr.startswith("tauten: ")
    assert found.stderr.count("\n") == 1


TEST = """
[specimen]
width = 10
thickness = 1
[frames]
source = "frames"
rate = 5
[load_record]
source = "machine.csv"
time = "Time"
force = "Force"
"""


def test_a_missing_file_is_status_2(tauten, tmp_path):
    found = tauten("run", tmp_path / "none.toml")
    assert found.returncode == 2
    assert "none.toml" in found.stderr


def test_a_folder_that_cannot_be_made_is_status_2(tauten, tmp_path):
    """Nobody can make a folder below a file, not even root."""
    (tmp_path / "test.toml").write_text(TEST)
    found = tauten("run", tmp_path / "test.toml", "--out", tmp_path / "test.toml" / "out")
    assert found.returncode == 2
    assert "cannot be made" in found.stderr


def test_an_unknown_command_is_status_2(tauten):
    assert tauten("mesure").returncode == 2


def test_a_screen_that_lacks_letters(tmp_path, monkeypatch):
    """A file of an old code page has neither ν nor ×."""
    (tmp_path / "frames").mkdir()
    for k in range(3):
        noise = np.random.default_rng(k).integers(0, 255, (20, 30)).astype(np.uint8)
        tifffile.imwrite(tmp_path / "frames" / f"{k}.tif", noise)
    rows = "".join(f"{k},{max(0, k - 20)}\n" for k in range(60))
    (tmp_path / "machine.csv").write_text(f"Time (s),Force (N)\n{rows}")
    (tmp_path / "test.toml").write_text(TEST)
    screen = TextIOWrapper(BytesIO(), encoding="ascii", write_through=True)
    monkeypatch.setattr(sys, "stdout", screen)
    monkeypatch.setattr(sys, "argv", ["tauten", "inspect", str(tmp_path / "test.toml")])
    with pytest.raises(SystemExit) as left:
        main()
    assert left.value.code == 0
    assert b"30 ? 20 px" in screen.buffer.getvalue()


YIELDS = ("upper_yield", "lower_yield")


def test_a_strangers_text_does_not_steer_the_screen(capsys):
    """Labels come from the test file, whose strings may hold any character; the folder from anywhere."""
    steering = "\x1b]0;other title\x07 [bold]mine[/bold]"
    test = SimpleNamespace(specimen=SimpleNamespace(label=steering))
    show_measurement(SimpleNamespace(test=test, properties={}, notices=(), folder=Path("\x1b[31m")))
    shown = capsys.readouterr().out
    assert "\x1b" not in shown
    assert "[bold]mine" in shown


def test_the_screen_folds_what_is_absent_and_names_the_strength(capsys):
    nan, none = float("nan"), "the force does not fall"
    rows = [
        Property("tensile_strength", "Rm", -120.0, "MPa", 1.0, "largest force"),
        *(Property(name, "", nan, "MPa", nan, "not determined", notes=(none,)) for name in YIELDS),
    ]
    test = SimpleNamespace(specimen=SimpleNamespace(label="1"))
    found = {row.name: row for row in rows}
    show_measurement(SimpleNamespace(test=test, properties=found, notices=(), folder=Path()))
    shown = capsys.readouterr().out
    assert "Compressive strength" in shown
    assert "Tensile" not in shown
    assert f"not determined: Upper yield strength, Lower yield strength: {none}" in " ".join(shown.split())


def test_a_broken_program_is_status_1(tmp_path):
    code = (
        "import dic_cli.main as m, dic_cli.run as r\n"
        "import sys; sys.modules['dic.pipeline'] = None\n"
        f"sys.argv = ['tauten', 'run', {str(tmp_path / 'x.toml')!r}]\n"
        "m.main()\n"
    )
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert found.returncode == 1


def test_render(tauten, tmp_path, small_scenario):
    (tmp_path / "small.toml").write_text(small_scenario.replace("frames = 22", "frames = 3"))
    made = tauten("render", "small.toml", "made", cwd=tmp_path)
    assert made.returncode == 0, made.stderr
    assert (tmp_path / "made" / "truth.json").exists()


def test_run(tauten, copy):
    found = tauten("run", "test.toml", "--out", "results", cwd=copy.parent)
    assert found.returncode == 0, found.stderr
    assert "Young's modulus" in found.stdout
    assert (copy.parent / "results" / "report.html").exists()
