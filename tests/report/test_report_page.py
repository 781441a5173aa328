"""The inventory as a page and as Markdown: complete, self-contained, and true to the machine."""

import re
from html.parser import HTMLParser
from pathlib import Path
from urllib.parse import unquote
from xml.etree import ElementTree

import pytest
from tests.marks import CORPUS, inspect_texts

from stepring.cli import main
from stepring.pipeline import Options, inspect
from stepring.report.diagram import machine_svg
from stepring.report.inventory_markdown import inventory_markdown
from stepring.report.page import inventory_page
from stepring.report.types import Outcome
from stepring.shapes.types import Machine

SVG = "{http://www.w3.org/2000/svg}"
VOID = {"meta", "br"}


class Page(HTMLParser):
    """Collects links, ids and loaded things; fails on tags that do not match."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.links: list[str] = []
        self.ids: list[str] = []
        self.loaded: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        given = dict(attrs)
        if tag not in VOID:
            self.open.append(tag)
        if tag == "a":
            self.links.append(given["href"] or "")
        if given.get("id"):
            self.ids.append(given["id"] or "")
        if tag in ("script", "img", "link", "iframe", "object") or "src" in given:
            self.loaded.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs)
        if tag not in VOID:
            self.open.pop()

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag


@pytest.fixture(scope="module")
def barge() -> Outcome:
    return inspect([CORPUS / "barge_flawed"], Options(use_compiler=False))


def read(text: str) -> Page:
    page = Page()
    page.feed(text)
    assert page.open == []
    return page


def test_the_page_stands_alone(barge: Outcome) -> None:
    text = inventory_page(barge)
    page = read(text)
    assert page.loaded == []
    assert not re.search(r"url\(|@import|https?://(?!www\.w3\.org/2000/svg)", text)


def test_each_link_leads_to_a_line_or_to_a_place_in_the_page(barge: Outcome, tmp_path: Path) -> None:
    page = read(inventory_page(barge, tmp_path / "audit" / "page.html"))
    assert len(set(page.ids)) == len(page.ids)
    for link in page.links:
        path, _, mark = link.partition("#")
        if not path:
            assert mark in page.ids
            continue
        file = tmp_path / "audit" / unquote(path)
        assert 1 <= int(mark.removeprefix("L")) <= len(Path(file).resolve().read_text().splitlines())


def test_the_page_shows_every_state_and_transition(barge: Outcome) -> None:
    text = inventory_page(barge)
    for machine in barge.program.machines:
        start = text.index(f">State machine {machine.variable}</h2>")
        section = text[start : text.index("</section>", start)]
        assert all(state.name in section for state in machine.states)
        assert section.count("<tr><th>") + section.count('<tr class="marked"><th>') >= len(machine.transitions)
        drawing = ElementTree.fromstring(section[section.index("<svg") : section.index("</svg>") + len("</svg>")])
        names = {node.text for node in drawing.iter(f"{SVG}text") if node.get("class") == "name"}
        assert names == {state.name for state in machine.states}


def test_states_with_a_finding_are_marked_in_words(barge: Outcome) -> None:
    text = inventory_page(barge)
    assert "never left" in text and "never entered" in text
    assert text.count('class="state marked"') >= 4


def ring_of_states(folder: Path, count: int) -> Machine:
    names = [f"PEN_{number}" for number in range(count)]
    cases = "".join(
        f"case {name}: if (c == 1) {{ pen = {names[(number + 1) % count]}; }} else if (c == 2) {{ "
        f"pen = {names[number * 7 % count]}; }} break;\n"
        for number, name in enumerate(names)
    )
    text = (
        f"enum pen {{ {', '.join(names)} }};\nstatic enum pen pen;\nvoid poll(int c) {{ switch (pen) {{ {cases} }} }}\n"
    )
    (machine,) = inspect_texts(folder, {"pen.c": text}).program.machines
    return machine


@pytest.mark.parametrize("count", [5, 40])
def test_a_drawing_is_legible_at_any_size(tmp_path: Path, count: int) -> None:
    drawing = ElementTree.fromstring(machine_svg(ring_of_states(tmp_path, count)))
    assert float(drawing.get("width", "0")) <= 1300
    boxes = [
        tuple(float(node.get(name, "0")) for name in ("x", "y", "width", "height"))
        for node in drawing.iter(f"{SVG}rect")
        if node.get("class") == "state"
    ]
    assert len(boxes) == count
    for number, (x, y, width, height) in enumerate(boxes):
        assert all(
            x + width <= other[0] or other[0] + other[2] <= x or y + height <= other[1] or other[1] + other[3] <= y
            for other in boxes[:number]
        )
    for node in drawing.iter(f"{SVG}text"):
        assert float(node.get("x", "nan")) == float(node.get("x", "nan"))


def test_markdown_holds_the_same_tables(barge: Outcome) -> None:
    text = inventory_markdown(barge)
    for machine in barge.program.machines:
        assert f"## State machine {machine.variable}".replace("_", "\\_") in text
        for state in machine.states:
            assert state.name.replace("_", "\\_") in text
    rows = [line for line in text.splitlines() if line.startswith("|")]
    assert all(len(re.split(r"(?<!\\)\|", row)) >= 4 for row in rows)


def test_names_from_the_source_cannot_break_the_page(tmp_path: Path) -> None:
    text = "enum s { A, B }; static enum s s;\nextern int is(const char *);\n"
    text += 'void f(void) { switch (s) { case A: if (is("<b>&\\"|`")) { s = B; } break; case B: s = A; break; } }\n'
    outcome = inspect_texts(tmp_path, {"a.c": text})
    read(inventory_page(outcome))
    assert "<b>&" not in inventory_page(outcome)


@pytest.mark.parametrize("option", ["--html", "--markdown"])
def test_the_command_writes_it(tmp_path: Path, option: str) -> None:
    target = tmp_path / "page"
    given = ["inventory", "--no-compiler", "--report", "none", option, str(target), str(CORPUS / "SM04" / "wrong.c")]
    assert main(given) == 0
    assert "pump" in target.read_text(encoding="utf-8")


@pytest.mark.parametrize("option", ["--html", "--markdown"])
def test_a_page_that_cannot_be_written_is_said(tmp_path: Path, option: str, capsys: pytest.CaptureFixture[str]) -> None:
    target = tmp_path / "no" / "folder" / "page"
    given = ["inventory", "--no-compiler", "--report", "none", option, str(target), str(CORPUS / "SM04" / "wrong.c")]
    assert main(given) == 2
    assert "could not be written" in capsys.readouterr().err
