"""The C that ships with stepring: what is found is what the marks beside the lines say, line by line.

A finding without a mark fails as much as a mark without a finding, with the host's compiler as preprocessor and with
the built-in one.
"""

import functools
import json
import shutil
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import pytest
from tests.marks import CORPUS, DATA, failures, marks

from stepring.pipeline import Options, inspect
from stepring.report.types import Outcome
from stepring.rule import Obligation, load_rules

FILES = sorted(path for path in CORPUS.glob("*/*.c") if path.stem in ("wrong", "right"))
SLOTS = sorted((DATA / "four_slots").glob("*.c"))
FIRMWARES = ("barge_clean", "barge_flawed")
WAYS = [
    pytest.param(False, id="built-in"),
    pytest.param(
        True,
        id="compiler",
        marks=pytest.mark.skipif(shutil.which("cc") is None, reason="this machine has no C compiler named cc"),
    ),
]


@functools.cache
def outcome_of(path: Path, use_compiler: bool) -> Outcome:
    compilers = ("cc",) if use_compiler else ()
    return inspect([path], Options(use_compiler=use_compiler, compilers=compilers))


def assert_marked(path: Path, use_compiler: bool) -> None:
    outcome = outcome_of(path, use_compiler)
    sources = sorted(path.rglob("*.[ch]")) if path.is_dir() else [path]
    expected = marks(sources)
    assert not outcome.notices
    assert outcome.coverage.functions_read == outcome.coverage.functions_total > 0
    surely = failures(outcome, "error", "warning")
    rules = {rule for rule, _, _ in expected}
    assert [finding for finding in surely if finding[0] not in rules] == []
    assert [finding for finding in failures(outcome, "error", "warning", "note") if finding[0] in rules] == expected


@pytest.mark.parametrize("use_compiler", WAYS)
@pytest.mark.parametrize("path", FILES, ids=lambda path: f"{path.parent.name}/{path.stem}")
def test_a_rules_examples(path: Path, use_compiler: bool) -> None:
    assert_marked(path, use_compiler)
    expected = {rule for rule, _, _ in marks([path])}
    assert expected == ({path.parent.name} if path.stem == "wrong" else set())


def test_each_rule_has_examples_and_each_example_a_rule() -> None:
    assert sorted({path.parent.name for path in FILES}) == [rule.id for rule in load_rules()]


@pytest.mark.parametrize("use_compiler", WAYS)
@pytest.mark.parametrize("name", FIRMWARES)
def test_a_whole_firmware_is_found_as_marked(name: str, use_compiler: bool) -> None:
    assert_marked(CORPUS / name, use_compiler)


def test_the_flawed_firmware_has_findings_of_many_rules_and_the_clean_one_none() -> None:
    sources = sorted((CORPUS / "barge_flawed").rglob("*.[ch]"))
    rules = {rule for rule, _, _ in marks(sources)}
    assert rules <= {rule.id for rule in load_rules()}
    assert len(rules) >= 14
    assert marks(sorted((CORPUS / "barge_clean").rglob("*.[ch]"))) == []


@pytest.mark.parametrize("use_compiler", WAYS)
@pytest.mark.parametrize("path", SLOTS, ids=lambda path: path.stem)
def test_four_slots(path: Path, use_compiler: bool) -> None:
    assert_marked(path, use_compiler)
    assert bool(marks([path])) == path.stem.startswith("slip_")


def _of_any_model(item: Obligation) -> Obligation:
    """The compiler says what its data model is; without one the usual model is taken."""
    return item if item.evidence is None else replace(item, evidence=replace(item.evidence, model=""))


@pytest.mark.skipif(shutil.which("cc") is None, reason="this machine has no C compiler named cc")
@pytest.mark.parametrize("name", FIRMWARES)
def test_both_preprocessors_lead_to_the_same_obligations(name: str) -> None:
    one, other = (outcome_of(CORPUS / name, use_compiler) for use_compiler in (False, True))
    assert [_of_any_model(item) for item in one.obligations] == [_of_any_model(item) for item in other.obligations]
    assert one.coverage == other.coverage
    assert [machine.transitions for machine in one.program.machines] == [
        machine.transitions for machine in other.program.machines
    ]


# ---------------------------------------------------------------------------------------------------------- the trade


HARNESS = """
#include <stdio.h>
#include "{file}"
int main(void)
{{
    for (int sample = 1; sample <= 6; sample++) {{
        {put}(100 + sample);
        for (int slot = 0; slot < 4; slot++) {{
            printf("%d ", {slots}[slot]);
        }}
        printf("\\n");
    }}
    return 0;
}}
"""


@pytest.mark.skipif(shutil.which("cc") is None, reason="this machine has no C compiler named cc")
@pytest.mark.parametrize("path", [path for path in SLOTS if path.stem.startswith("ring_")], ids=lambda path: path.stem)
def test_the_fifth_sample_is_stored_in_slot_zero(path: Path, tmp_path: Path) -> None:
    """A ring of four slots by any idiom: samples 1 to 4 fill it, the fifth replaces the oldest (common practice)."""
    outcome = outcome_of(path, False)
    (ring,) = outcome.program.rings
    put = next(index.steps[0].function for index in ring.indices if index.role in ("write", "both"))
    (tmp_path / "harness.c").write_text(HARNESS.format(file=path, put=put, slots=ring.storage))
    subprocess.run(["cc", "-w", "-o", "harness", "harness.c"], cwd=tmp_path, check=True, timeout=60)
    ran = subprocess.run([tmp_path / "harness"], capture_output=True, text=True, check=True, timeout=10)
    rows = [[int(number) for number in line.split()] for line in ran.stdout.splitlines()]
    assert rows == [
        [101, 0, 0, 0],
        [101, 102, 0, 0],
        [101, 102, 103, 0],
        [101, 102, 103, 104],
        [105, 102, 103, 104],
        [105, 106, 103, 104],
    ]


# ---------------------------------------------------------------------------------------------------------- again


def log_of(name: str, jobs: int, target: Path) -> bytes:
    command = [sys.executable, "-m", "stepring", "inspect", name, "--report", "none", "--kind", "fail,open,pass,review"]
    ended = subprocess.run(
        [*command, "--jobs", str(jobs), "--sarif", str(target)], cwd=CORPUS, capture_output=True, check=False
    )
    assert ended.returncode in (0, 1), ended.stderr
    return target.read_bytes()


@pytest.mark.parametrize("name", FIRMWARES)
def test_the_log_is_the_same_with_more_jobs_and_on_another_day(name: str, tmp_path: Path) -> None:
    first = log_of(name, 1, tmp_path / "one.sarif")
    assert len(json.loads(first)["runs"][0]["results"]) > 50
    assert log_of(name, 2, tmp_path / "two.sarif") == first
    assert log_of(name, 1, tmp_path / "three.sarif") == first
