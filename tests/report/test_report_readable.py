"""The outputs for people and for line-reading tools."""

from dataclasses import replace
from pathlib import Path

import pytest
from report_samples import barge, spot
from rich.console import Console

from stepring.places import Notice, Origin
from stepring.report.inventory import print_inventory
from stepring.report.lines import display_column, report_lines
from stepring.report.notices import MOST_OF_A_KIND, notice_sentences
from stepring.report.printed import print_report
from stepring.report.types import Outcome
from stepring.report.words import count, verdict_summary
from stepring.rule import WitnessStep


def printed(outcome: Outcome, width: int = 80, kinds: tuple[str, ...] = ("fail",)) -> list[str]:
    console = Console(width=width, highlight=False, markup=False, emoji=False, force_terminal=False)
    with console.capture() as captured:
        print_report(outcome, console, kinds, outcome.root)
    return [line.rstrip() for line in captured.get().splitlines()]


def inventory(outcome: Outcome) -> list[str]:
    console = Console(width=80, highlight=False, markup=False, emoji=False, force_terminal=False)
    with console.capture() as captured:
        print_inventory(outcome, console, outcome.root)
    return [line.rstrip() for line in captured.get().splitlines()]


def test_the_whole_report_of_one_finding(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    overflow = outcome.obligations[0]
    assert printed(replace(outcome, obligations=(overflow,))) == [
        "shore commands#1.c (1 finding)",
        "══════════════════════════════",
        "",
        "1. shown to fail (error)                                line 5, columns 14 to 22",
        "   Finding   After head passes 255, q->slots[head % 10] goes from slot 5 to slot",
        "             0.",
        "   Source    q->slots[q->head++ % 10] = command;",
        "   Where     in queue_put, on struct queue.slots",
        "   Why       256 is no multiple of 10, so commands 6 to 9 of that round are",
        "             overwritten early.",
        "   Do        Make the capacity a power of two, or wrap the index itself.",
        "   Rule      RB04 CounterOverflow",
        "   Steps     Line  What happens                     Values",
        "                   at the start                     q->head = 255",
        "             5     The command goes to slot 5       q->head = 255, slot = 5",
        "             5     head wraps to 0                  q->head = 0",
        "             5     The next command goes to slot 0  q->head = 0, slot = 0",
        "",
        "Read      2 of 2 translation units, 2 of 3 functions; data model ILP32.",
        "Found     1 state machine, 1 ring.",
        "Assumed   No pointer writes outside the object that it was made to point into.",
        "          Functions of the C library do what ISO C says of them.",
        "          Nothing but the code that was read changes a variable: no other",
        "          context does, unless an interrupt handler was found that does.",
        "          Types have the sizes of the data model (ILP32).",
        "          What runs is what was read: the same sources, macros and options.",
        "Caution   Findings support a review and do not replace it. A verdict holds for",
        "          the source, the data model and the assumptions stated.",
        "          Functional-safety standards, local codes and licensed practice decide.",
        "Ledger    obligations            1",
        "          shown to hold          0",
        "          shown to fail          1  1 error",
        "          left open              0",
        "          for a person to judge  0",
    ]


@pytest.mark.parametrize("width", [60, 80, 132])
def test_a_report_fits_its_width_and_needs_no_colour(tmp_path: Path, width: int) -> None:
    lines = printed(barge(tmp_path), width, ("fail", "open", "review", "pass"))
    assert max(map(len, lines)) <= width
    text = "\n".join(lines)
    assert "\x1b" not in text
    for words in ("shown to fail (error)", "left open", "for a person to judge", "shown to hold"):
        assert words in text


def test_a_report_of_nothing_says_so_and_what_was_read(tmp_path: Path) -> None:
    lines = printed(replace(barge(tmp_path), obligations=()))
    assert lines[0] == "No finding."
    assert "Ledger    obligations            0" in lines
    assert any(line.startswith("Read      2 of 2 translation units") for line in lines)


def test_verdicts_that_are_not_shown_are_still_counted(tmp_path: Path) -> None:
    lines = printed(barge(tmp_path))
    assert [line.split() for line in lines[-6:]] == [
        ["Ledger", "obligations", "5"],
        ["shown", "to", "hold", "1"],
        ["shown", "to", "fail", "2", "2", "errors"],
        ["left", "open", "1"],
        ["other", "1"],
        ["for", "a", "person", "to", "judge", "1"],
    ]


def test_a_long_witness_is_cut_in_the_middle_and_says_so(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    where = spot(tmp_path / "shore commands#1.c", 5, "q->head++")
    steps = tuple(WitnessStep(where, f"put number {n}") for n in range(1, 101))
    text = "\n".join(printed(replace(outcome, obligations=(replace(outcome.obligations[0], witness=steps),)), 100))
    shown = [n for n in range(1, 101) if f"put number {n} " in text + " " or f"put number {n}\n" in text]
    assert shown == [1, 2, 3, 4, 95, 96, 97, 98, 99, 100]
    assert "90 steps are left out here" in text


def test_a_step_in_another_file_names_it(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    elsewhere = WitnessStep(spot(tmp_path / "feed" / "auger.c", 9, "wanted"), "dose is wanted")
    text = "\n".join(printed(replace(outcome, obligations=(replace(outcome.obligations[0], witness=(elsewhere,)),))))
    assert "feed/auger.c, line 9" in text


def test_source_that_looks_like_markup_stays_as_it_is(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    odd = replace(outcome.obligations[0], what="slots[red] is [bold]not[/bold] :warning: 10")
    assert any(
        "slots[red] is [bold]not[/bold] :warning: 10." in line for line in printed(replace(outcome, obligations=(odd,)))
    )


@pytest.mark.parametrize(
    ("line", "column", "shown"),
    [
        ("int x;", 5, 5),
        ("\tint x;", 2, 9),
        ("ab\tint x;", 4, 9),
        ("12345678\tx", 10, 17),
        ("鮭 = 1;", 3, 4),
        ("e\u0301 = 1;", 4, 3),
        ("", 1, 1),
        ("ab", 5, 5),
        ("int x;", 0, 0),
    ],
)
def test_columns_of_lines_are_display_columns(line: str, column: int, shown: int) -> None:
    assert display_column(line, column) == shown


def test_a_line_for_tools_is_one_line_without_a_period(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    odd = replace(outcome.obligations[0], what="Goes\nfrom 5\tto 0.", where=Origin("feed/auger.c", 14, 0, 0))
    assert report_lines(replace(outcome, obligations=(odd,)), ("fail",), tmp_path) == [
        "feed/auger.c:14: error, rule RB04: Goes from 5 to 0"
    ]


def test_the_inventory_has_tables_for_machines_and_rings(tmp_path: Path) -> None:
    lines = inventory(barge(tmp_path))
    assert max(map(len, lines)) <= 80
    rows = [line.split() for line in lines]
    assert ["State", "machine", "auger_state"] in rows
    assert ["AUGER_JAM", "2", "declared,", "labelled,", "stored"] in rows
    assert ["AUGER_FEEDING", "AUGER_JAM", "auger_poll", "stalled()", "12"] in rows
    assert ["(initial", "value)", "AUGER_IDLE", "3"] in rows
    assert ["Complete", "no"] in rows
    assert "Unknown     The address of auger_state leaves the code that was read." in lines
    assert ["Ring", "struct", "queue.slots"] in rows
    assert ["Capacity", "10", "elements", "of", "1", "byte"] in rows
    assert ["Scheme", "difference"] in rows
    assert ["Written", "by", "queue_put"] in rows


def test_a_store_of_an_unknown_value_says_why(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    machine = outcome.program.machines[0]
    unknown = replace(machine.stores[1], values=None, why_unknown="a parameter", through="auger_set")
    program = replace(outcome.program, machines=(replace(machine, stores=(unknown,)),), rings=())
    rows = [" ".join(line.split()) for line in inventory(replace(outcome, program=program))]
    assert "auger_poll through auger_set unknown: a parameter 9" in rows


def test_an_inventory_of_nothing_says_so(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    empty = replace(outcome.program, machines=(), rings=())
    assert inventory(replace(outcome, program=empty))[0] == "No state machine and no ring was found."


def test_notices_are_sentences_grave_ones_first_and_no_flood(tmp_path: Path) -> None:
    many = [Notice("missing-header", "note", f"h{n}.h was not found") for n in range(MOST_OF_A_KIND + 3)]
    error = Notice("unreadable-file", "error", "It could not be read", "gone.c")
    sentences = notice_sentences([*many, error, error], tmp_path)
    assert sentences[0] == "error: gone.c: It could not be read."
    assert len(sentences) == 1 + MOST_OF_A_KIND + 1
    assert sentences[-1] == "note: 3 more of the kind missing-header; the SARIF log holds all."


def test_counting_words() -> None:
    assert count(1, "ring") == "1 ring"
    assert count(0, "ring") == "0 rings"
    assert verdict_summary(()) == "none"
