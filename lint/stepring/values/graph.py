"""A function's graph prepared for propagation: an order of its blocks, the heads of its loops, the constants in it."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Final

from stepring.meaning.builder import successors
from stepring.meaning.types import (
    ArrayType,
    Const,
    Function,
    Switch,
    Terminator,
)
from stepring.values.scan import expressions_of, walk_deep

WIDTHS: Final = (8, 16, 32, 64)


@dataclass(frozen=True, slots=True)
class Shape:
    """A function's graph prepared: block numbers in reverse postorder, the heads of loops, widening thresholds."""

    order: Mapping[int, int]
    heads: frozenset[int]
    thresholds: Sequence[int]


_shapes: dict[int, tuple[Function, Shape]] = {}


def shape_of(function: Function) -> Shape:
    """The prepared graph of a function, computed once."""
    known = _shapes.get(id(function))
    if known is not None and known[0] is function:
        return known[1]
    shape = _find_shape(function)
    if len(_shapes) > 4096:
        _shapes.clear()
    _shapes[id(function)] = (function, shape)
    return shape


def targets_of(terminator: Terminator) -> tuple[int, ...]:
    """The blocks that may follow, without repetition."""
    return tuple(dict.fromkeys(successors(terminator)))


def _find_shape(function: Function) -> Shape:
    finished: list[int] = []
    heads: set[int] = set()
    state: dict[int, int] = {0: 1}
    stack = [(0, iter(targets_of(function.blocks[0].terminator)))]
    while stack:
        block, rest = stack[-1]
        target = next(rest, None)
        if target is None:
            stack.pop()
            state[block] = 2
            finished.append(block)
        elif target not in state:
            state[target] = 1
            stack.append((target, iter(targets_of(function.blocks[target].terminator))))
        elif state[target] == 1:
            heads.add(target)
    order = {block: place for place, block in enumerate(reversed(finished))}
    values: set[int] = {0}
    for width in WIDTHS:
        values.update((-(1 << (width - 1)), (1 << (width - 1)) - 1, (1 << width) - 1))
    for block in order:
        here = function.blocks[block]
        for step in (*here.statements, here.terminator):
            for expression in expressions_of(step):
                for part in walk_deep(expression):
                    if isinstance(part, Const):
                        values.update((part.value - 1, part.value, part.value + 1))
        if isinstance(here.terminator, Switch):
            values.update(case.low for case in here.terminator.cases)
            values.update(case.high for case in here.terminator.cases)
    for variable in function.variables:
        if isinstance(variable.type, ArrayType) and variable.type.length is not None:
            values.update((variable.type.length - 1, variable.type.length))
    return Shape(order, frozenset(heads), sorted(values))
