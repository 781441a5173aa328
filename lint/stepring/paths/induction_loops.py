"""Candidates for what a loop's own variables keep: where a counter stays, what two counters add up to.

A loop's head forgets the variables that the loop changes. These relations give back what most loops over storage rest
on: a counter does not fall below its first value, does not pass a variable that the loop leaves alone or the ring's
capacity; while one variable counts up another counts down.
"""

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from stepring.meaning.types import IntType
from stepring.paths.symbolic_memory import Pointer, State
from stepring.paths.symbolic_terms import Number, Truth, bits, compared, equal, stretch
from stepring.paths.symbolic_types import Point, Trace

MOST_VARIABLES = 6
MOST_OTHERS = 8

Mark = tuple[int, str]


@dataclass(frozen=True, slots=True, eq=False)
class LoopRelation:
    """A candidate of one loop; ``mark`` tells the loop apart. The formula takes the state at the head."""

    text: str
    mark: str
    formula: Callable[[State], Truth]


def loop_relations(
    trace: Trace, began: Point, head: Point, number: int, views: Sequence[Any], ends: Sequence[Callable[[Any], Number]]
) -> Iterator[LoopRelation]:
    """The candidates of a loop; ``ends`` give the capacities of the objects that are touched."""
    mark = f" [loop {number}.{head.loop}]"
    types = trace.types
    moved = [name for name in head.moved if name in head.state.local and isinstance(types.get(name), IntType)]
    moved = moved[:MOST_VARIABLES]
    width = views[0].width if views else 66
    width = max([width, *(_type(trace, name).width + 2 for name in moved)])
    others = [
        name
        for name, value in sorted(head.state.local.items(), key=lambda item: str(item[0]))
        if name[0] == head.frame
        and name not in head.moved
        and isinstance(types.get(name), IntType)
        and value is not None
        and not name[1].startswith("%")
    ][:MOST_OTHERS]

    def wide(state: State, name: Mark) -> Number:
        value = state.local.get(name)
        return stretch(value, _type(trace, name), width) if value is not None else 0

    def relation(text: str, formula: Callable[[State], Truth]) -> LoopRelation:
        return LoopRelation(text + mark, mark, formula)

    def order(left: Mark, right: Number, op: str) -> Callable[[State], Truth]:
        return lambda state: compared(op, wide(state, left), right, width, True)

    for name in moved:
        first = wide(began.state, name) if name in began.state.local else None
        if _type(trace, name).signed:
            yield relation(f"{name} >= 0", order(name, 0, ">="))
        if first is not None:
            yield relation(f"{name} >= first", order(name, first, ">="))
            yield relation(f"{name} <= first", order(name, first, "<="))
        for at, view in enumerate(views):
            for which, end in enumerate(ends):
                limit = end(view)
                if not isinstance(limit, int) and limit.size() < width:
                    import z3

                    limit = z3.SignExt(width - limit.size(), limit)
                yield relation(f"{name} < end {at}.{which}", order(name, limit, "<"))
                yield relation(f"{name} <= end {at}.{which}", order(name, limit, "<="))
        for other in others:
            yield relation(f"{name} <= {other}", order(name, wide(head.state, other), "<="))
    for place, one in enumerate(moved):
        for other in moved[place + 1 :]:
            if one in began.state.local and other in began.state.local:
                yield from _pair(relation, wide, began, one, other, width)
    pointers = [name for name in head.moved if isinstance(head.state.local.get(name), Pointer)][:MOST_VARIABLES]
    for name in pointers:
        yield from _walk(trace, relation, began, name)


def _type(trace: Trace, name: Mark) -> IntType:
    type_ = trace.types[name]
    assert isinstance(type_, IntType)
    return type_


def _pair(
    relation: Callable[[str, Callable[[State], Truth]], LoopRelation],
    wide: Callable[[State, Mark], Number],
    began: Point,
    one: Mark,
    other: Mark,
    width: int,
) -> Iterator[LoopRelation]:
    def total(state: State) -> Number:
        return bits(wide(state, one), width) + bits(wide(state, other), width)

    def apart(state: State) -> Number:
        return bits(wide(state, one), width) - bits(wide(state, other), width)

    whole, away = total(began.state), apart(began.state)
    yield relation(f"{one} + {other}", lambda state: equal(total(state), whole, width))
    yield relation(f"{one} - {other}", lambda state: equal(apart(state), away, width))


def _walk(
    trace: Trace, relation: Callable[[str, Callable[[State], Truth]], LoopRelation], began: Point, name: Mark
) -> Iterator[LoopRelation]:
    width = trace.memories.step
    before = began.state.local.get(name)
    if not isinstance(before, Pointer):
        return

    def steps(state: State) -> Number:
        value = state.local.get(name)
        return value.steps if isinstance(value, Pointer) else 0

    yield relation(f"{name} from 0", lambda state: compared(">=", steps(state), 0, width, True))
    yield relation(f"{name} onward", lambda state: compared(">=", steps(state), before.steps, width, True))
    length = before.array[1] if before.array is not None else None
    if length is not None:
        yield relation(f"{name} inside", lambda state: compared("<", steps(state), length, width, True))
        yield relation(f"{name} to the end", lambda state: compared("<=", steps(state), length, width, True))
