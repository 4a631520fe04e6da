"""A few of the damaged files of ``python tests/benchmarks fuzz``; there are more, with memory and time."""

import runpy
from pathlib import Path

import pytest

FUZZ = runpy.run_path(str(Path(__file__).parents[1] / "benchmarks" / "fuzz_files.py"))


@pytest.mark.filterwarnings("default")
@pytest.mark.parametrize("kind", ["TIFF", "PNG", "BMP", "PGM", "JPEG"])
def test_a_damaged_file_is_read_or_refused_in_one_sentence(tmp_path, kind):
    outcomes = set()
    for number in range(25):
        folder = tmp_path / str(number)
        folder.mkdir()
        outcome, said = FUZZ["one_case"](kind, number, folder)
        assert outcome != "traceback", said
        outcomes.add(outcome)
    assert "refused" in outcomes  # else nothing was damaged
