"""The machines and rings of a program as tables: what an auditor of unknown firmware asks for first.

Plain text of at most 80 columns where names allow it. A fact that was not found is said to be unknown; what makes a
machine's picture incomplete stands with it.
"""

from collections.abc import Iterable, Sequence
from pathlib import Path

from rich import box
from rich.console import Console, RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from stepring.places import Origin
from stepring.report.sources import Sources
from stepring.report.tables import orbit_words, users
from stepring.report.text import function_name, one_sentence, printable, shown_path
from stepring.report.types import Outcome
from stepring.report.words import CAUTION, count, coverage_sentence
from stepring.shapes.types import Index, Machine, Ring, State, StateStore, Transition


def print_inventory(outcome: Outcome, console: Console, base: Path | None = None) -> None:
    """Print every machine and every ring, then how much was read."""
    sources = Sources(outcome.root)
    for machine in sorted(outcome.program.machines, key=lambda one: (one.where, one.variable)):
        _print_machine(console, machine, sources, base)
    for ring in sorted(outcome.program.rings, key=lambda one: (one.where, one.storage)):
        _print_ring(console, ring, sources, base)
    if not outcome.program.machines and not outcome.program.rings:
        console.print(Text("No state machine and no ring was found."))
        console.print()
    _print_facts(console, [("Read", coverage_sentence(outcome)), ("Caution", CAUTION)])


def inventory_lines(outcome: Outcome, base: Path | None = None) -> list[str]:
    """A line for each machine and ring in the form ``file:line: message``."""
    sources = Sources(outcome.root)
    entries = [
        (one.where, f"state machine {one.variable}, {count(len(one.states), 'state')}, {_transitions_words(one)}")
        for one in outcome.program.machines
    ]
    entries += [
        (one.where, f"ring {one.storage}, capacity {_capacity(one)}, {one.scheme}, wrap by {one.wrap}")
        for one in outcome.program.rings
    ]
    return [f"{_file(where, sources, base)}:{where.line}: {printable(text)}" for where, text in sorted(entries)]


def _file(where: Origin, sources: Sources, base: Path | None) -> str:
    return shown_path(sources.of(where.file).file, base)


def _place(where: Origin, sources: Sources, base: Path | None) -> str:
    return f"{_file(where, sources, base)}, line {where.line}"


def _transitions_words(machine: Machine) -> str:
    return count(len(machine.transitions), "transition")


def _print_heading(console: Console, text: str) -> None:
    shown = printable(text)
    console.print(Text(shown, style="bold"))
    console.print(Text("─" * min(console.width, max(20, len(shown)))))


def _print_facts(console: Console, facts: Iterable[tuple[str, str | RenderableType]]) -> None:
    rows = Table.grid(padding=(0, 2))
    rows.add_column(min_width=10, no_wrap=True)
    rows.add_column(overflow="fold")
    for label, text in facts:
        if text:
            rows.add_row(Text(label, style="bold"), Text(printable(text)) if isinstance(text, str) else text)
    console.print(rows)


def _print_table(console: Console, columns: Sequence[str], rows: Iterable[Sequence[str]]) -> None:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, header_style="bold")
    for column in columns:
        table.add_column(column, overflow="fold")
    for row in rows:
        table.add_row(*(Text(printable(cell)) for cell in row))
    console.print(Padding(table, (0, 0, 0, 2)))


# ---------------------------------------------------------------------------------------------------------- machines


def _print_machine(console: Console, machine: Machine, sources: Sources, base: Path | None) -> None:
    _print_heading(console, f"State machine {machine.variable}")
    functions = sorted({function_name(dispatch.function) for dispatch in machine.dispatches})
    _print_facts(
        console,
        [
            ("Where", _place(machine.where, sources, base)),
            ("Form", machine.form),
            ("Family", machine.family),
            ("Dispatch", ", ".join(functions)),
            ("Initial", ", ".join(machine.initial) or "unknown"),
            ("Complete", "yes" if machine.complete else "no"),
        ],
    )
    reasons = [one_sentence(reason) for reason in machine.why_incomplete]
    if reasons:
        _print_facts(console, [("Unknown", reason) for reason in reasons])
    _print_table(console, ("State", "Value", "Known by"), [_state_row(state) for state in machine.states])
    _print_table(console, ("From", "To", "Function", "Guard", "Line"), map(_transition_row, machine.transitions))
    _print_table(
        console,
        ("Stored in", "States", "Line"),
        [_store_row(store, machine.where, sources, base) for store in machine.stores],
    )
    console.print()


def _state_row(state: State) -> tuple[str, str, str]:
    marks = ("declared", "labelled", "tested", "stored", "initial")
    return state.name, str(state.value), ", ".join(mark for mark in marks if getattr(state, mark)) or "nothing"


def _transition_row(step: Transition) -> tuple[str, str, str, str, str]:
    return step.source, step.target, function_name(step.function), step.guard, str(step.where.line)


def _store_row(store: StateStore, beside: Origin, sources: Sources, base: Path | None) -> tuple[str, str, str]:
    place = str(store.where.line)
    if store.where.file != beside.file:
        place = f"{_file(store.where, sources, base)}:{place}"
    through = f" through {function_name(store.through)}" if store.through else ""
    function = "(initial value)" if store.initial and not store.function else function_name(store.function)
    if store.values is None:
        return function + through, f"unknown: {store.why_unknown or 'the value was not settled'}", place
    return function + through, ", ".join(name for name, _ in store.values), place


# ---------------------------------------------------------------------------------------------------------- rings


def _capacity(ring: Ring) -> str:
    return "set at run time" if ring.capacity is None else str(ring.capacity)


def _print_ring(console: Console, ring: Ring, sources: Sources, base: Path | None) -> None:
    _print_heading(console, f"Ring {ring.storage}")
    size = f" of {count(ring.element_size, 'byte')}" if ring.element_size else ""
    elements = "element" if ring.capacity == 1 else "elements"
    _print_facts(
        console,
        [
            ("Where", _place(ring.where, sources, base)),
            ("Capacity", f"{_capacity(ring)}{f' {elements}{size}' if ring.capacity else ''}"),
            ("Scheme", ring.scheme),
            ("Wrap", ring.wrap),
            ("Written by", users(ring.accesses, "store")),
            ("Read by", users(ring.accesses, "load")),
            ("Passed by", users(ring.accesses, "address")),
            *(("Note", one_sentence(note)) for note in ring.notes),
        ],
    )
    _print_table(
        console,
        ("Index", "Type", "Role", "Initial", "Takes", "Advanced by"),
        [_index_row(index) for index in ring.indices],
    )
    console.print()


def _index_row(index: Index) -> tuple[str, str, str, str, str, str]:
    type_name = f"{index.type_name} ({index.low} to {index.high})"
    steps = ", ".join(sorted({f"{function_name(step.function)} ({step.wrap})" for step in index.steps}))
    initial = "unknown" if index.initial is None else str(index.initial)
    return index.name, type_name, index.role, initial, orbit_words(index.orbit), steps
