"""The page: complete, self-contained, well formed, and safe with whatever a label holds."""

import base64
import dataclasses
import re
import xml.etree.ElementTree as ET
from html.parser import HTMLParser
from itertools import pairwise

import numpy as np
import pytest
from PIL import Image

from dic.properties.result import ModulusLine
from dic.report import write_report
from dic.store.folder import FIGURES
from dic.store.tables import called, found_in, stated
from dic.uncertainty import budget_of

#: What the tests share is made once, also where workers share the tests.
pytestmark = pytest.mark.xdist_group("page")

# Elements that HTML leaves without an end tag (WHATWG HTML, "Void elements").
VOID = {"meta", "img", "br", "hr", "link", "input", "area", "base", "col", "embed", "source", "track", "wbr"}


class Page(HTMLParser):
    """Reads a page and fails on the first tag that is closed out of order."""

    def __init__(self, text):
        super().__init__()
        self.open, self.elements, self.words = [], [], []
        self.feed(text)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        assert self.open.pop() == tag
        self.words.append(" " if tag in {"td", "th", "dt", "caption"} else "")

    def handle_data(self, data):
        if "style" not in self.open:
            self.words.append(data)

    def all(self, tag):
        return [attrs for name, attrs in self.elements if name == tag]

    @property
    def text(self):
        return " ".join("".join(self.words).split())


@pytest.fixture(scope="module")
def folder(measurement, fields, tmp_path_factory):
    folder = tmp_path_factory.mktemp("result")
    assert write_report(measurement, fields, folder) == folder / "report.html"
    return folder


@pytest.fixture(scope="module")
def page(folder):
    return Page((folder / "report.html").read_text(encoding="utf-8"))


def relabelled(measurement, label):
    specimen = measurement.test.specimen.model_copy(update={"label": label})
    return dataclasses.replace(measurement, test=measurement.test.model_copy(update={"specimen": specimen}))


def pictures_in(page):
    for attrs in page.all("img"):
        head, data = attrs["src"].split(",", 1)
        yield head, base64.b64decode(data, validate=True)


def test_nothing_is_fetched_and_nothing_runs(page, folder):
    for tag, attrs in page.elements:
        assert tag not in {"script", "link", "iframe", "object", "base", "form"}
        assert not [name for name in attrs if name.startswith("on")]
        for key in ("src", "href", "srcset", "poster", "action", "data"):
            assert attrs.get(key, "#").startswith(("#", "data:image/"))
    style = (folder / "report.html").read_text(encoding="utf-8").split("<style>")[1].split("</style>")[0]
    assert "url(" not in style
    assert "@import" not in style


def test_anchors_resolve_and_are_unique(page):
    names = [attrs["id"] for _, attrs in page.elements if "id" in attrs]
    assert len(names) == len(set(names))
    wanted = {attrs["href"].removeprefix("#") for attrs in page.all("a")}
    assert wanted <= set(names)


