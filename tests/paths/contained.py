"""Whether what a run of a program does lies in what the values engine says of it.

The interpreter tells of every store, test, call and return; each must be a step that the engine holds reachable, with
values inside the intervals that hold there. Between the calls of a program's entries, every lasting integer must lie
in the range that the program's summary gives its cell, under each of the cell's names.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field

from stepring.meaning.show import expr_text, place_text
from stepring.meaning.types import (
    ArrayType,
    Assign,
    Branch,
    Call,
    CType,
    Expr,
    Function,
    IntType,
    MemberPlace,
    PlaceExpr,
    Return,
    StructType,
    Switch,
    TypedUnit,
)
from stepring.paths.memory import Memory
from stepring.paths.types import Event
from stepring.values.engine import FunctionValues
from stepring.values.initial import shared_cells
from stepring.values.intervals import contains, number_type
from stepring.values.program import ProgramValues, summarise
from stepring.values.states import View
from stepring.values.types import Cell, Interval, VariableCell

Claim = Callable[[object], str]
"""Given what an event brings, why that is wrong; empty where it is not."""


@dataclass(slots=True, eq=False)
class Watch:
    """What the engine claims of one unit that is a whole program, and what was seen to break it.

    ``seen`` counts the values that were compared, ``broken`` lists those outside.
    """

    unit: TypedUnit
    summary: ProgramValues
    functions: dict[str, Function]
    claims: dict[str, dict[tuple[object, ...], list[Claim]]] = field(default_factory=dict)
    seen: int = 0
    broken: list[str] = field(default_factory=list)

    def observe(self, event: Event) -> None:
        """Hold what the interpreter did against what was claimed of it."""
        known = self.claims.get(event.function)
        if known is None:
            function = self.functions[event.function]
            known = self.claims[event.function] = claims_of(function, self.summary.of(function), self.unit)
        # Two statements may have one place and one spelling (a statement in a macro): one of them was run.
        wrong = [claim(event.value) for claim in known[event.kind, event.position, event.text]]
        self.seen += 1
        if all(wrong):
            self.broken.append(f"{event.function}:{event.position.line}: {event.kind} {event.text}: {wrong[0]}")

    def look(self, memory: Memory) -> None:
        """Hold every lasting integer against its cell's range."""
        for item in self.unit.objects:
            variable = item.variable
            for path, text in _integers(self.unit, variable.type, (), variable.identity):
                value = memory.read(text)
                names: list[Cell] = [VariableCell(variable.identity, path)]
                if variable.identity in self.summary.exposure.variables:
                    names += shared_cells(variable.type, path, self.summary.exposure)
                for cell in names:
                    self.seen += 1
                    wrong = _outside(self.summary.value(cell), value)
                    if wrong:
                        self.broken.append(f"{text} as {cell}: {wrong}")


def watch(unit: TypedUnit) -> Watch:
    """A unit that is a whole program, analysed."""
    summary = summarise(unit.functions, unit.objects, lambda cell: True, structs=unit.types.structs, closed=True)
    return Watch(unit, summary, {function.name: function for function in unit.functions})


def claims_of(function: Function, values: FunctionValues, unit: TypedUnit) -> dict[tuple[object, ...], list[Claim]]:
    """What is claimed of every step of a function that the interpreter tells of."""
    found: dict[tuple[object, ...], list[Claim]] = {}
    for number, block in enumerate(function.blocks):
        for step, statement in enumerate((*block.statements, block.terminator)):
            view = values.before(number, step)
            after = values.before(number, step + 1)
            if isinstance(statement, Assign):
                key: tuple[object, ...] = ("store", statement.position, place_text(statement.place))
                found.setdefault(key, []).append(_stored(unit, view, after, statement.value, statement.place))
            elif isinstance(statement, Call):
                key = ("call", statement.position, expr_text(statement.callee))
                found.setdefault(key, []).append(_passed(view, statement.arguments))
                if statement.result is not None:
                    key = ("store", statement.position, place_text(statement.result))
                    found.setdefault(key, []).append(_stored(unit, view, after, None, statement.result))
            elif isinstance(statement, Branch):
                key = ("branch", statement.position, expr_text(statement.condition))
                found.setdefault(key, []).append(_tested(view, statement.condition))
            elif isinstance(statement, Switch):
                key = ("switch", statement.syntax.position, expr_text(statement.value))
                found.setdefault(key, []).append(_passed(view, (statement.value,)))
            elif isinstance(statement, Return):
                text = expr_text(statement.value) if statement.value is not None else ""
                given = (statement.value,) if statement.value is not None else ()
                found.setdefault(("return", statement.position, text), []).append(_passed(view, given))
    return found


_UNREACHED = "it is said never to be reached"


def _outside(found: Interval | None, value: object) -> str:
    if found is None or not isinstance(value, int) or contains(found, value):
        return ""
    return f"{value} is not in {found}"


def _limits(view: View, expression: Expr) -> Interval | None:
    return view.evaluate(expression) if number_type(expression.type) is not None else None


def _stored(unit: TypedUnit, view: View | None, after: View | None, expression: Expr | None, place: PlaceExpr) -> Claim:
    if view is None or after is None:
        return lambda value: _UNREACHED
    first = _limits(view, expression) if expression is not None else None
    kind = number_type(place.type)
    # A bit-field keeps only part of what is stored into it.
    second = after.read(place) if kind is not None and not _bits(unit, place) else None
    return lambda value: _outside(first, value) or _outside(second, value)


def _bits(unit: TypedUnit, place: PlaceExpr) -> bool:
    if not isinstance(place, MemberPlace):
        return False
    member = unit.types.structs[place.struct].field(place.name)
    return member is not None and member.bits is not None


def _passed(view: View | None, expressions: tuple[Expr, ...]) -> Claim:
    if view is None:
        return lambda value: _UNREACHED
    limits = [_limits(view, expression) for expression in expressions]

    def claim(value: object) -> str:
        given = value if isinstance(value, list) else [value]
        return next(filter(None, map(_outside, limits, given)), "")

    return claim


def _tested(view: View | None, condition: Expr) -> Claim:
    if view is None:
        return lambda value: _UNREACHED
    limits = _limits(view, condition)
    if limits is None:
        return lambda value: ""
    sure = None if contains(limits, 0) and limits != Interval(0, 0, 0) else not contains(limits, 0)
    return lambda value: "" if sure is None or sure == value else f"it is {value}, said to be {limits}"


def _integers(unit: TypedUnit, kind: CType, path: tuple[str, ...], text: str) -> Iterator[tuple[tuple[str, ...], str]]:
    """The integers of an object: their cell's path, and the text by which a memory knows them. Unions are left out."""
    structs = unit.types.structs
    if isinstance(kind, IntType):
        yield path, text
    elif isinstance(kind, ArrayType):
        for index in range(kind.length or 0):
            yield from _integers(unit, kind.element, (*path, "[]"), f"{text}[{index}]")
    elif isinstance(kind, StructType) and not structs[kind.identity].union:
        for member in structs[kind.identity].fields:
            if member.name:
                yield from _integers(unit, member.type, (*path, "." + member.name), f"{text}.{member.name}")
