"""The functions of a program as callees: which one a name means, which are run in place, what others may change."""

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Final

from stepring.meaning.types import (
    Assign,
    Call,
    Clobber,
    Function,
    FunctionName,
    Object,
)
from stepring.values.exposure import all_expressions
from stepring.values.frames import Frame
from stepring.values.graph import shape_of
from stepring.values.intervals import number_type
from stepring.values.library import CONTRACTS
from stepring.values.scan import places_of, walk_deep
from stepring.values.spots import Exposure, Places
from stepring.values.surroundings import Effect
from stepring.values.types import Cell, FieldCell

HEAVIEST: Final = 40
"""Statements and blocks of a callee that is run in place, at most, those of its own such callees included."""
LIGHT: Final = 14
"""The same for a function with external linkage, which seldom does half of what its caller does."""


@dataclass(frozen=True, slots=True)
class _Written:
    """What a function stores into, as its text says: cells, through pointers to scalars, or what cannot be told."""

    cells: frozenset[Cell]
    pointees: bool
    outward: bool
    calls: frozenset[str]


def resolver(functions: Iterable[Function]) -> Callable[[str, Function], Function | None]:
    """How a name in a caller leads to a function: a static one of the same file, else the one with external linkage,
    else a
    header's."""
    named: dict[str, list[Function]] = {}
    for function in functions:
        named.setdefault(function.name, []).append(function)

    def resolve(name: str, caller: Function) -> Function | None:
        candidates = named.get(name, ())
        if not candidates:
            return None
        for candidate in candidates:
            if candidate.position.file == caller.position.file:
                return candidate
        outer = [candidate for candidate in candidates if not candidate.static]
        if outer:
            return outer[0] if len({candidate.identity for candidate in outer}) == 1 else None
        inline = [candidate for candidate in candidates if not candidate.position.file.endswith((".c", ".i", ".C"))]
        return inline[0] if len(inline) == 1 else None

    return resolve


