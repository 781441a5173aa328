"""Witnesses, assumptions and the ledger in the log and in the printed report."""

import json
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from log_checks import assert_sound
from report_samples import barge, spot
from test_report_readable import printed

from stepring.paths.witness import Ending, Made, OutsideValue, Reference, StartValue, Witness, WitnessCall
from stepring.paths.witness_json import witness_from_json
from stepring.pipeline import Options, asked
from stepring.report.lines import report_lines
from stepring.report.sarif import sarif_log
from stepring.report.serialise import to_bytes
from stepring.report.types import Inspection, Outcome
from stepring.report.words import ledger
from stepring.rule import Obligation

EVERY_KIND = ("fail", "open", "pass", "review")


def with_evidence(root: Path) -> Outcome:
    """The sample outcome; its overflow has a witness with everything that one can have."""
    outcome = barge(root)
    overflow = outcome.obligations[0]
    queue = str(root / "shore commands#1.c")
    evidence = Witness(
        "ILP32",
        (Made("q", f"struct queue@{queue}:1:8", 1), Made("bytes", "unsigned char", 12)),
        (StartValue("q", ".head", 255), StartValue(f"{queue}:wanted", "[0]", Reference("bytes", 2))),
        (WitnessCall("queue_put", (Reference("q"), 7), (OutsideValue("shore_byte", 2**60),)),),
        Ending("value", spot(queue, 5, "q->head++"), None, f"{queue}:wanted[0]", "3", "0 to 2"),
        (("head", "q", ".head"),),
        ("the caller's queue is its own",),
    )
    changed = replace(overflow, evidence=evidence, initial=(), assumed=("one caller at a time",))
    return replace(outcome, obligations=(changed, *outcome.obligations[1:]))


def results(log: Mapping[str, Any]) -> list[Any]:
    return list(log["runs"][0]["results"])


def test_a_log_with_a_witness_is_sound_and_the_witness_comes_back(tmp_path: Path) -> None:
    outcome = with_evidence(tmp_path)
    log: Any = json.loads(to_bytes(sarif_log(outcome, EVERY_KIND)))
    assert_sound(log, tmp_path)
    found = next(one for one in results(log) if "witness" in one.get("properties", {}))
    assert witness_from_json(found["properties"]["witness"], str(tmp_path)) == outcome.obligations[0].evidence
    assert found["properties"]["assumed"] == ["one caller at a time.", "the caller's queue is its own."]
    assert found["codeFlows"][0]["threadFlows"][0]["initialState"] == {
        "q.head": {"text": "255"},
        "wanted[0]": {"text": "&bytes\\[2\\]"},
    }


def test_a_log_holds_no_place_of_the_machine(tmp_path: Path) -> None:
    data = to_bytes(sarif_log(with_evidence(tmp_path), EVERY_KIND))
    assert str(tmp_path).encode() not in data


def test_undecodable_names_in_a_witness_do_not_break_the_log(tmp_path: Path) -> None:
    outcome = with_evidence(tmp_path)
    evidence = outcome.obligations[0].evidence
    assert evidence is not None
    odd = replace(evidence, watched=(("h\udcffad", "q", ".head"),), assumed=("caf\udce9",))
    changed = replace(outcome.obligations[0], evidence=odd)
    log: Any = json.loads(to_bytes(sarif_log(replace(outcome, obligations=(changed,)))))
    assert_sound(log, tmp_path)


def test_the_log_states_what_all_verdicts_rest_on_and_what_was_asked(tmp_path: Path) -> None:
    outcome = replace(
        with_evidence(tmp_path), inspection=Inspection("fw", ("feed",), "compile_commands.json", "IP16", ("cc",), False)
    )
    properties = sarif_log(outcome)["runs"][0]["properties"]  # type: ignore[index, call-overload]
    said: Any = properties
    assert len(said["assumptions"]) == 5
    assert any("ILP32" in sentence for sentence in said["assumptions"])
    assert said["inspection"] == {
        "folder": "fw",
        "paths": ["feed"],
        "compileCommands": "compile_commands.json",
        "dataModel": "IP16",
        "compilers": ["cc"],
        "useCompiler": False,
    }