def test_headings_step_down_one_at_a_time(page):
    levels = [int(tag[1]) for tag, _ in page.elements if re.fullmatch("h[1-6]", tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after <= before + 1 for before, after in pairwise(levels))


def test_page_can_be_read_aloud(page):
    assert page.all("html")[0]["lang"] == "en"
    assert all(attrs["alt"] for attrs in page.all("img"))
    assert all(attrs.get("scope") in {"row", "col"} for attrs in page.all("th"))


def test_every_property_with_its_uncertainties(page, measurement):
    for item in found_in(measurement.properties):
        expanded, standard = stated(item)
        for words in (called(item), item.symbol, expanded, standard, item.method, *item.notes):
            assert words in page.text, words
        for source in item.contributions:
            assert source in page.text
    assert "k = 2" in page.text


def test_the_interval_by_draws_stands_under_its_table(page, measurement, fields, tmp_path):
    assert "Monte Carlo" not in page.text
    known = {
        name: dataclasses.replace(item, interval_95=(69.0e3, 71.5e3), standard_uncertainty=500.0)
        for name, item in measurement.properties.items()
        if name == "youngs_modulus"
    }
    changed = dataclasses.replace(measurement, properties=measurement.properties | known)
    text = Page(write_report(changed, fields, tmp_path).read_text(encoding="utf-8")).text
    # Shown in GPa, to two digits of the expanded uncertainty of 1.0 GPa.
    assert "Monte Carlo 95 % interval: 69.0 to 71.5 GPa" in text


def test_what_is_absent_for_one_reason_stands_on_one_line(page, lost, fields, tmp_path):
    only = page.text[page.text.index("Not determined in this test") :]
    assert re.match(r"Not determined in this test 5 % proof stress \S+.*: the strain never reached", only)
    other = Page(write_report(lost, fields, tmp_path).read_text(encoding="utf-8"))
    [line] = re.findall(r"Young's modulus[^.:]*: no elastic part was found\.", other.text)
    assert re.search("Poisson's ratio .*Shear modulus", line)
    assert other.text.count("no elastic part was found") == 1


def test_what_is_not_included_stands_once(measurement, fields, tmp_path):
    lacking = budget_of({}, "", {}, ("false strain from somewhere",))
    noted = {
        name: dataclasses.replace(item, budget=(*item.budget, *lacking))
        for name, item in measurement.properties.items()
        if name in ("youngs_modulus", "poissons_ratio")
    }
    changed = dataclasses.replace(measurement, properties=measurement.properties | noted)
    text = Page(write_report(changed, fields, tmp_path).read_text(encoding="utf-8")).text
    assert text.count("false strain from somewhere") == 1
    assert "false strain from somewhere: E, ν." in text


def test_no_number_is_parted_from_its_unit(folder, measurement):
    source = (folder / "report.html").read_text(encoding="utf-8")
    for item in found_in(measurement.properties):
        for words in stated(item):
            assert words.replace(" ", "\N{NO-BREAK SPACE}") in source
    assert "strain 400 to 1600\N{NO-BREAK SPACE}µm/m" in source


def test_zero_has_no_sign(measurement, fields, tmp_path):
    straight = dataclasses.replace(measurement.scene, axis_angle_deg=-0.0004)
    other = dataclasses.replace(measurement, scene=straight)
    text = Page(write_report(other, fields, tmp_path).read_text(encoding="utf-8")).text
    assert "Direction of loading 0.00°" in text
    assert "-0.00" not in text


def test_shares_of_the_uncertainty_are_shares_of_the_variance(page):
    # 35 and 98 MPa combine to 104.06 MPa: 11.3 % and 88.7 % of the variance.
    assert re.search(r"section 0\.098 GPa 89 %", page.text)
    assert re.search(r"scatter 0\.035 GPa 11 %", page.text)


def test_every_warning_setting_and_fingerprint(page, measurement):
    for notice in measurement.notices:
        assert notice.text in page.text
        assert notice.code in page.text
    for words in (*measurement.provenance["sha256"].values(), "specimen.width 12.5", "95 px", "5.4 mm"):
        assert words in page.text
    assert measurement.clock.method in page.text
    assert measurement.clock.notes[0] in page.text
    # Twice the clock's standard uncertainty of 4.1 ms.
    assert "3.3700 ± 0.0082 s" in page.text


def test_cautions(page):
    for words in (
        "not a design allowable",
        "accredited",
        "licensed engineer",
        "Bending through the thickness",
    ):
        assert words in page.text


def test_figures_are_files_and_pictures_of_something(page, folder):
    stems = {path.stem for path in (folder / "figures").iterdir()}
    assert {"stress-strain", "elastic-part", "strains-in-time", "transverse-axial"} <= stems
    assert {"modulus-residuals", "clocks", "gauge-on-coupon", "map-a", "map-b", "map-c"} <= stems
    for stem in stems:
        ET.parse(folder / "figures" / f"{stem}.svg")  # noqa: S314  (our own file)
        with Image.open(folder / "figures" / f"{stem}.png") as picture:
            grey = np.asarray(picture.convert("L"))
        # More than a white sheet: at least 1 % of the pixels are dark.
        assert np.mean(grey < 128) > 0.01, stem
    assert {attrs["id"] for attrs in page.all("figure")} == stems
    assert len(list(pictures_in(page))) == len(stems)


def test_moments_are_explained(page):
    # The stress passes 250 MPa between frames 34 and 35, and is largest in the last frame before fracture.
    for words in ("middle of the modulus window", "proof stress Rp0.2", "largest force"):
        assert words in page.text
    assert "Frame 66 (cam_00066.tif)" in page.text


HOSTILE = (
    "<script>alert(1)</script> ]]>&--><!-- $\\frac$ {{ 7 * 7 }} \x07\x0b"
    "試験片 № 5 \"><img src=x onerror='alert(1)'>" + "very-long-" * 30
)


def test_a_hostile_label_stays_text(measurement, fields, tmp_path):
    write_report(relabelled(measurement, HOSTILE), fields, tmp_path)
    page = Page((tmp_path / "report.html").read_text(encoding="utf-8"))
    assert page.all("script") == []
    assert len(page.all("img")) == len(list((tmp_path / "figures").glob("*.svg")))
    assert not [attrs for _, attrs in page.elements if "onerror" in attrs]
    assert " ".join(HOSTILE.split()) in page.text
    for head, data in pictures_in(page):
        if "svg" in head:
            assert b"<script" not in data
            root = ET.fromstring(data)  # noqa: S314  (our own file, and it has to be well formed)
            assert {part.tag.rpartition("}")[2] for part in root.iter()}.isdisjoint({"script", "img"})


def test_the_same_input_gives_the_same_bytes(measurement, fields, folder, tmp_path):
    write_report(measurement, fields, tmp_path)
    for path in folder.rglob("*.*"):
        assert path.read_bytes() == (tmp_path / path.relative_to(folder)).read_bytes(), path.name


def test_without_a_modulus_the_rest_still_stands(measurement, fields, tmp_path):
    nan = float("nan")
    lost = {
        name: dataclasses.replace(item, value=nan, standard_uncertainty=nan, contributions={})
        for name, item in measurement.properties.items()
    }
    bare = dataclasses.replace(
        measurement, line=ModulusLine(nan, nan, nan, nan), properties=lost, notices=(), provenance={}
    )
    (tmp_path / "figures").mkdir()
    for name in ("map-b.svg", "elastic-part.png", "own.png"):
        (tmp_path / "figures" / name).touch()
    page = Page(write_report(bare, fields, tmp_path).read_text(encoding="utf-8"))
    assert "Not determined in this test" in page.text
    assert "Nothing unusual was met" in page.text
    assert "date not recorded" in page.text
    stems = {path.stem for path in (tmp_path / "figures").iterdir()}
    # Figures of an earlier evaluation that do not belong to this one are gone; the user's own picture stays.
    assert stems == {attrs["id"] for attrs in page.all("figure")} | {"own"}
    assert not {"map-b", "elastic-part"} & stems


def test_without_a_measured_frame_there_is_still_a_page(measurement, fields, tmp_path):
    nothing = np.full(len(measurement.history), np.nan)
    curve = dataclasses.replace(measurement.curve, axial=nothing, transverse=nothing)
    history = dataclasses.replace(measurement.history, axial=nothing, transverse=nothing, shear=nothing)
    nan = float("nan")
    blind = dataclasses.replace(
        measurement, curve=curve, history=history, properties={}, line=ModulusLine(nan, nan, nan, nan)
    )
    page = Page(write_report(blind, fields, tmp_path).read_text(encoding="utf-8"))
    assert "No frame that deserves a map was measured" in page.text


def test_compression_is_called_so(pressed, fields, page, tmp_path):
    text = write_report(pressed, fields, tmp_path).read_text(encoding="utf-8")
    other = Page(text)
    assert "compression test by camera" in other.text
    assert "Compressive strength" in other.text
    for word in ("tension", "tensile", "Tensile", "pulled", "to the right"):
        assert word not in other.text, word
    assert "tension test by camera" in page.text
    assert "Tensile strength" in page.text
    [alt] = [attrs["alt"] for attrs in other.all("img") if attrs["alt"].startswith("Curve of stress")]
    assert re.search(r"reaches -\d{3}", alt)


def test_every_figure_is_known_to_the_result_folder(page, folder):
    """Else a later run could not take it away."""
    assert {path.stem for path in (folder / "figures").iterdir()} <= set(FIGURES)
