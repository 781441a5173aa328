"""The search: every operation from every state of a small ring, each compared with the ideal queue.

States are searched breadth first, so that the first run that shows a disagreement is a shortest one. A state is what
the ring's functions can see, with elements known by their order instead of their bytes. An operation is only called
where it is due: one that does not look what the ring holds is called only where the ideal has an element, or room.
"""

from collections import deque
from collections.abc import Iterator
from dataclasses import replace
from typing import Any

from stepring.meaning.types import IntType
from stepring.paths.witness import Ending
from stepring.shapes.ring_calls import Effect, about_storage, below
from stepring.shapes.ring_ideal import Content, after_put, is_slice, is_suffix, linear
from stepring.shapes.ring_parameters import GIVEN, TAKEN
from stepring.shapes.ring_report import (
    Search,
    State,
    Suspect,
    content_report,
    index_report,
    index_store,
    made_of,
    moved_text,
    output_report,
    report,
    return_place,
    return_position,
    shown,
    suspected,
)
from stepring.shapes.ring_types import Doubt
from stepring.shapes.ring_uses import (
    SMALL,
    Use,
    drained,
    perform,
)

NEAR_END = 3
"""How many counts before its overflow a counter starts."""


def search_states(search: Search, first: State) -> None:
    """Breadth first over the states that the uses lead to; large rings only along plain ways."""
    world = search.world
    if world.slots > SMALL:
        for state in _plain_ways(search, first):
            for after in _look_round(search, state):
                if after.suspect is not None:
                    _look_round(search, after)
            if search.spent:
                return
        return
    seen = {_key(search, first)}
    pending = deque((first,))
    while pending and not search.spent:
        state = pending.popleft()
        if _is_past(search, state):
            continue
        for after in _look_round(search, state):
            key = _key(search, after)
            if key not in seen:
                seen.add(key)
                pending.append(after)


def _is_past(search: Search, state: State) -> bool:
    """Whether all counters have overflowed, in a search that began just before: what follows was searched before."""
    search.world.load(state.saved)
    return bool(search.far) and all(
        search.world.memory.read(place) < start // 2 and not state.held for place, start in search.far
    )