def test_what_was_asked_is_written_relative_to_the_root(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "fw" / "src").mkdir(parents=True)
    monkeypatch.chdir(tmp_path / "fw")
    options = Options(Path("build/compile_commands.json"), "LP64", 2, ("/opt/tools/bin/cc",))
    got = asked((Path("src"), tmp_path / "fw"), options, tmp_path)
    assert got == Inspection(".", ("fw/src", "fw"), "fw/build/compile_commands.json", "LP64", ("cc",), True)
    assert asked((), Options(), tmp_path) == Inspection("fw")


# ------------------------------------------------------------------------------------------------------- the ledger


def test_the_ledger_counts_open_ones_by_reason_and_adds_up(tmp_path: Path) -> None:
    left_open = barge(tmp_path).obligations[2]

    def opened(number: int, **changed: Any) -> Obligation:
        return replace(left_open, what=f"Claim {number}", **changed)

    given = (
        *(opened(number, open_as="bound reached") for number in range(3)),
        opened(3, open_as="time limit"),
        opened(4),
        opened(5, open_as="call to unknown code"),
        opened(6, open_as="call to unknown code"),
        opened(7, kind="pass", reason=""),
        opened(8, kind="fail", level="error", reason=""),
        opened(9, kind="fail", level=None, reason=""),
    )
    lines = ledger(given)
    assert lines == (
        ("obligations", 10, ""),
        ("shown to hold", 1, ""),
        ("shown to fail", 2, "1 error, 1 warning"),
        ("left open", 7, ""),
        ("  bound reached", 3, ""),
        ("  call to unknown code", 2, ""),
        ("  time limit", 1, ""),
        ("  other", 1, ""),
        ("for a person to judge", 0, ""),
    )
    said: Any = sarif_log(replace(barge(tmp_path), obligations=given))["runs"][0]["properties"]["ledger"]  # type: ignore[index, call-overload]
    assert said == {
        "pass": 1,
        "fail": 2,
        "open": 7,
        "openAs": {"bound reached": 3, "call to unknown code": 2, "time limit": 1, "other": 1},
    }


@pytest.mark.parametrize("kind", EVERY_KIND)
def test_only_the_chosen_verdicts_are_written_everywhere(tmp_path: Path, kind: str) -> None:
    outcome = with_evidence(tmp_path)
    log: Any = sarif_log(outcome, (kind,))
    assert {one["kind"] for one in results(log)} == {kind}
    assert len(results(log)) == sum(one.kind == kind for one in outcome.obligations)
    lines = report_lines(outcome, (kind,), tmp_path)
    assert len(lines) == len(results(log))
    heads = [line for line in printed(outcome, kinds=(kind,)) if line[:1].isdigit()]
    assert len(heads) == len(results(log))


def test_a_line_of_an_open_one_names_its_reason(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    left_open = replace(outcome.obligations[2], open_as="bound reached")
    (line,) = report_lines(replace(outcome, obligations=(left_open,)), ("open",), tmp_path)
    assert ": left open (bound reached), rule RB04: " in line


# ------------------------------------------------------------------------------------------------ the printed witness


def test_the_printed_steps_begin_with_what_the_witness_makes_and_sets(tmp_path: Path) -> None:
    outcome = with_evidence(tmp_path)
    lines = printed(replace(outcome, obligations=outcome.obligations[:1]), 100)
    start = next(number for number, line in enumerate(lines) if line.lstrip().startswith("Steps"))
    assert [line.split("  ")[-1].strip() or line.strip() for line in lines[start + 1 : start + 4]] == [
        "with q, struct queue, all zero",
        "with bytes, unsigned char [12], all zero",
        "q.head = 255, wanted[0] = &bytes[2]",
    ]
    assert any("Assumed   one caller at a time. the caller's queue is its own." in line for line in lines)


def test_a_witness_whose_names_look_like_markup_or_commands_is_shown_as_it_is(tmp_path: Path) -> None:
    outcome = with_evidence(tmp_path)
    evidence = outcome.obligations[0].evidence
    assert evidence is not None
    odd = replace(evidence, made=(Made("q", "struct [red]\x1b[2J", 2),))
    text = "\n".join(printed(replace(outcome, obligations=(replace(outcome.obligations[0], evidence=odd),)), 100))
    assert "with q, struct [red]\\x1b[2J [2], all zero" in text
    assert "\x1b" not in text


def test_a_report_without_rings_states_no_assumption(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    bare = replace(outcome, program=replace(outcome.program, rings=()), obligations=())
    assert not any(line.startswith("Assumed") for line in printed(bare))
