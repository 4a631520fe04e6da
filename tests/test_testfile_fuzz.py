"""Whatever a test file holds, it is understood or refused in one sentence."""

from typing import get_args

import tomli_w
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from dic.errors import TestFileError
from dic.testfile import TestFile, load

SECTIONS = {
    name: list((get_args(section.annotation) or (section.annotation,))[-1].model_fields)
    for name, section in TestFile.model_fields.items()
    if not section.exclude
}
SOUND = {
    "specimen": {"width": "12.51 mm", "thickness": "1.02 mm"},
    "frames": {"source": "frames", "rate": "5 Hz"},
    "load_record": {"source": "machine.csv", "time": "Time", "force": "Force"},
}

numbers = st.integers() | st.floats() | st.sampled_from([10**400, -(2**63), 0.0])
units = st.sampled_from(["mm", "Hz", "%", "mm^9", "kN/mm", "1/s", "", "m" * 50, "**", "(", "µm/m"])
quantities = st.builds(lambda number, unit: f"{number} {unit}", numbers, units)
words = st.sampled_from(["", " ", "auto", "round", "names", "{frame}", "%Y", "{", "/dev/zero", "..", "all"])
scalars = st.none() | numbers | st.booleans() | st.dates() | st.text(max_size=20) | quantities | words
values = st.recursive(
    scalars.filter(lambda value: value is not None),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner, max_size=2),
    max_leaves=6,
)
changes = st.lists(
    st.sampled_from([(name, key) for name, keys in SECTIONS.items() for key in [*keys, None]]).flatmap(
        lambda place: st.tuples(
            st.just(place[0]), st.text(max_size=8) if place[1] is None else st.just(place[1]), values
        )
    ),
    min_size=1,
    max_size=4,
)

quick = settings(
    max_examples=60,
    deadline=None,
    derandomize=True,
    # the folder is the same for all examples, and each overwrites the last one's file
    suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow],
)


def understood_or_refused(path, content):
    path.write_bytes(content)
    try:
        load(path)
    except TestFileError as error:
        said = str(error)
    else:
        return
    assert said.isprintable()
    assert said.endswith((".", "?"))
    assert len(said) < 1500


@quick
@given(changes)
def test_any_value_under_any_key(tmp_path, made):
    content = {name: dict(section) for name, section in SOUND.items()}
    for name, key, value in made:
        content.setdefault(name, {})[key] = value
    understood_or_refused(tmp_path / "test.toml", tomli_w.dumps(content).encode("utf-8", "surrogatepass"))


@quick
@given(st.data())
def test_any_damage_to_the_bytes(tmp_path, data):
    content = bytearray(tomli_w.dumps(SOUND).encode())
    for _ in range(data.draw(st.integers(1, 4))):
        at = data.draw(st.integers(0, len(content)))
        gone = data.draw(st.integers(0, 5))
        content[at : at + gone] = data.draw(st.binary(max_size=6))
    understood_or_refused(tmp_path / "test.toml", bytes(content))
