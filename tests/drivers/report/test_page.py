"""Pages: structure, escaping, nothing from outside, what is needed to make them again."""

import base64
import dataclasses
import hashlib
import itertools
import json
import math
import re
import shlex
from datetime import UTC, datetime
from html.parser import HTMLParser
from xml.etree import ElementTree

import numpy as np
import pytest
from matplotlib.figure import Figure

from drivers.cli import main
from drivers.report.axes import draw_line, small_figure
from drivers.report.page import File, Origin, Page, PageTable, html, picture
from drivers.report.steps_page import steps_page
from drivers.studies.steps import Rule, steps
from matlib.card import read_card
from matlib.version import __version__
from tests.drivers.report.conftest import COMMANDS, HOSTILE
from tests.drivers.studies.step_cases import path_of, segment

VOID = {"meta", "img", "br", "link", "input", "hr"}
INPUTS = {
    "check": ["a.card.toml"],
    "check-many": ["a.card.toml", "b.card.toml"],
    "check-library": [f"library/{name}.card.toml" for name in ("0", "1", "2", "bad")],
    "convert": ["a.card.toml"],
    "drive": ["a.card.toml", "p.path.toml"],
    "compare": ["a.card.toml", "b.card.toml", "p.path.toml", "oven.path.toml", "oven.csv"],
    "steps": ["a.card.toml", "p.path.toml"],
    "record": ["a.card.toml", "p.path.toml"],
    "verify": ["b.card.toml", "a.baseline.json"],
    "audit": ["python.routine.toml", "laboratory.card.toml", "routine.py"],
    "sweep": [f"library/{file}" for file in ("s.sweep.toml", "0.card.toml", "1.card.toml", "../p.path.toml")],
}
OUTPUTS = {"convert": ["fit.card.toml"], "drive": ["h.csv"], "record": ["a.baseline.json"]}
every_command = pytest.mark.parametrize("name", COMMANDS)


