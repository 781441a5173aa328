"""What is asked of a ring beyond its order: an element that looks like no element, and the slots that a look promises.

A take whose result is wider than an element has room to say that there is nothing; where the result for some element is
the same, its caller cannot tell. Of a ring that only gives out slot numbers the elements are not seen, but a look at
the next slot and the operation that then gives it must name the same.
"""

from collections.abc import Iterator

from stepring.meaning.types import IntType
from stepring.paths.witness import Ending
from stepring.shapes.ring_calls import Effect, Way, call
from stepring.shapes.ring_compare import call_from
from stepring.shapes.ring_parameters import Operation
from stepring.shapes.ring_report import Search, State, made_of, report, return_position
from stepring.shapes.ring_uses import Use, perform

STATES = 200


def all_ones(search: Search) -> None:
    """Report a take that gives for an element of all ones what it gives for none."""
    world, put, take = search.world, search.put, search.take
    if put is None or take is None or take.first is not None or take.channel != "result" or world.element != 1:
        return
    type_ = take.operation.function.type.returns
    given = next((item.type for item in put.operation.parameters if item.role == "value"), None)
    if not isinstance(type_, IntType) or type_.width <= 8 or not type_.signed or not isinstance(given, IntType):
        return
    search.probe.back()
    nothing = perform(world, take, search.probe.purse)
    search.probe.back()
    first = call(world, put.operation, put.way, search.probe.purse, number=-1 if given.signed else 255)
    if not nothing.refused or not first.returned or first.stored != ((0, 255),):
        return
    state = State(world.save(), (255,), made_of(search, first), 1)
    found = perform(world, take, search.probe.purse)
    if found.refused or found.outcome.value != nothing.outcome.value or found.outcome.value == 255:
        return
    value = found.outcome.value
    position = return_position(search, state, take)
    ending = Ending("result", search.origin(position), None, "", str(value), "255")
    what = f"{take.name} returns {value} for the stored element 255, as it does when nothing is stored"
    report(search, state, found, "order", what, position, take.name, ending)


def promised_slots(search: Search) -> None:
    """Report a look at the next slot that names another one than the operation that gives it."""
    world = search.world
    if world.storage is not None:
        return
    plain = [item for item in world.operations if all(one.role == "ring" for one in item.parameters)]
    pairs = [(look, give) for look in plain for give in plain if _looks_for(look, give)]
    if not pairs:
        return
    states = list(_states(search, plain))
    for look, give in pairs:
        uses = Use(look, "look"), Use(give, "take")
        seen = [(state, call_from(search, state, uses[0]), call_from(search, state, uses[1])) for state in states]
        both = [item for item in seen if _slot(item[1]) is not None and _slot(item[2]) is not None]
        gives = {_slot(gave) for _, _, gave in both}
        moves = all(looked.refused and gave.before != gave.after for _, looked, gave in both)
        if len(gives) < world.slots or not moves or not gives <= set(range(world.slots)):
            continue
        for state, looked, gave in both:
            if _slot(looked) != _slot(gave):
                _report(search, state, uses[0], looked, gave, give.function.name)
                break


def _looks_for(look: Operation, give: Operation) -> bool:
    """Whether one function is by its name the look at what the other gives."""
    name = look.function.name
    return "peek" in name and name.replace("peek_", "") == give.function.name


def _slot(effect: Effect) -> int | None:
    value = effect.outcome.value if effect.returned else None
    return value if isinstance(value, int) and value >= 0 else None


def _states(search: Search, operations: list[Operation]) -> Iterator[State]:
    """The states that the operations lead to, nearest first."""
    world = search.world
    search.probe.back()
    pending = [State(search.probe.start, (), (), 0)]
    seen = {world.values()}
    while pending and not search.spent and len(seen) < STATES:
        state = pending.pop(0)
        yield state
        for operation in operations:
            world.load(state.saved)
            effect = call(world, operation, Way(), search.probe.purse)
            if effect.returned and effect.after not in seen:
                seen.add(effect.after)
                pending.append(State(world.save(), (), (*state.run, *made_of(search, effect)), 0))


def _report(search: Search, state: State, look: Use, looked: Effect, gave: Effect, giver: str) -> None:
    position = return_position(search, state, look)
    promised, slot = _slot(looked), _slot(gave)
    ending = Ending("result", search.origin(position), None, "", str(promised), str(slot))
    what = f"{look.name} names slot {promised}, and {giver} then gives slot {slot}"
    report(search, state, looked, "order", what, position, look.name, ending)
