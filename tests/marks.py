"""What tests of whole inspections share: the marks in C files, findings as comparable data, and small C programs.

``/* finding: RB01 */`` stands on the line that a finding should name, with the ids of its rules.
"""

import re
import textwrap
from collections.abc import Iterable, Mapping
from pathlib import Path

from stepring.pipeline import Options, inspect
from stepring.report.types import Outcome
from stepring.shapes.types import Machine

ROOT = Path(__file__).parents[1]
CORPUS = ROOT / "corpus"
DATA = ROOT / "tests" / "data"
_MARK = re.compile(r"/\* finding: ([A-Z0-9 ]+) \*/")
Finding = tuple[str, str, int]


def marks(paths: Iterable[Path]) -> list[Finding]:
    """(rule, file name, line) for each mark in the files, in order."""
    return sorted(
        (rule, path.name, number)
        for path in paths
        for number, line in enumerate(path.read_text(encoding="utf-8").splitlines(), 1)
        for found in _MARK.finditer(line)
        for rule in found[1].split()
    )


def failures(outcome: Outcome, *levels: str) -> list[Finding]:
    """(rule, file name, line) for each failure of one of the levels, in order."""
    return sorted(
        (item.rule, Path(item.where.file).name, item.where.line)
        for item in outcome.obligations
        if item.kind == "fail" and item.level in levels
    )


def inspect_texts(folder: Path, files: Mapping[str, str], options: Options | None = None) -> Outcome:
    """Write C files into a folder and inspect it; whatever was noticed fails the test."""
    for name, text in files.items():
        target = folder / name
        target.parent.mkdir(parents=True, exist_ok=True)
        target.write_text(textwrap.dedent(text), encoding="utf-8")
    outcome = inspect([folder], options or Options(use_compiler=False))
    assert not outcome.notices, outcome.notices
    return outcome


def machines_in(folder: Path, text: str, **more: str) -> list[Machine]:
    """The machines of a program of one file, ``feeder.c``, and possibly others (``shore="…"`` is ``shore.c``)."""
    files = {"feeder.c": text, **{f"{name}.c": other for name, other in more.items()}}
    return list(inspect_texts(folder, files).program.machines)


def machine_in(folder: Path, text: str, **more: str) -> Machine:
    """The one machine of a program."""
    found = machines_in(folder, text, **more)
    assert len(found) == 1, [machine.variable for machine in found]
    return found[0]


def steps(machine: Machine) -> set[tuple[str, str]]:
    """The (source, target) pairs of a machine."""
    return {(step.source, step.target) for step in machine.transitions}