class Outline(HTMLParser):
    """The elements of a page in order, each with its attributes and its text."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.found: list[tuple[str, dict[str, str], list[str]]] = []
        self.open: list[tuple[str, list[str]]] = []
        self.feed(text)
        assert not self.open, f"not closed: {self.open}"

    def handle_starttag(self, tag, attrs):
        texts: list[str] = []
        self.found.append((tag, {key: value or "" for key, value in attrs}, texts))
        if tag not in VOID:
            self.open.append((tag, texts))

    def handle_endtag(self, tag):
        assert self.open.pop()[0] == tag

    def handle_data(self, data):
        for _, texts in self.open:
            texts.append(data)

    def all(self, tag):
        return [(attributes, "".join(texts).strip()) for name, attributes, texts in self.found if name == tag]


@every_command
def test_the_first_heading_is_the_verdict(page, pages, name):
    headings = [found for found in Outline(page(name)).found if found[0] in ("h1", "h2", "h3")]
    text = "".join(headings[0][2])
    verdict = json.loads(pages[name].with_suffix(".json").read_text())["verdict"]
    word = (
        "Done" if name in ("convert", "drive", "record") else {"holds": "Holds", "falls short": "Falls short"}[verdict]
    )
    assert headings[0][0] == "h1"
    assert text.startswith(f"{word}: ")
    assert len(text) > len(word) + 10


@every_command
def test_headings_leave_no_level_out(page, name):
    levels = [int(tag[1]) for tag, _, _ in Outline(page(name)).found if tag in ("h1", "h2", "h3", "h4")]
    assert levels.count(1) == 1
    assert all(after <= before + 1 for before, after in itertools.pairwise(levels))


@every_command
def test_every_table_has_headed_columns_and_rows(page, name):
    text = page(name)
    tables = re.findall(r"<table.*?</table>", text, re.S)
    assert tables
    for table in tables:
        headers = re.findall(r'<th scope="col"[^>]*>(.*?)</th>', table)
        rows = re.findall(r"<tr>(.*?)</tr>", table.partition("<tbody>")[2])
        assert all(headers)
        for row in rows:
            assert row.startswith('<th scope="row"')
            assert len(re.findall("<t[hd]", row)) == len(headers)


@every_command
def test_every_picture_has_its_finding_for_who_cannot_see_it(page, name):
    outline = Outline(page(name))
    pictures, captions = outline.all("img"), outline.all("figcaption")
    assert pictures
    assert len(captions) == len(pictures)
    for (attributes, _), (_, caption) in zip(pictures, captions, strict=True):
        title, _, finding = attributes["alt"].removeprefix("Plot. ").partition(": ")
        assert len(finding) > 4
        assert finding.split()[-1] in caption
        assert title.split()[0] in caption


@every_command
def test_every_axis_has_a_quantity_with_its_unit(page, name):
    for svg in svgs(page(name)):
        labels = {key: element for key in ("matplotlib.axis_1", "matplotlib.axis_2") for element in svg.iter() if
                  element.get("id") == key}  # fmt: skip
        assert len(labels) == 2
        texts = ["".join(element.itertext()) for element in svg.iter() if element.tag.endswith("}text")]
        with_unit = [text for text in texts if re.search(r"\[[^\]]+\]", text)]
        assert with_unit, texts


def svgs(text: str) -> list[ElementTree.Element]:
    found = re.findall(r'src="data:image/svg\+xml;base64,([^"]+)"', text)
    return [ElementTree.fromstring(base64.b64decode(data)) for data in found]


@every_command
def test_nothing_comes_from_outside_and_nothing_runs(page, name):
    text = page(name)
    outline = Outline(text)
    assert {tag for tag, _, _ in outline.found}.isdisjoint({"script", "link", "iframe", "object", "a", "form"})
    for _, attributes, _ in outline.found:
        assert not any(key.startswith("on") for key in attributes)
        assert "href" not in attributes
        assert attributes.get("src", "data:image/svg+xml;base64,").startswith("data:image/svg+xml;base64,")
    assert "http:" not in text
    assert "https:" not in text
    assert "url(" not in text
    for svg in svgs(text):
        for element in svg.iter():
            assert not element.tag.endswith(("}script", "}image", "}foreignObject"))
            for key, value in element.attrib.items():
                assert not (key.endswith("href") and not value.startswith("#")), (key, value)
                assert "url(http" not in value


@pytest.mark.parametrize("name", [name for name in COMMANDS if name not in ("check-library", "sweep", "audit")])
def test_a_hostile_name_is_text(page, name):
    text = page(name)
    shown = "".join("".join(texts) for tag, _, texts in Outline(text).found if tag in ("h1", "p"))
    assert HOSTILE.replace("\\\\", "\\") in shown
    assert "<script" not in text
    assert "{{ 7*7 }}" in text


def test_a_fault_that_quotes_markup_is_text(page):
    assert "&lt;i&gt;warm&lt;/i&gt;" in page("check-library")
    assert "<i>" not in page("check-library")


@every_command
def test_every_file_that_went_in_or_came_out_is_there_with_its_digest(page, pages, name):
    text = page(name)
    for file in [*INPUTS[name], *OUTPUTS.get(name, [])]:
        digest = hashlib.sha256((pages[name].parent / file).read_bytes()).hexdigest()
        assert re.search(rf"<li>{re.escape(file)} \([^)]*\)<code>{digest}</code>", text), file
    assert len(re.findall("<li>", text)) == len(INPUTS[name]) + len(OUTPUTS.get(name, []))


@every_command
def test_the_command_can_be_run_again_and_versions_are_known(page, pages, name):
    text = Outline(page(name)).all("pre")[0][1]
    expected = ["cardproof", *COMMANDS[name], "--report", f"{name}.html", "--json", f"{name}.json"]
    assert shlex.split(text) == expected
    assert f"cardproof {__version__}, Python " in page(name)
    assert str(pages[name].parent) not in page(name)


def test_the_caution_is_on_every_page(page):
    for name in COMMANDS:
        assert "not a part" in Outline(page(name)).all("footer")[0][1]


def test_the_same_command_makes_the_same_page_but_for_its_time(pages, monkeypatch):
    monkeypatch.chdir(pages["check"].parent)
    again = [*COMMANDS["compare"], "--report", "compare.html", "--json", "compare.json"]
    before = pages["compare"].read_text(encoding="utf-8")
    assert main(again) == 1
    after = pages["compare"].read_text(encoding="utf-8")
    made = re.compile(r"Made \d{4}-\d\d-\d\d \d\d:\d\d UTC")
    assert made.search(before)
    assert made.sub("", after) == made.sub("", before)


def test_a_converted_card_that_takes_the_place_of_the_old_one_leaves_the_digest_of_the_old(tmp_path, monkeypatch):
    from tests.drivers.files import CARD

    monkeypatch.chdir(tmp_path)
    (tmp_path / "x.card.toml").write_text(CARD)
    assert main(["convert", "x.card.toml", "--to", "vft", "-o", "x.card.toml", "--report", "r.html"]) == 0
    text = (tmp_path / "r.html").read_text()
    assert hashlib.sha256(CARD.encode()).hexdigest() in text
    assert hashlib.sha256((tmp_path / "x.card.toml").read_bytes()).hexdigest() in text


@pytest.mark.parametrize(("file", "said"), [("page.pdf", ".html"), ("nowhere/page.html", "no folder 'nowhere'")])
def test_a_page_that_cannot_be_written_is_refused_before_any_work(tmp_path, monkeypatch, capsys, file, said):
    monkeypatch.chdir(tmp_path)
    status = main(["check", "missing.card.toml", "--report", file])
    found = capsys.readouterr()
    assert (status, found.out) == (2, "")
    assert said in found.err
    assert "missing.card.toml" not in found.err


def test_a_bare_page_has_verdict_caution_and_time():
    page = Page(title="nothing", holds=None, verdict="made", settings={"Seed": "1"})
    text = html(page, made=datetime(2030, 1, 2, 3, 4, tzinfo=UTC))
    assert "Done:</strong> made" in text
    assert "Seed: 1. " in text
    assert "Made 2030-01-02 03:04 UTC." in text
    assert "<table" not in text


def test_a_library_is_summed_up_before_it_is_drawn(page):
    headings = [text for _, text in Outline(page("check-library")).all("h2")]
    assert headings == ["What decides it", "Detail", "Pictures", "To make it again"]
    assert [text for _, text in Outline(page("check")).all("h2")][1:3] == ["Pictures", "Detail"]


def test_increments_without_a_finite_response_are_told_in_words(pages):
    rule = Rule(shift_rule="integrated", recursion="exponential")
    card = read_card(str(pages["steps"].parent / "a.card.toml"))
    pull = segment("uniaxial strain", durations=[60.0], temperatures=[350.0])
    found = steps(card.material(), path_of(pull), tolerance=1e-2, rule=rule, rules=[rule])
    own = dataclasses.replace(found.own, value=math.inf, relative=math.inf)
    lost = steps_page(dataclasses.replace(found, own=own, blame=None), card, Origin(command=""))
    assert lost.facts[0].value == "no finite response"
    assert lost.facts[0].against == "in segment pull; tolerance 1 %"
    assert [p.title for p in lost.pictures] == ["Error against increments, exponential"]
    assert "inf " not in html(lost)


def test_cells_commands_and_files_are_escaped():
    table = PageTable(caption="<b>", headers=["<i>"], rows=[["<u>"]])
    origin = Origin(command="<s>", inputs=[File(file="<p>", what="<q>", digest="0")])
    text = html(Page(title="<t>", holds=True, verdict="<v>", lead=["<l>"], tables=[table], origin=origin))
    for name in "biuspqtvl":
        assert f"&lt;{name}&gt;" in text


def test_a_picture_is_the_same_bytes_each_time():
    def made() -> str:
        figure, axes = small_figure()
        axes.plot([0.0, 1.0], [1.0, 0.0], label="line")
        axes.axvspan(0.2, 0.4, hatch="//")
        return picture(figure, "title", "finding").data

    assert made() == made()


def test_a_line_of_many_points_keeps_its_ends_and_its_peaks():
    rng = np.random.default_rng(0)
    y = rng.normal(size=100_000)
    y[54_321] = 50.0
    axes = Figure().add_subplot()
    draw_line(axes, np.arange(y.size, dtype=float), y)
    x, drawn = (np.asarray(part) for part in axes.lines[0].get_data())
    assert drawn.size <= 4001
    assert (drawn.max(), x[drawn.argmax()]) == (50.0, 54_321.0)
    assert drawn.min() == y.min()
    assert (x[0], x[-1]) == (0.0, y.size - 1.0)
    assert np.all(np.diff(x) > 0.0)


def test_a_page_is_immutable():
    with pytest.raises(dataclasses.FrozenInstanceError):
        Page(title="a", holds=True, verdict="b").title = "c"  # type: ignore[misc]
