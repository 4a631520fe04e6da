"""``tauten inspect`` as a person, or a program, meets it."""

import json

import pytest


@pytest.fixture
def virtual_test(copy):
    return copy.parent


def test_a_sound_test(tauten, virtual_test):
    before = set(virtual_test.rglob("*"))
    found = tauten("inspect", "test.toml", cwd=virtual_test)
    assert found.returncode == 0, found.stderr
    assert "22, from cam_00001.tif to cam_00022.tif" in found.stdout
    assert "Crosshead (mm)" in found.stdout
    assert "tauten run test.toml" in found.stdout
    assert set(virtual_test.rglob("*")) == before


def test_json_is_all_there_is_on_stdout_even_if_an_input_is_at_fault(tauten, virtual_test):
    text = (virtual_test / "test.toml").read_text()
    (virtual_test / "other.toml").write_text(text.replace("machine.csv", "none.csv"))
    found = tauten("inspect", "other.toml", "--json", cwd=virtual_test)
    assert found.returncode == 2
    said = json.loads(found.stdout)
    assert said["record"] is None
    assert said["frames"]["count"] == 22
    assert "none.csv" in said["errors"][0]
    assert found.stderr == f"tauten: {said['errors'][0]}\n"
