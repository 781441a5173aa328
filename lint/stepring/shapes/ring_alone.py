"""Rings that nothing can be compared with: what only stores is called again and again, and its slots are looked at."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from stepring.meaning.types import IntType
from stepring.paths.witness import Ending, StartValue
from stepring.shapes.ring_calls import Effect, Way, about_storage
from stepring.shapes.ring_compare import NEAR_END, call_from, fault
from stepring.shapes.ring_report import Search, State, index_ending, index_store, made_of, report
from stepring.shapes.ring_uses import (
    Use,
)
from stepring.shapes.ring_world import World

Odd = Mapping[tuple[str, Any, Any], int]
"""Steps of indices that are wrong, as (shown name, before, after), with what should come after."""


HUGE = (250, 1000, 60_000)
"""Numbers that no ring of those tried has as many slots as."""


def odd_steps(world: World) -> Odd:
    """The steps of the ring's indices that are known to be wrong from their code."""
    return {
        (index.name.rsplit(".", 1)[-1], before, after): due
        for index in world.ring.indices
        for step in index.steps
        for before, after, due in getattr(step, "odd", ())
    }


def alone(search: Search, odd: Odd) -> None:
    """Call each operation that can be entered again and again, as a history's only writer is; look at the slots.

    Nothing is compared with a queue here: what counts are accesses outside the storage, and the steps of an index that
    its own code was found to take wrongly (``odd``).
    """
    world = search.world
    pair = [next((use for use in search.probe.uses if use.kind == kind), None) for kind in ("put", "take")]
    if pair[0] is not None and pair[1] is not None and _again(search, [use for use in pair if use], odd):
        return
    for operation in world.operations:
        if operation.helper or operation.has("length") or operation.has("null") or operation.has("other"):
            continue
        for way in (Way("token"), Way("once", operation.has("buffer"))):
            if _again(search, [Use(operation, "put", way)], odd) or search.spent:
                break
    if not search.found and (search.put is None or search.take is None):
        _past_overflow(search, odd)


def _past_overflow(search: Search, odd: Odd) -> None:
    """Again from just before the overflow of an index that counts on and is reduced where it is used.

    Of several that do no one value of the others is known to go with it.
    """
    counting = [
        index
        for index in search.world.ring.indices
        if index.role == "count" or any(step.wrap == "free-running" for step in index.steps)
    ]
    if len(counting) != 1:
        return
    world, base = search.world, search.base
    for at, index in enumerate(world.ring.indices):
        type_ = world.readers[at][2]
        free = index.role != "count" and any(step.wrap == "free-running" for step in index.steps)
        if not free or not isinstance(type_, IntType) or not 8 < type_.width <= 32:
            continue
        start = type_.high - NEAR_END
        _, name, path, _ = world.places[at]
        search.probe.back()
        world.memory.write(name + path, start)
        kept = tuple(item for item in base.start if (item.object, item.path) != (name, path))
        said = f"{start} elements have been put in before"
        fixed = StartValue(name, path, start)
        search.base = replace(base, start=(*kept, fixed), calls=(), assumed=(*base.assumed, said))
        saved = world.save()
        for use in search.probe.uses:
            if use.kind == "put" and not use.operation.helper:
                _again(search, [use], odd, saved)
        search.base = base


def _again(search: Search, uses: Sequence[Use], odd: Odd, start: Any = None) -> bool:
    """Call some operations in turn until an index has been round, or round its type; True if something was reported."""
    world = search.world
    state = State(search.probe.start if start is None else start, (), (), 0)
    world.load(state.saved)
    turns = len(uses) * max(2 * world.slots + 2, 300 if _narrow(world) else 0)
    slot: int | None = None
    steps: set[int] = set()
    for number in range(turns):
        use = uses[number % len(uses)]
        effect = call_from(search, state, use)
        if effect.outcome.kind == "undefined" and about_storage(world, effect):
            return blameless(search, state, use, {}) and fault(search, state, use, effect)
        if not effect.returned or (number > 3 and effect.before == effect.after):
            return False
        if odd_step(search, state, use, effect, odd):
            return True
        if len(effect.stored) == 1 and use.kind == "put":
            now = effect.stored[0][0]
            if slot is not None:
                steps.add((now - slot) % world.slots)
                overflown = [at for at in range(len(effect.before)) if _overflown(state, effect, at)]
                if len(steps) == 2 and number > 2 and overflown:
                    return _other_slot(search, state, use, effect, slot, now)
                if len(steps) > 1:
                    return False
            slot = now
        state = State(world.save(), (), (*state.run, *made_of(search, effect)), number + 1)
    return False


def _overflown(state: State, effect: Effect, at: int) -> bool:
    """Whether an index fell from far above in the call before this one, or in this one."""
    values = [effect.before[at], effect.after[at]]
    if state.run and at < len(state.run[-1].values):
        earlier = state.run[-2].values[at] if len(state.run) > 1 else values[0]
        values.insert(0, earlier)
    return all(isinstance(value, int) for value in values) and values[0] - min(values) > 100


def _other_slot(search: Search, state: State, use: Use, effect: Effect, before: int, now: int) -> bool:
    """Report that the row of slots breaks where an index overflows."""
    position, function = index_store(search, state, use, {})
    where = search.origin(position)
    ending = index_ending(search, effect, where, "a value whose slot follows")
    what = f"{use.name} stores into slot {now} after slot {before}, once the counter has overflowed"
    report(search, state, effect, "overflow", what, position, function, ending)
    return True


def odd_step(search: Search, state: State, use: Use, effect: Effect, odd: Odd) -> bool:
    """Report a step of an index that its code was found to take wrongly, where a call takes it."""
    for at, (place, old, new) in enumerate(zip(search.world.places, effect.before, effect.after, strict=True)):
        due = odd.get((place[0], old, new))
        if due is not None and old != new:
            position, function = index_store(search, state, use, {})
            _, name, path, _ = search.world.places[at]
            ending = Ending("value", search.origin(position), None, name + path, str(new), str(due))
            what = f"{use.name} moves {place[0]} from {old} to {new}, where {due} comes next"
            report(search, state, effect, "slots", what, position, function, ending)
            return True
    return False


def _narrow(world: World) -> bool:
    """Whether some index is of one byte, so that all its values are soon gone through."""
    return any(isinstance(reader[2], IntType) and reader[2].width <= 8 for reader in world.readers)


def blameless(search: Search, state: State, use: Use, given: Mapping[str, int]) -> bool:
    """Whether a call that goes wrong does so without numbers, or with one that the function would refuse if too large.

    The memory is changed.
    """
    numbers = [name for name, role in (("number", "value"), ("length", "length")) if use.operation.has(role)]  # type: ignore[arg-type]
    if not numbers:
        return True
    none = call_from(search, state, use, **{**given, **dict.fromkeys(numbers, 0)})
    if not none.returned and about_storage(search.world, none):
        return True
    for huge in HUGE:
        more = call_from(search, state, use, **{**given, **dict.fromkeys(numbers, huge)})
        if not more.returned or more.before != more.after or more.stored:
            return False
    return True
