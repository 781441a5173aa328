"""Two rings in one call: what is to move or copy elements from one ring into another of the same structure.

The one idea: a second ring is made beside the first, set up as it was, and both are brought to many states by plain
puts and takes. The function is judged only by its own reading: where it does in most states what one of four readings
says (elements go from the first to the second or back, and are dropped where they came from or stay), the states in
which the contents are others show what it does wrong.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import TypeAlias

from stepring.paths.interpreter import run
from stepring.paths.replay import Unfit, prepared
from stepring.paths.types import Undefined, Unsettled
from stepring.paths.witness import Reference, StartValue, Value, Witness, WitnessCall
from stepring.shapes.ring_calls import Purse, call
from stepring.shapes.ring_compare import fault
from stepring.shapes.ring_ideal import Content
from stepring.shapes.ring_parameters import RING, STORAGE, Operation
from stepring.shapes.ring_report import Made, Search, State, content_report, made_of, shown, suspected
from stepring.shapes.ring_uses import SMALL, Probe, Use, drained, perform
from stepring.shapes.ring_world import World

TWIN, TWIN_STORAGE = "second_ring", "second_storage"
BUDGET = 400_000
"""Interpreter steps for one function."""
LEAST = 3
"""In how many states a function must do what a reading says before it is judged by it."""
Reading: TypeAlias = Callable[[Content, Content, int], tuple[Content, Content]]


def _moved(one: Content, other: Content, room: int) -> tuple[Content, Content]:
    count = min(len(other), room - len(one))
    return (*one, *other[:count]), other[count:]


def _copied(one: Content, other: Content, room: int) -> tuple[Content, Content]:
    return _moved(one, other, room)[0], other


def _turned(reading: Reading) -> Reading:
    def back(one: Content, other: Content, room: int) -> tuple[Content, Content]:
        to, source = reading(other, one, room)
        return source, to

    return back


READINGS: tuple[Reading, ...] = (_moved, _copied, _turned(_moved), _turned(_copied))
"""What both rings hold after the call, from what they held and how many elements one has room for."""


@dataclass(frozen=True, slots=True)
class _Row:
    """What came of one call: the state before, what both rings held before and hold after."""

    state: State
    before: tuple[Content, Content]
    after: tuple[Content, Content]


def pairs(search: Search) -> None:
    """Report what a function of two rings leaves otherwise than its own reading says."""
    world, put, take = search.world, search.put, search.take
    if put is None or take is None or put.design != "refuses" or not (put.checked and take.checked):
        return
    operations = list(_of_two(world))
    if not operations or world.slots > SMALL or take.first is not None:
        return
    try:
        both = _twins(search)
    except (Unfit, KeyError, ValueError, Undefined, Unsettled):
        return
    if both is None:
        return
    for operation in operations:
        both[0].probe.purse = both[1].probe.purse = Purse(BUDGET)
        _judge(both, Use(operation, "put"))


def _of_two(world: World) -> Iterator[Operation]:
    """The operations that get two pointers to the ring's structure and nothing else; the second is the twin."""
    types = {item.name: item.type for item in world.base.made}
    for operation in world.operations:
        if operation.helper or len(operation.parameters) != 2 or not operation.has("ring"):
            continue
        mine = next(item for item in operation.parameters if item.role == "ring")
        rest = next((item for item in operation.parameters if item.role == "thing"), None)
        if rest is None or mine.to != RING or mine.path or types.get(rest.path) != types.get(RING):
            continue
        parameters = tuple(replace(item, path=TWIN) if item is rest else item for item in operation.parameters)
        yield replace(operation, parameters=parameters)


def _twins(search: Search) -> tuple[Search, Search] | None:
    """The search with its ring and a second one, and the same search seen from the second ring."""
    world, base = search.world, search.base
    if world.storage is None or any(item.object in (TWIN, TWIN_STORAGE) for item in base.start):
        return None
    made = [
        replace(item, name={RING: TWIN, STORAGE: TWIN_STORAGE}[item.name])
        for item in base.made
        if item.name in (RING, STORAGE)
    ]
    start = [StartValue(TWIN, item.path, _twin_value(item.value)) for item in base.start if item.object == RING]
    watched = tuple((f"second {name}", TWIN, path) for name, owner, path in base.watched if owner == RING)
    if len(watched) != len(world.places):
        return None
    calls = tuple(_twin_call(item) for item in base.calls)
    whole: Witness = replace(
        base,
        made=(*base.made, *made),
        start=(*base.start, *start),
        calls=(*base.calls, *calls),
        watched=(*base.watched, *watched),
    )
    memory = prepared(world.group.program, whole)
    world.group.program.grow(memory)
    numbers = [number for number, cells in enumerate(world.memory.cells) if any(cells is kept for kept in world.kept)]
    kept = [memory.cells[number] for number in numbers]
    name = world.storage.name
    if name not in (RING, STORAGE):
        return None
    views = []
    for ring, storage in ((RING, name), (TWIN, TWIN if name == RING else TWIN_STORAGE)):
        places = tuple((shown_as, ring, path, role) for shown_as, _, path, role in world.places)
        readers = [(*memory.address(owner + path)[:2], memory.type_at(owner + path)) for _, owner, path, _ in places]
        view = replace(
            world,
            base=whole,
            memory=memory,
            storage=memory.names[storage][0],
            places=places,
            readers=readers,
            kept=kept,
            pointers={},
            operations=tuple(_on(item, ring) for item in world.operations),
        )
        views.append(view)
    for made_call in whole.calls:
        given = [views[0].pointer(item) for item in made_call.arguments]
        done = run(world.group.program, made_call.function, given, lambda *_: 0, steps=5000, memory=memory)
        if done.kind != "returned":
            return None
    saved = views[0].save()
    first, second = (
        replace(
            search,
            probe=Probe(view, search.probe.purse, saved),
            base=whole,
            put=_use_on(search.put, ring),
            take=_use_on(search.take, ring),
        )
        for view, ring in zip(views, (RING, TWIN), strict=True)
    )
    return first, second