def _key(search: Search, state: State) -> Any:
    """What makes two states the same: all the functions can see, with elements as their places in the queue.

    Of an index that counts on for ever only the slot counts: near its overflow a search of its own begins.
    """
    world = search.world
    world.load(state.saved)
    slots = [state.held.index(value) if value in state.held else -1 for value in world.contents()]
    blank: dict[int, list[tuple[int, int]]] = {}
    if world.storage is not None:
        blank[id(world.storage)] = [(world.offset, world.slots * world.element)]
    rest: list[Any] = []
    for (cells, offset, type_), limits, value in zip(world.readers, search.ranges, world.values(), strict=True):
        if limits is None and isinstance(value, int) and isinstance(type_, IntType) and not search.overflow:
            blank.setdefault(id(cells), []).append((offset, type_.width // 8))
            rest.append(value % world.slots)
    for cells in dict.fromkeys((*world.kept, *world.memory.others)):
        if cells.name in (GIVEN, TAKEN):
            continue
        data = bytearray(cells.data)
        for offset, size in blank.get(id(cells), ()):
            data[offset : offset + size] = bytes(size)
        rest.append(bytes(data))
    return tuple(slots), len(state.held), tuple(rest)


def _plain_ways(search: Search, first: State) -> Iterator[State]:
    """States of a large ring: the queue walks round some slots, is filled, emptied in part and filled again."""
    put, take = search.put, search.take
    assert put is not None and take is not None
    slots, room = search.world.slots, search.room
    levels = (0, 1, 2, room - 2, room - 1) if slots <= 64 else (1, room - 1)
    for lead in dict.fromkeys((0, slots - 2) if slots > 100 else (0, slots - 2, slots // 2)):
        state: State | None = first
        for _ in range(lead):
            state = state and try_put(search, state, put, deep=False)
            state = state and try_take(search, state, take, deep=False)
        for level in range(room):
            if state is not None and level in levels:
                yield state
            state = state and try_put(search, state, put, deep=False)
        if state is None:
            continue
        yield state
        for _ in range(room):
            state = state and try_take(search, state, take, deep=False)
        if state is not None:
            yield state
    state = first
    for _ in range(2 * slots + 2):
        state = state and try_put(search, state, put, deep=False)
        state = state and try_take(search, state, take, deep=False)
        if state is None or search.spent:
            return
        if state.suspect is not None:
            yield state


def _look_round(search: Search, state: State) -> list[State]:
    """Try every use from a state; the states that come of it, without those after a disagreement."""
    found: list[State] = []
    for use in search.uses:
        if search.spent or (state.suspect is not None and ("out of range", state.suspect.function) in search.found):
            break
        match use.kind:
            case "put":
                after = try_put(search, state, use, deep=True)
                found.extend(() if after is None else (after,))
                if use.bulk:
                    found.extend(_put_many(search, state, use))
            case "take":
                after = try_take(search, state, use, deep=True)
                found.extend(() if after is None else (after,))
                if use.bulk:
                    found.extend(_take_many(search, state, use))
            case "drop" | "clear":
                found.extend(_dropped(search, state, use))
            case "look":
                _look(search, state, use)
            case "tell":
                _tell(search, state, use)
    return found


def call_from(search: Search, state: State, use: Use, **given: Any) -> Effect:
    search.world.load(state.saved)
    return perform(search.world, use, search.probe.purse, **{"token": state.token, **given})


def fault(search: Search, state: State, use: Use, effect: Effect, **given: Any) -> bool:
    """Report an access outside the storage; True if the call did not return."""
    if effect.returned:
        return False
    if about_storage(search.world, effect):
        outcome = effect.outcome
        assert outcome.position is not None
        doubt: Doubt = "overflow" if search.overflow else "below zero" if below(effect) else "past end"
        ending = Ending("undefined", search.origin(outcome.position), outcome.fault)
        what = f"{use.name} leaves the storage: {outcome.reason}"
        report(search, state, effect, doubt, what, outcome.position, outcome.function, ending)
    return True


def try_put(search: Search, state: State, use: Use, *, deep: bool) -> State | None:
    if len(state.held) >= search.room and not (use.checked and not use.operation.helper):
        return None
    effect = call_from(search, state, use)
    if fault(search, state, use, effect) or effect.refused or len(effect.stored) > 1:
        return None
    value = effect.stored[0][1] if effect.stored else search.world.tokens[state.token % len(search.world.tokens)]
    whole = (*state.held, value)
    saved = search.world.save()
    if not deep and (use.design != "overwrites" or len(whole) <= search.room):
        return _after(search, state, use, effect, saved, whole, 1)
    assert search.take is not None
    now, _ = drained(search.probe, search.take, _most(search, state, 1))
    if not after_put(now, state.held, (value,), use.design, search.room) or (
        use.design == "refuses" and len(whole) > search.room
    ):
        full = len(state.held) >= search.room
        what = f"after {use.name} the ring gives {shown(now)} where {shown(whole)} is due"
        content_report(search, state, use, "room" if full else "order", what, whole, now, token=state.token)
        return None
    return _after(search, state, use, effect, saved, now, 1)


def _after(
    search: Search, state: State, use: Use, effect: Effect, saved: Any, held: Content, given: int, **more: Any
) -> State:
    """The state after a call that went well; it is suspect if an index is out of the range that plain use keeps."""
    suspect = state.suspect or suspected(search, state, use, effect, more)
    return State(saved, held, (*state.run, *made_of(search, effect)), state.token + given, suspect)


def _most(search: Search, state: State, more: int) -> int:
    """How many elements are drained: all there may be, or as many as there should be if the take does not look."""
    assert search.take is not None
    due = len(state.held) + more
    return due + search.world.slots + 2 if search.take.checked else max(0, due)


def try_take(search: Search, state: State, use: Use, *, deep: bool) -> State | None:
    if not state.held:
        if not use.checked or use.operation.helper:
            return None
        effect = call_from(search, state, use)
        if fault(search, state, use, effect) or effect.refused:
            return None
        what = f"{use.name} on an empty ring moves an index: {moved_text(search, effect)}"
        index_report(search, state, use, effect, "data", what)
        return None
    effect = call_from(search, state, use)
    if fault(search, state, use, effect):
        return None
    out = effect.outputs.get(use.channel, ())
    if effect.refused or out[:1] != state.held[:1]:
        due = state.held[0]
        got = "nothing" if effect.refused else str(out[0]) if out else "nothing"
        what = f"{use.name} gives {got} where {due} is due: {len(state.held)} elements are stored"
        doubt: Doubt = "overflow" if search.overflow else "order"
        output_report(search, state, use, effect, doubt, what, (due,))
        return None
    saved = search.world.save()
    rest = state.held[1:]
    if deep:
        assert search.take is not None
        now, _ = drained(search.probe, search.take, _most(search, state, -1))
        if now != rest:
            what = f"after {use.name} the ring gives {shown(now)} where {shown(rest)} is due"
            content_report(search, state, use, "order", what, rest, now)
            return None
    return _after(search, state, use, effect, saved, rest, 0)


def _put_many(search: Search, state: State, use: Use) -> Iterator[State]:
    """The states after a put of several elements at once: two, as many as there is room for, one more."""
    free = search.room - len(state.held)
    guarded = not use.checked or use.operation.helper
    for length in dict.fromkeys((2, free, free + 1, *(end for end in _to_the_end(search, state) if end < free))):
        if length < 2 or (length > free and guarded):
            continue
        effect = call_from(search, state, use, length=length)
        if fault(search, state, use, effect, length=length) or effect.refused:
            continue
        tokens = [search.world.tokens[(state.token + at) % len(search.world.tokens)] for at in range(length)]
        new = {value for _, value in effect.stored}
        if search.world.parts == 1 and search.world.element <= 4 and not new <= set(tokens):
            continue  # structures' elements are known by one member only
        if search.world.element > 4 or not new <= set(tokens):
            continue
        saved = search.world.save()
        assert search.take is not None
        now, _ = drained(search.probe, search.take, _most(search, state, length))
        added = tuple(tokens)
        if not search.take.checked:
            added = added[: max(0, free)]
        if not after_put(now, state.held, added, use.design, search.room):
            whole = (*state.held, *added[: max(0, free)])
            what = f"after {use.name} of {length} the ring gives {shown(now)} where {shown(whole)} is due"
            content_report(search, state, use, "order", what, whole, now, length=length)
            continue
        yield _after(search, state, use, effect, saved, now, length, length=length)


def _take_many(search: Search, state: State, use: Use) -> Iterator[State]:
    """The states after a take of several elements at once: two, all, one more."""
    level = len(state.held)
    guarded = not use.checked or use.operation.helper
    for length in dict.fromkeys((2, level, level + 1, *(end for end in _to_the_end(search, state) if end < level))):
        if length < 2 or level == 0 or (length > level and guarded):
            continue
        effect = call_from(search, state, use, length=length)
        if fault(search, state, use, effect, length=length) or effect.refused:
            continue
        out = effect.outputs.get(use.channel, ())
        due = state.held[:length]
        if use.channel == "buffer" and out != due and not (length > level and not out):
            what = f"{use.name} of {length} gives {shown(out)} where {shown(due)} is due"
            output_report(search, state, use, effect, "order", what, due, length=length)
            continue
        saved = search.world.save()
        assert search.take is not None
        rest = state.held[length:]
        now, _ = drained(search.probe, search.take, _most(search, state, -length))
        if now != rest:
            what = f"after {use.name} of {length} the ring gives {shown(now)} where {shown(rest)} is due"
            content_report(search, state, use, "order", what, rest, now, length=length)
            continue
        yield _after(search, state, use, effect, saved, rest, 0, length=length)


def _dropped(search: Search, state: State, use: Use) -> Iterator[State]:
    """The states after a drop of each number of elements, or after a clear."""
    guarded = not use.checked or use.operation.helper
    numbers = [0]
    if use.kind == "drop":
        numbers = [1, len(state.held), len(state.held) + 1, *_to_the_end(search, state)] if use.numbered else [1]
    for number in dict.fromkeys(numbers):
        if use.kind == "drop" and (number == 0 or (number > len(state.held) and (guarded or not use.numbered))):
            continue
        if use.kind == "drop" and not state.held and guarded:
            continue
        effect = call_from(search, state, use, number=number)
        if fault(search, state, use, effect) or effect.refused or not effect.returned:
            if effect.refused and effect.returned and state.held and use.kind == "drop" and not use.numbered:
                _refused_far(search, state, use, effect)
            continue
        saved = search.world.save()
        assert search.take is not None
        rest = () if use.kind == "clear" else state.held[number:]
        now, _ = drained(search.probe, search.take, _most(search, state, 0))
        if not search.take.checked:
            now = now[: len(rest)]
        some = now != state.held and is_suffix(now, state.held) and not use.numbered
        if now != rest and not some and not (number > len(state.held) and is_slice(now, state.held)):
            told = f"{use.name}({number})" if use.numbered else use.name
            what = f"after {told} the ring gives {shown(now)} where {shown(rest)} is due"
            doubt: Doubt = "data" if number > len(state.held) else "order"
            content_report(search, state, use, doubt, what, rest, now, number=number)
            continue
        if use.counts and effect.outcome.value != min(number, len(state.held)):
            due = min(number, len(state.held))
            what = f"{use.name}({number}) drops {due} elements and returns {effect.outcome.value}"
            place = return_place(search, state, use, number=number)
            ending = Ending("result", place, None, "", str(effect.outcome.value), str(due))
            at = return_position(search, state, use, number=number)
            report(search, state, effect, "occupancy", what, at, use.name, ending)
            continue
        if not _goes_on(search, state, use, effect, saved, now, number=number):
            continue
        yield _after(search, state, use, effect, saved, now, 0, number=number)


def _refused_far(search: Search, state: State, use: Use, effect: Effect) -> None:
    """Report a drop that does nothing for counters near their overflow and works for the same elements long before."""
    found = effect.outcome.value
    if not search.far or not isinstance(found, int):
        return
    search.world.load(state.saved)
    for place, start in search.far:
        search.world.memory.write(place, (search.world.memory.read(place) - start) % (start + NEAR_END + 1))
    plain = perform(search.world, use, search.probe.purse)
    if plain.refused or not plain.returned or not isinstance(plain.outcome.value, int) or plain.outcome.value == found:
        return
    position = return_position(search, state, use)
    due = f"{plain.outcome.value} as it is of small counters"
    ending = Ending("result", search.origin(position), None, "", str(found), due)
    what = f"{use.name} returns {found} and drops nothing: {len(state.held)} elements are stored"
    report(search, state, effect, "overflow", what, position, use.name, ending)


def _to_the_end(search: Search, state: State) -> list[int]:
    """How many elements each index is away from the storage's end, and one more."""
    search.world.load(state.saved)
    slots = search.world.slots
    away = [slots - value % slots for value in search.world.values() if isinstance(value, int)]
    return [number for end in dict.fromkeys(away) for number in (end, end + 1)]


def _goes_on(search: Search, state: State, use: Use, effect: Effect, saved: Any, held: Content, **given: Any) -> bool:
    """Whether the next element that is put comes out in its turn; if not, the call before is to blame."""
    put = search.put
    assert put is not None and search.take is not None
    if len(held) >= search.room:
        return True
    after = _after(search, state, use, effect, saved, held, 0, **given)
    added = call_from(search, after, put)
    if not added.returned or len(added.stored) != 1:
        return True
    whole = (*held, added.stored[0][1])
    now, calls = drained(search.probe, search.take, len(whole) + (search.room + 2 if search.take.checked else 0))
    if now == whole or any(item.outcome.kind == "undefined" for item in calls):
        return True  # what goes outside is said of the call that does
    position, function = index_store(search, state, use, given)
    blame = Suspect(position, function, "")
    what = f"after {use.name} and {put.name} the ring gives {shown(now)} where {shown(whole)} is due"
    content_report(search, replace(after, blame=blame), put, "order", what, whole, now)
    return False


def _look(search: Search, state: State, use: Use) -> None:
    if not state.held:
        return
    effect = call_from(search, state, use)
    if fault(search, state, use, effect):
        return
    out = effect.outputs.get(use.channel, ())
    if out[:1] != state.held[:1]:
        what = f"{use.name} gives {out[0] if out else 'nothing'} where {state.held[0]} comes next"
        output_report(search, state, use, effect, "order", what, state.held[:1])


def _tell(search: Search, state: State, use: Use) -> None:
    if not use.tells:
        return
    effect = call_from(search, state, use)
    if fault(search, state, use, effect) or not isinstance(effect.outcome.value, int):
        return
    found, level, room = effect.outcome.value, len(state.held), search.room
    due = {
        "held": level,
        "free": room - level,
        "left": search.world.slots - level,
        "empty": level == 0,
        "some": level > 0,
        "full": level == room,
        "not full": level < room,
    }[use.tells]
    if isinstance(due, bool):
        if bool(found) == due or (use.tells in ("full", "not full") and level > room):
            return
    elif found == due or _part(search, effect, found, due):
        return
    words = {
        "held": f"{level} elements are stored",
        "free": f"there is room for {due} more",
        "left": f"there is room for {due} more",
    }.get(use.tells, f"{level} elements are stored and there is room for {room - level}")
    what = f"{use.name} returns {found}; {words}"
    ending = Ending("result", return_place(search, state, use), None, "", str(found), str(int(due)))
    position = return_position(search, state, use)
    doubt: Doubt = "overflow" if search.overflow else "occupancy"
    report(search, state, effect, doubt, what, position, use.name, ending)


def _part(search: Search, effect: Effect, found: int, true: int) -> bool:
    """Whether a number tells only the part up to the storage's end, or up to an index."""
    values = [value for value in effect.after if isinstance(value, int)]
    return any(linear(found, true, value % search.world.slots, search.world.slots) for value in values)
