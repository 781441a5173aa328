"""The inventory as Markdown, for a repository's own pages: the same tables as the HTML inventory, without drawings."""

import os
from collections.abc import Callable, Iterable, Sequence
from pathlib import Path
from urllib.parse import quote

from stepring.places import Origin
from stepring.report.sources import Sources
from stepring.report.tables import Entry, machine_tables, ring_tables
from stepring.report.text import printable, shown_path
from stepring.report.types import Outcome
from stepring.report.words import CAUTION, coverage_sentence
from stepring.rule import Obligation

_SPECIAL = str.maketrans({letter: "\\" + letter for letter in "\\`*_[]<>|~"})


def inventory_markdown(outcome: Outcome, target: Path | None = None, base: Path | None = None) -> str:
    """The whole inventory. ``target`` is where it will stand, ``base`` the folder that shown paths are relative to."""
    sources = Sources(outcome.root)
    folder = (target.parent if target is not None else Path()).absolute()

    def place(where: Origin) -> str:
        shown = shown_path(sources.of(where.file).file, base)
        path = Path(os.path.relpath(outcome.root / sources.of(where.file).file, folder)).as_posix()
        return f"[{escaped(f'{shown}:{where.line}')}]({quote(path)}#L{where.line})"

    def entry_words(entry: Entry) -> str:
        actions = f" / {escaped(entry.actions)}" if entry.actions else ""
        return f"{escaped(entry.target)}{actions} ({place(entry.where)})"

    lines = [f"# State machines and rings of {escaped(outcome.root.name or 'this program')}", ""]
    lines += [escaped(coverage_sentence(outcome)), ""]
    for machine in sorted(outcome.program.machines, key=lambda one: (one.where, one.variable)):
        tables = machine_tables(outcome, machine)
        lines += [f"## State machine {escaped(machine.variable)}", "", f"Declared at {place(machine.where)}.", ""]
        lines += _facts(tables.facts)
        lines += _problems(tables.problems, place)
        lines += ["### State table", ""]
        rows = [
            (
                escaped(row.state.name) + "".join(f" *({escaped(words)})*" for words in row.notes),
                *("<br>".join(map(entry_words, cell)) or "–" for cell in row.cells),
            )
            for row in tables.rows
        ]
        lines += _table(("State", *map(escaped, tables.events)), rows)
        lines += ["### Transitions", ""]
        steps = [
            (
                str(entry.number),
                escaped(source),
                escaped(entry.target),
                escaped(event),
                escaped(entry.guard),
                escaped(entry.actions),
                place(entry.where),
            )
            for source, event, entry in tables.entries
        ]
        lines += _table(("No.", "From", "To", "Event", "Guard", "Action", "Place"), steps)
        lines += ["### Who changes the state", ""]
        changes = [
            (escaped(one.function), escaped(one.stores), "yes" if one.own else "no", place(one.where))
            for one in tables.changes
        ]
        lines += _table(("Function", "Stores", "Part of the dispatch", "Place"), changes)
    for ring in sorted(outcome.program.rings, key=lambda one: (one.where, one.storage)):
        found = ring_tables(outcome, ring)
        lines += [f"## Ring {escaped(ring.storage)}", "", f"Declared at {place(ring.where)}.", ""]
        lines += _facts(found.facts)
        lines += _problems(found.problems, place)
        lines += _table(
            ("Index", "Type", "Role", "Initial", "Takes", "Advanced by"),
            [tuple(map(escaped, row)) for row in found.indices],
        )
        lines += _table(
            ("Function", "What it does", "Place"),
            [(escaped(function), escaped(does), place(where)) for function, does, where in found.users],
        )
    if not outcome.program.machines and not outcome.program.rings:
        lines += ["No state machine and no ring was found.", ""]
    return "\n".join((*lines, escaped(CAUTION), ""))


def escaped(text: str) -> str:
    """Text in which nothing means anything to Markdown, on one line."""
    return " ".join(printable(text).split()).translate(_SPECIAL)


def _facts(facts: Iterable[tuple[str, str]]) -> list[str]:
    return [*(f"- {label}: {escaped(text)}" for label, text in facts), ""]


def _problems(found: Sequence[Obligation], place: Callable[[Origin], str]) -> list[str]:
    lines = [f"> **{one.rule}** {escaped(one.what)} ({place(one.where)})" for one in found]
    return (
        [
            *(line for one in lines for line in (one, "")),
        ]
        if lines
        else []
    )


def _table(head: Sequence[str], rows: Iterable[Sequence[str]]) -> list[str]:
    made = ["| " + " | ".join(head) + " |", "|" + " --- |" * len(head)]
    return [*made, *("| " + " | ".join(row) + " |" for row in rows), ""]
