"""The report for a person at a terminal or in a CI log.

Each file has a heading, each finding a numbered card with labelled rows: what was found, where, why it matters,
what to do, and the steps that lead to it. It reads the same without colour and on 80 columns; colour only repeats
what a word says.
"""

from collections.abc import Collection, Iterable, Sequence
from itertools import groupby
from pathlib import Path

from rich.console import Console
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from stepring.paths.replay import start_values
from stepring.places import Origin
from stepring.report.assumptions import assumptions
from stepring.report.fingerprints import in_order
from stepring.report.sources import Sources
from stepring.report.text import function_name, one_sentence, printable, shown_path
from stepring.report.types import Outcome
from stepring.report.words import CAUTION, assumed_by, count, coverage_sentence, ledger, level_of, verdict_words
from stepring.rule import Obligation, Rule, WitnessStep

_COLOURS = {
    "error": "bold red",
    "warning": "yellow",
    "note": "cyan",
    "open": "magenta",
    "review": "blue",
    "pass": "green",
}
_LABEL_WIDTH = 8
_FIRST_STEPS, _LAST_STEPS = 4, 6
_LONGEST_SOURCE = 200


def print_report(outcome: Outcome, console: Console, kinds: Collection[str], base: Path | None = None) -> None:
    """Print the findings of the verdicts in ``kinds``, file by file, what was read and assumed, and the ledger."""
    sources = Sources(outcome.root)
    ordered = in_order(outcome.obligations, sources)
    chosen = [one for one in ordered if one.kind in kinds]
    rules = {rule.id: rule for rule in outcome.rules}
    number = 0
    for file, group in groupby(chosen, key=lambda one: one.where.file):
        findings = list(group)
        _print_heading(console, f"{shown_path(sources.of(file).file, base)} ({count(len(findings), 'finding')})")
        for one in findings:
            number += 1
            _print_card(console, number, one, rules.get(one.rule), sources, base)
    if not chosen:
        console.print(Text("No finding."))
    _print_end(console, outcome, ordered)


def _print_heading(console: Console, text: str) -> None:
    console.print(Text(text, style="bold"))
    console.print(Text("═" * min(console.width, max(20, len(text)))))
    console.print()


def _print_card(
    console: Console, number: int, one: Obligation, rule: Rule | None, sources: Sources, base: Path | None
) -> None:
    head = Table.grid(expand=True, padding=(0, 1))
    head.add_column()
    head.add_column(justify="right")
    verdict = Text(f"{number}. ")
    verdict.append(verdict_words(one), style=_COLOURS[level_of(one) or one.kind])
    head.add_row(verdict, Text(_line_words(one.where)))
    console.print(head)
    rows = Table.grid(padding=(0, 2))
    rows.add_column(min_width=_LABEL_WIDTH, no_wrap=True)
    rows.add_column(overflow="fold")
    for label, text in _rows(one, rule, sources, base):
        rows.add_row(Text(label, style="bold"), Text(text))
    if one.witness:
        rows.add_row(Text("Steps", style="bold"), _steps(one, sources, base))
    console.print(Padding(rows, (0, 0, 0, 3)))
    console.print()


def _line_words(where: Origin) -> str:
    if where.column < 1:
        return f"line {where.line}"
    last = where.end_column - 1
    return f"line {where.line}, " + (
        f"columns {where.column} to {last}" if last > where.column else f"column {where.column}"
    )


def _rows(one: Obligation, rule: Rule | None, sources: Sources, base: Path | None) -> Iterable[tuple[str, str]]:
    """The card's labels and texts, without those that have nothing to say."""
    source = (sources.of(one.where.file).line(one.where.line) or one.where.spelling).strip()
    inside = [f"in {function_name(one.function)}" if one.function else "", f"on {one.subject}" if one.subject else ""]
    see = [f"{_place(other.where, one.where, sources, base)}: {one_sentence(other.text)}" for other in one.related]
    texts = {
        "Finding": one_sentence(one.what),
        "Open": one_sentence(one.reason),
        "Source": source if len(source) <= _LONGEST_SOURCE else source[:_LONGEST_SOURCE] + " …",
        "Where": ", ".join(part for part in inside if part),
        "Why": one_sentence(one.why),
        "Do": one_sentence(one.advice),
        "Assumed": " ".join(one_sentence(clause) for clause in assumed_by(one)),
        "See": "\n".join(printable(line) for line in see),
        "Rule": one.rule if rule is None else f"{one.rule} {rule.name}",
    }
    return [(label, text if label == "See" else printable(text)) for label, text in texts.items() if text]


