"""The documents say what is so: the map of modules, the commands, the rules."""

import re
import tomllib
from pathlib import Path

import click
import pytest

from module_map import DOCUMENT, TOP, with_map
from stepring.cli import commands

README = (TOP / "README.md").read_text(encoding="utf-8")


def test_the_map_of_modules_is_up_to_date() -> None:
    text = DOCUMENT.read_text(encoding="utf-8")
    assert text == with_map(text), "run `python tests/module_map.py`"


def test_the_first_two_blocks_of_the_readme_are_commands_of_one_line() -> None:
    blocks = re.findall(r"^```sh\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
    assert all(block.startswith("python3 -m venv .venv && ") and block.count("\n") == 1 for block in blocks[:2])
    assert "stepring inspect corpus/barge_flawed" in blocks[0]
    assert "pytest" in blocks[1]


@pytest.mark.parametrize("document", ["README.md", "DEVELOPERS.md"])
def test_options_that_a_document_names_exist(document: str) -> None:
    text = (TOP / document).read_text(encoding="utf-8")
    known = {option for command in commands.commands.values() for one in command.params for option in one.opts}
    named = set(re.findall(r"`(--[a-z-]+)", text))
    assert named <= known
    used = set(re.findall(r"stepring (\w+)", " ".join(re.findall(r"`stepring [^`]*`|^\$ .*$", text, re.MULTILINE))))
    assert used <= set(commands.commands)
    assert all(isinstance(command, click.Command) for command in commands.commands.values())


def test_each_registered_rule_has_a_page_and_examples() -> None:
    project = tomllib.loads((TOP / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    for identity in project["entry-points"]["stepring.rules"]:
        page = TOP / "rules" / "stepring_rules" / "pages" / f"{identity}.md"
        assert page.read_text(encoding="utf-8").startswith(f"# {identity}: ")
        assert {path.name for path in (TOP / "corpus" / identity).iterdir()} >= {"right.c", "wrong.c"}


def test_links_between_documents_lead_somewhere() -> None:
    for document in ("README.md", "DEVELOPERS.md"):
        for target in re.findall(r"\]\(([^)#:]+)\)", (TOP / document).read_text(encoding="utf-8")):
            assert (TOP / Path(target)).exists(), f"{document} links to {target}"
