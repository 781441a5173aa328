"""Machines and rings as tables of plain text with places: what the Markdown and the HTML inventory both show.

A machine's state table has a row for each state and a column for each event; an event is what the code tells apart
inside the dispatch, or the function that is called. A cell holds every transition from that state on that event.
"""

from collections.abc import Iterable
from dataclasses import dataclass

from stepring.places import Origin
from stepring.report.text import function_name, one_sentence, printable
from stepring.report.types import Outcome
from stepring.report.words import count
from stepring.rule import Obligation
from stepring.shapes.types import Access, Machine, Ring, State, Transition

STATE_WORDS = {
    "SM02": "no case for it",
    "SM03": "never entered",
    "SM04": "never left",
    "SM12": "waits without limit",
}


@dataclass(frozen=True, slots=True)
class Entry:
    """One transition in a cell: its number in the machine's list, where it leads, under what guard, what it calls."""

    number: int
    target: str
    guard: str
    actions: str
    where: Origin


@dataclass(frozen=True, slots=True)
class Row:
    """A state with its cells, one an event."""

    state: State
    marks: str
    notes: tuple[str, ...]
    cells: tuple[tuple[Entry, ...], ...]


@dataclass(frozen=True, slots=True)
class Change:
    """A place that stores the state: the function, what it stores, whether the dispatching code does it."""

    function: str
    stores: str
    own: bool
    where: Origin


@dataclass(frozen=True, slots=True)
class MachineTables:
    """A machine as tables; ``problems`` are the failures and reviews about it."""

    machine: Machine
    facts: tuple[tuple[str, str], ...]
    events: tuple[str, ...]
    rows: tuple[Row, ...]
    entries: tuple[tuple[str, str, Entry], ...]
    changes: tuple[Change, ...]
    problems: tuple[Obligation, ...]
    notes: dict[str, tuple[str, ...]]
    marked: frozenset[int]


@dataclass(frozen=True, slots=True)
class RingTables:
    """A ring as tables; ``users`` are (who, how, place)."""

    ring: Ring
    facts: tuple[tuple[str, str], ...]
    indices: tuple[tuple[str, ...], ...]
    users: tuple[tuple[str, str, Origin], ...]
    problems: tuple[Obligation, ...]


def machine_tables(outcome: Outcome, machine: Machine) -> MachineTables:
    """Everything about one machine."""
    problems = _about(outcome, machine.identity)
    notes: dict[str, list[str]] = {}
    for one in problems:
        for name in one.states:
            if one.rule in STATE_WORDS:
                notes.setdefault(name, []).append(STATE_WORDS[one.rule])
    places = {(one.where.file, one.where.line) for one in problems}
    entries = [
        (step.source, event_of(step), _entry(number, step)) for number, step in enumerate(machine.transitions, 1)
    ]
    events = tuple(dict.fromkeys(event for _, event, _ in entries))
    cells: dict[tuple[str, str], list[Entry]] = {}
    for source, event, entry in entries:
        cells.setdefault((source, event), []).append(entry)
    rows = tuple(
        Row(
            state,
            marks_of(state),
            tuple(dict.fromkeys(notes.get(state.name, ()))),
            tuple(tuple(cells.get((state.name, event), ())) for event in events),
        )
        for state in machine.states
    )
    dispatching = sorted({function_name(one.function) for one in machine.dispatches})
    facts = (
        ("Form", machine.form),
        ("Constants", machine.family),
        ("Dispatched in", ", ".join(dispatching)),
        ("Initial", ", ".join(machine.initial) or "not known"),
        ("Complete", "yes" if machine.complete else "no"),
        *(("Not known", one_sentence(why)) for why in machine.why_incomplete),
    )
    own = {one.function for one in machine.dispatches}
    changes = tuple(
        Change(
            "(initial value)" if store.initial and not store.function else function_name(store.function),
            ", ".join(name for name, _ in store.values)
            if store.values is not None
            else f"not known: {store.why_unknown}",
            store.function in own or store.initial,
            store.where,
        )
        for store in machine.stores
    )
    marked = frozenset(entry.number for _, _, entry in entries if (entry.where.file, entry.where.line) in places)
    shown = {name: tuple(dict.fromkeys(words)) for name, words in notes.items()}
    kept = tuple((label, printable(text)) for label, text in facts if text)
    return MachineTables(machine, kept, events, rows, tuple(entries), changes, problems, shown, marked)


def event_of(step: Transition) -> str:
    """A transition's event: what the code tells apart, else the function that takes the transition."""
    return step.event or f"{function_name(step.function)}()"


def marks_of(state: State) -> str:
    """How a state is known, in words."""
    return ", ".join(mark for mark in ("declared", "labelled", "tested", "stored", "initial") if getattr(state, mark))


def ring_tables(outcome: Outcome, ring: Ring) -> RingTables:
    """Everything about one ring."""
    capacity = "set at run time" if ring.capacity is None else f"{ring.capacity} elements"
    size = f" of {ring.element_size} bytes" if ring.element_size else ""
    verdicts = [one for one in outcome.obligations if one.shape == ring.identity]
    told = ", ".join(
        f"{sum(one.kind == kind for one in verdicts)} {words}"
        for kind, words in (("pass", "shown to hold"), ("fail", "shown to fail"), ("open", "left open"))
    )
    facts = (
        ("Capacity", capacity + size),
        ("Full and empty", ring.scheme),
        ("Wrap", ring.wrap),
        ("Written by", users(ring.accesses, "store")),
        ("Read by", users(ring.accesses, "load")),
        ("Address taken by", users(ring.accesses, "address")),
        ("Verdicts", told),
        *(("Note", one_sentence(note)) for note in ring.notes),
    )
    indices = tuple(
        (
            index.name,
            f"{index.type_name} ({index.low} to {index.high})",
            index.role,
            "not known" if index.initial is None else str(index.initial),
            orbit_words(index.orbit),
            ", ".join(sorted({f"{function_name(step.function)} ({step.wrap})" for step in index.steps})),
        )
        for index in ring.indices
    )
    words = {"store": "stores", "load": "loads", "address": "takes the address"}
    who = tuple(
        (function_name(access.function), f"{words[access.kind]} at {access.index or 'a subscript'}", access.where)
        for access in ring.accesses
    )
    kept = tuple((label, printable(text)) for label, text in facts if text)
    return RingTables(ring, kept, indices, who, _about(outcome, ring.identity))


def _about(outcome: Outcome, identity: str) -> tuple[Obligation, ...]:
    return tuple(one for one in outcome.obligations if one.shape == identity and one.kind in ("fail", "review"))


def _entry(number: int, step: Transition) -> Entry:
    return Entry(number, step.target, step.condition, ", ".join(step.actions), step.where)


def users(accesses: Iterable[Access], kind: str) -> str:
    """The functions that access a ring's storage in that way."""
    return ", ".join(sorted({function_name(access.function) for access in accesses if access.kind == kind}))


def orbit_words(orbit: tuple[int, ...] | None) -> str:
    """The values of an orbit in few words."""
    if orbit is None:
        return "unknown"
    low, high, different = min(orbit, default=0), max(orbit, default=0), len(set(orbit))
    if different == 0:
        return "nothing"
    if different == 1:
        return str(low)
    return f"{low} to {high}" if different == high - low + 1 else f"{count(different, 'value')} from {low} to {high}"