class Callees:
    """A program's functions as callees: which one a name means, which are run in place, what others may change."""

    def __init__(
        self,
        functions: Sequence[Function],
        objects: Sequence[Object],
        exposure: Exposure,
        steady: Callable[[Cell], bool],
        foreign: Callable[[Cell], bool],
    ) -> None:
        self.functions = {function.identity: function for function in functions}
        self.resolve = resolver(self.functions.values())
        self.exposure = exposure
        self._steady = steady
        self._foreign = foreign
        self._weights: dict[str, int] = {}
        self._constants: dict[str, Sequence[int]] = {}
        self._all: Sequence[int] | None = None
        self.hidden = self._find_hidden(functions, objects)
        self.effects = self._find_effects()

    def body(self, name: str, caller: Function) -> Function | None:
        body = self.resolve(name, caller)
        if body is None:
            return None
        weight = self._weight(body)
        return body if weight <= (HEAVIEST if body.static else LIGHT) else None

    def size(self, identity: str) -> int:
        """The size of a function itself, in statements and blocks."""
        return sum(1 + len(block.statements) for block in self.functions[identity].blocks)

    def _weight(self, function: Function) -> int:
        """The size of a function with the callees that are run in place in it; a recursive one is too heavy."""
        known = self._weights.get(function.identity)
        if known is not None:
            return known
        self._weights[function.identity] = HEAVIEST + 1
        weight = self.size(function.identity)
        for block in function.blocks:
            for statement in block.statements:
                if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                    callee = self.resolve(statement.callee.name, function)
                    inner = self._weight(callee) if callee is not None else 0
                    weight += inner if inner <= HEAVIEST else 0
        self._weights[function.identity] = weight
        return weight

    def _find_hidden(self, functions: Sequence[Function], objects: Sequence[Object]) -> frozenset[str]:
        """Static functions that are only ever called by name, so that all their calls are seen."""
        uses: set[str] = set()
        for function in functions:
            callees = {
                id(statement.callee)
                for block in function.blocks
                for statement in block.statements
                if isinstance(statement, Call)
            }
            for expression in all_expressions(function):
                if isinstance(expression, FunctionName) and id(expression) not in callees:
                    uses.add(expression.name)
        for item in objects:
            for initial in item.initial:
                for part in walk_deep(initial.value):
                    if isinstance(part, FunctionName):
                        uses.add(part.name)
        return frozenset(
            function.identity
            for function in functions
            if function.static and not function.attributes and function.name not in uses
        )

    def reached_from(self, roots: Sequence[str]) -> frozenset[str]:
        """The functions that some functions call, directly or not, themselves included."""
        seen = set(roots)
        waiting = list(roots)
        while waiting:
            fresh = self._calls.get(waiting.pop(), frozenset()) - seen
            seen |= fresh
            waiting.extend(fresh)
        return frozenset(seen)

    def _find_effects(self) -> dict[str, Effect]:
        written = {identity: self._writes_of(function) for identity, function in self.functions.items()}
        self._calls = {identity: found.calls for identity, found in written.items()}
        effects: dict[str, Effect] = {}
        for identity in written:
            seen = {identity}
            waiting = [identity]
            cells: set[Cell] = set()
            pointees = outward = False
            while waiting:
                here = written[waiting.pop()]
                cells |= here.cells
                pointees |= here.pointees
                outward |= here.outward
                fresh = here.calls - seen
                seen |= fresh
                waiting.extend(fresh)
            effects[identity] = Effect(
                dict.fromkeys(cells), through_pointers=pointees, outward=outward, callee=identity
            )
        return effects

    def _writes_of(self, function: Function) -> _Written:
        places = Places({}, self.exposure, self._steady, self._foreign)
        frame = Frame(places, function)
        cells: set[Cell] = set()
        calls: set[str] = set()
        pointees = outward = False
        for block in function.blocks:
            for statement in block.statements:
                if isinstance(statement, Clobber):
                    outward = True
                    continue
                for place in places_of(statement):
                    if number_type(place.type) is None:
                        access = frame.access(place)
                        outward |= isinstance(statement, (Assign, Call)) and not (access.local and not access.exposed)
                        continue
                    spot = frame.spot(place)
                    pointees |= spot.pointee
                    if not spot.private and spot.cell is not None:
                        cells.add(spot.cell)
                        for bucket in spot.buckets:
                            if bucket[0] == "member" and isinstance(bucket[1], str):
                                cells.add(FieldCell(bucket[1], tuple(str(step) for step in bucket[2:])))
                if isinstance(statement, Call):
                    name = statement.callee.name if isinstance(statement.callee, FunctionName) else None
                    body = self.resolve(name, function) if name is not None else None
                    if body is not None:
                        calls.add(body.identity)
                    elif name not in CONTRACTS or CONTRACTS[name].writes or CONTRACTS[name].onward is not None:
                        outward = True
        return _Written(frozenset(cells), pointees, outward, frozenset(calls))

    def forgets(self, identity: str, names: set[Cell]) -> bool:
        """Whether a caller takes a cell, by any of its names, for changed after a call of the function.

        Where the call leads on to unknown code the caller itself notes what it leaves.
        """
        effect = self.effects[identity]
        if effect.through_pointers and not names.isdisjoint(self.exposure.cells):
            return True
        return any(name in effect.writes for name in names)

    def thresholds(self, identity: str) -> Sequence[int]:
        """The constants of a function and of the callees that may be run in place in it."""
        known = self._constants.get(identity)
        if known is None:
            seen = {identity}
            waiting = [identity]
            values: set[int] = set()
            while waiting:
                function = self.functions[waiting.pop()]
                values.update(shape_of(function).thresholds)
                for expression in all_expressions(function):
                    if isinstance(expression, FunctionName):
                        body = self.body(expression.name, function)
                        if body is not None and body.identity not in seen:
                            seen.add(body.identity)
                            waiting.append(body.identity)
            known = self._constants[identity] = sorted(values)
        return known

    def all_thresholds(self) -> Sequence[int]:
        """The constants of all functions."""
        if self._all is None:
            self._all = sorted(
                {value for function in self.functions.values() for value in shape_of(function).thresholds}
            )
        return self._all
