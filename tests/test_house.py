"""The house's own rules: packaging, direction of imports, what may not stand in it."""

import ast
import re
import tomllib
from pathlib import Path
from typing import get_args

import pytest

ROOT = Path(__file__).parent.parent


def test_every_package_is_listed_for_installation():
    said = set(tomllib.loads((ROOT / "pyproject.toml").read_text())["tool"]["setuptools"]["packages"])
    found = {str(p.parent.relative_to(ROOT)).replace("/", ".") for r in ("dic", "cli", "synthetic_images")
             for p in (ROOT / r).rglob("__init__.py")}  # fmt: skip
    assert {name.replace("cli", "dic_cli", 1) if name == "cli" else name for name in found} == said


#: Stages in the order of the measurement; none may import a later one.
STAGES = ["frames", "pattern", "correlation", "strain", "sync", "properties", "report"]


def imports(path):
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.ImportFrom) and node.module:
            yield node.module
        elif isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)


@pytest.mark.parametrize("stage", STAGES)
def test_no_stage_reaches_back(stage):
    later = STAGES[STAGES.index(stage) + 1 :]
    for path in (ROOT / "dic" / stage).glob("*.py"):
        for name in imports(path):
            assert not any(name.startswith(f"dic.{other}") for other in later), f"{path.name} imports {name}"


def test_dic_knows_neither_command_line_nor_truth():
    for path in (ROOT / "dic").rglob("*.py"):
        assert not any(name.startswith(("dic_cli", "synthetic_images")) for name in imports(path)), path


def test_the_readmes_examples_are_valid(tmp_path):
    from dic.testfile import load
    from synthetic_images import load_scenario

    readme = (ROOT / "README.md").read_text()
    test_file, scenario = re.findall(r"```toml\n(.*?)```", readme, re.DOTALL)
    for name, text in (("test.toml", test_file), ("scenario.toml", scenario)):
        (tmp_path / name).write_text(text)
    assert load(tmp_path / "test.toml").specimen.width == 12.51
    assert load_scenario(tmp_path / "scenario.toml").seed == 1


def test_the_readmes_keys_are_all_there():
    """As `key` in the table, or set in the example: a word of the running text does not count."""
    from dic.testfile import TestFile

    readme = (ROOT / "README.md").read_text()
    example = tomllib.loads(re.search(r"```toml\n(.*?)```", readme, re.DOTALL)[1])
    named = set(re.findall(r"`(\w+)`", readme))
    for name, section in TestFile.model_fields.items():
        if section.exclude:
            continue
        assert name in example or f"`{name}`" in readme, name
        # A table of tables has the keys of each.
        model = (get_args(section.annotation) or (section.annotation,))[-1]
        for key in (field.alias or key for key, field in model.model_fields.items()):
            assert key in example.get(name, {}) or key in named, f"{name}.{key} is not in the README"


def test_every_benchmark_is_named_for_developers():
    source = (ROOT / "tests/benchmarks/__main__.py").read_text()
    [names] = [ast.literal_eval(node.value) for node in ast.parse(source).body
               if isinstance(node, ast.Assign) and node.targets[0].id == "NAMES"]  # fmt: skip
    command = (ROOT / "DEVELOPERS.md").read_text().split("tests/benchmarks accuracy")[1].split("```")[0]
    assert {name for name in names[1:] if not re.search(rf"\b{name}\b", command)} == set()