def _twin_value(value: Value) -> Value:
    if isinstance(value, Reference) and value.to in (RING, STORAGE):
        return replace(value, to=TWIN if value.to == RING else TWIN_STORAGE)
    return value


def _twin_call(made: WitnessCall) -> WitnessCall:
    return replace(made, arguments=tuple(_twin_value(item) for item in made.arguments))


def _on(operation: Operation, ring: str) -> Operation:
    parameters = tuple(
        replace(item, to=ring) if item.role == "ring" and item.to == RING else item for item in operation.parameters
    )
    return replace(operation, parameters=parameters)


def _use_on(use: Use | None, ring: str) -> Use | None:
    return None if use is None else replace(use, operation=_on(use.operation, ring))


def _judge(both: tuple[Search, Search], use: Use) -> None:
    rows = list(_rows(both, use))
    telling = [row for row in rows if all(row.before)]
    room = both[0].room

    def agreed(reading: Reading) -> int:
        return sum(row.after == reading(*row.before, room) != row.before for row in telling)

    reading = max(READINGS, key=agreed)
    if agreed(reading) < LEAST or 2 * agreed(reading) < sum(reading(*r.before, room) != r.before for r in telling):
        return
    for row in rows:
        for at, side in enumerate(both):
            due, now = reading(*row.before, room)[at], row.after[at]
            if now != due and _report(side, row, use, due, now):
                return


def _report(side: Search, row: _Row, use: Use, due: Content, now: Content) -> bool:
    """Report what one of the rings holds after the call; True if its witness held."""
    side.world.load(row.state.saved)
    effect = call(side.world, use.operation, use.way, side.probe.purse)
    count = len(side.found)
    state = replace(row.state, suspect=suspected(side, row.state, use, effect, {}))
    what = f"after {use.name} a ring gives {shown(now)} where {shown(due)} is due"
    content_report(side, state, use, "order", what, due, now)
    return len(side.found) > count


def _rows(both: tuple[Search, Search], use: Use) -> Iterator[_Row]:
    """Calls in many states: each ring in turn walks round while the other stands, and both hold all numbers."""
    slots, room = both[0].world.slots, both[0].room
    leads = [(lead, 0) for lead in range(slots)] + [(0, lead) for lead in range(1, slots)]
    for lead in leads:
        for levels in ((one, other) for one in range(room + 1) for other in range(room + 1)):
            state = _brought(both, lead, levels)
            if state is None or both[0].spent:
                return
            effect = call(both[0].world, use.operation, use.way, both[0].probe.purse)
            if fault(both[0], state[0], use, effect):
                continue
            saved = both[0].world.save()
            after: list[Content] = []
            for side in both:
                side.world.load(saved)
                assert side.take is not None
                after.append(drained(side.probe, side.take, 2 * room + 2)[0])
            yield _Row(state[0], state[1], (after[0], after[1]))


def _brought(
    both: tuple[Search, Search], lead: tuple[int, int], levels: tuple[int, int]
) -> tuple[State, tuple[Content, Content]] | None:
    """Both rings after so many puts and takes, holding so many elements; None if that does not go well."""
    both[0].probe.back()
    one = filled_to(both[0], lead[0], levels[0], 0)
    if one is None:
        return None
    other = filled_to(both[1], lead[1], levels[1], one[2])
    if other is None:
        return None
    return State(both[0].world.save(), one[0], (*one[1], *other[1]), other[2]), (one[0], other[0])


def filled_to(side: Search, turns: int, level: int, token: int) -> tuple[Content, tuple[Made, ...], int] | None:
    """What a ring holds after so many puts and takes and then so many puts, with the calls and the next token.

    None if that does not go well. The memory is changed.
    """
    assert side.put is not None and side.take is not None
    calls: list[Made] = []
    held: list[int] = []
    for number in range(turns + level):
        given = perform(side.world, side.put, side.probe.purse, token=token)
        token += 1
        if not given.returned or len(given.stored) != 1:
            return None
        calls.extend(made_of(side, given))
        if number >= turns:
            held.append(given.stored[0][1])
            continue
        taken = perform(side.world, side.take, side.probe.purse)
        if not taken.returned or taken.refused:
            return None
        calls.extend(made_of(side, taken))
    return tuple(held), tuple(calls), token