def _place(where: Origin, beside: Origin, sources: Sources, base: Path | None) -> str:
    """A place in words; the file is named where it is another one."""
    if where.file == beside.file:
        return f"line {where.line}"
    return f"{shown_path(sources.of(where.file).file, base)}, line {where.line}"


def _steps(one: Obligation, sources: Sources, base: Path | None) -> Table:
    """The witness as a table; the middle of a long one is left out and its length said."""
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), show_edge=False, header_style="underline")
    table.add_column("Line", overflow="fold")
    table.add_column("What happens", overflow="fold")
    table.add_column("Values", overflow="fold")
    for text, values in _start(one):
        table.add_row("", Text(printable(text)), Text(_values(values)))
    steps = one.witness
    if len(steps) <= _FIRST_STEPS + _LAST_STEPS + 1:
        _add_steps(table, steps, one, sources, base)
        return table
    _add_steps(table, steps[:_FIRST_STEPS], one, sources, base)
    table.add_row("", f"({len(steps) - _FIRST_STEPS - _LAST_STEPS} steps are left out here; the SARIF log has all)", "")
    _add_steps(table, steps[-_LAST_STEPS:], one, sources, base)
    return table


def _start(one: Obligation) -> Iterable[tuple[str, Sequence[tuple[str, str]]]]:
    """What stands before the first step: the objects that the witness makes, the start values, a lone call's values."""
    evidence = one.evidence
    if evidence is None:
        return [("at the start", one.initial)] if one.initial else []
    made = [
        f"{item.name}, {item.type.partition('@')[0]}" + f" [{item.elements}]" * (item.elements > 1)
        for item in evidence.made
    ]
    rows: list[tuple[str, Sequence[tuple[str, str]]]] = [(f"with {text}, all zero", ()) for text in made]
    if start := one.initial or start_values(evidence):
        rows.append(("at the start", start))
    return rows


def _add_steps(
    table: Table, steps: Sequence[WitnessStep], one: Obligation, sources: Sources, base: Path | None
) -> None:
    for step in steps:
        other_file = step.where.file != one.where.file
        line = _place(step.where, one.where, sources, base) if other_file else str(step.where.line)
        table.add_row(Text(line), Text(printable(step.text)), Text(_values(step.values)))


def _values(values: Iterable[tuple[str, str]]) -> str:
    return printable(", ".join(f"{name} = {value}" for name, value in values))


def _print_end(console: Console, outcome: Outcome, ordered: Sequence[Obligation]) -> None:
    program = outcome.program
    rows = Table.grid(padding=(0, 2))
    rows.add_column(min_width=_LABEL_WIDTH, no_wrap=True)
    rows.add_column()
    found = f"{count(len(program.machines), 'state machine')}, {count(len(program.rings), 'ring')}."
    texts = (
        ("Read", coverage_sentence(outcome)),
        ("Found", found),
        ("Assumed", "\n".join(map(printable, assumptions(outcome.models))) if program.rings else ""),
        ("Caution", CAUTION),
    )
    for label, text in texts:
        if text:
            rows.add_row(Text(label, style="bold"), Text(text if label == "Assumed" else printable(text)))
    rows.add_row(Text("Ledger", style="bold"), _ledger(ordered))
    console.print(rows)


def _ledger(ordered: Sequence[Obligation]) -> Table:
    """The account of all obligations, whatever verdicts were printed."""
    table = Table.grid(padding=(0, 2))
    table.add_column()
    table.add_column(justify="right")
    table.add_column()
    for what, number, remark in ledger(ordered):
        table.add_row(Text(what), Text(str(number)), Text(remark))
    return table
