"""What a ``default`` does with the state, and what running on into one undoes.

A state is given its next value directly, through a variable that is stored in it afterwards, through a copy that is
written back, or by a setter; a default that recovers does so in any of these ways. A fall into the default is judged by
its code, which is seen apart from the cases that run on into it.
"""

from collections.abc import Collection, Iterator
from dataclasses import dataclass
from typing import Literal, TypeAlias

from stepring.meaning.builder import successors
from stepring.meaning.types import (
    Assign,
    Call,
    Function,
    FunctionName,
    Jump,
    Load,
    Return,
    Statement,
    Switch,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.keys import place_key, uncast
from stepring.shapes.names import faults
from stepring.shapes.state_scan import Scan, Seen, Work, blocks_from, stores_parameter
from stepring.shapes.types import DefaultFall

Does: TypeAlias = Literal["none", "nothing", "stores", "calls", "leaves", "work"]


@dataclass(frozen=True, slots=True)
class Storing:
    """What stores a state in one function: its key, the variables whose value it is given, functions that store it."""

    function: Function
    key: str
    variables: frozenset[str]
    setters: frozenset[str]


def storing(work: Work, scan: Scan, seen: Seen) -> Storing:
    """The ways in which a function stores a state."""
    key = seen.key.key
    variables = {alias.variable for alias in scan.aliases if alias.key.key == key and not alias.anywhere}
    for _, statement, _ in seen.stores:
        inner = uncast(statement.value) if isinstance(statement, Assign) else None
        if isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
            if inner.place.variable.storage != "parameter":
                variables.add(inner.place.variable.identity)
    setters = {
        other.function.name
        for other in work.scans
        for found in [other.keys.get(key)]
        if found is not None and found.stores and (stores_parameter(found) or not found.read_instances)
    }
    return Storing(scan.function, key, frozenset(variables), frozenset(setters))


def stores(ways: Storing, statement: Statement) -> bool:
    """Whether a statement stores the state or what will be stored in it."""
    if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
        if statement.callee.name in ways.setters:
            return True
    place = statement.place if isinstance(statement, Assign) else getattr(statement, "result", None)
    if place is None:
        return False
    if isinstance(place, VariablePlace) and place.variable.identity in ways.variables:
        return True
    found = place_key(place, ways.function.identity)
    return found is not None and found.key == ways.key


def overwrites(ways: Storing, block: int) -> bool:
    """Whether the code that begins with a block stores the state at once."""
    return any(stores(ways, statement) for statement in ways.function.blocks[block].statements)


def does(ways: Storing, region: Collection[int]) -> Does:
    """What the code of some blocks does."""
    calls = work = leaves = False
    for number in sorted(region):
        for statement in ways.function.blocks[number].statements:
            if stores(ways, statement):
                return "stores"
            work = work or isinstance(statement, Assign)
            calls = calls or isinstance(statement, Call)
        leaves = leaves or isinstance(ways.function.blocks[number].terminator, Return)
    return "calls" if calls else "work" if work else "leaves" if leaves else "nothing"


def default_region(function: Function, switch: Switch, block: int, fallen_into: bool) -> frozenset[int]:
    """The blocks that are the default's alone; with those that a case runs on into, where one does."""
    if fallen_into and _is_empty(function, switch, block):
        return frozenset()
    others: set[int] = set()
    for case in switch.cases:
        others |= _until(function, case.target, {block, switch.default} if fallen_into else {block})
    return blocks_from(function, switch.default, block) - others


def _is_empty(function: Function, switch: Switch, block: int) -> bool:
    """Whether a default that a case runs on into has no code, so that its block is the one after the ``switch``."""
    first = function.blocks[switch.default]
    if not first.statements and isinstance(first.terminator, Return | Jump):
        return True
    at = (*(statement.position for statement in first.statements), getattr(first.terminator, "position", None))[0]
    label = switch.syntax.default
    if label is None or at is None or (at.file == label.file and at.line > switch.syntax.end):
        return True
    before = max((case for case in switch.cases if case.position < label), key=lambda case: case.position, default=None)
    return before is not None and any(
        switch.default in _until(function, case.target, {block, before.target})
        for case in switch.cases
        if case.target != before.target
    )


def default_fall(
    work: Work, ways: Storing, switch: Switch, block: int, region: Collection[int], source: Position, marked: bool
) -> DefaultFall:
    """A case that runs on into the default: whether that undoes what it stored, or takes the state for a fault."""
    function = ways.function
    cases: set[int] = set()
    for case in switch.cases:
        cases |= _until(function, case.target, {block, switch.default})
    undone = (
        bool(region)
        and overwrites(ways, switch.default)
        and any(
            stores(ways, statement)
            for number in cases
            if switch.default in blocks_from(function, number, block)
            for statement in function.blocks[number].statements
        )
    )
    called = tuple(dict.fromkeys(name for name in _called(function, region) if faults(name)))
    return DefaultFall(work.names.origin(source), marked, undone, called)


def _called(function: Function, region: Collection[int]) -> Iterator[str]:
    for number in sorted(region):
        for statement in function.blocks[number].statements:
            if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                yield statement.callee.name


def _until(function: Function, start: int, stops: Collection[int]) -> frozenset[int]:
    """The blocks that control can come to from one without passing those that stop it."""
    seen = {start}
    pending = [start]
    while pending:
        for target in successors(function.blocks[pending.pop()].terminator):
            if target not in seen and target not in stops:
                seen.add(target)
                pending.append(target)
    return frozenset(seen)
