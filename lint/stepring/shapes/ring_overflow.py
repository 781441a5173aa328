"""Counters that only grow: the search once more from just before their overflow, where sequences may break."""

from dataclasses import replace

from stepring.meaning.types import IntType
from stepring.paths.witness import StartValue
from stepring.shapes.ring_calls import call
from stepring.shapes.ring_compare import NEAR_END, search_states
from stepring.shapes.ring_report import Search, State
from stepring.shapes.ring_uses import perform


def near_overflow(search: Search) -> None:
    """Search again from counters just before their overflow, if the ring's counters never come back otherwise."""
    world, put, take = search.world, search.put, search.take
    if search.found or search.spent or put is None or take is None:
        return
    turns = 2 * world.slots + 1
    search.probe.back()
    before = world.values()
    for number in range(turns):
        call(world, put.operation, put.way, search.probe.purse, token=number)
        perform(world, take, search.probe.purse)
    after = world.values()
    free: list[tuple[int, IntType]] = []
    for at, (old, new) in enumerate(zip(before, after, strict=True)):
        type_ = world.readers[at][2]
        if isinstance(old, int) and isinstance(new, int) and isinstance(type_, IntType):
            if new - old == turns and type_.width <= 32:
                free.append((at, type_))
    if len(free) != 2 or free[0][1].high != free[1][1].high:
        return
    start = free[0][1].high - NEAR_END
    if world.slots & (world.slots - 1) and world.ring.capacity is None:
        return
    search.probe.back()
    extra = []
    for at, _ in free:
        _, name, path, _ = world.places[at]
        world.memory.write(name + path, start)
        extra.append((name, path))
    # The values are reached by as many puts and takes; the ring's own set-up call would undo them.
    fixed = tuple(StartValue(name, path, start) for name, path in extra)
    kept = tuple(item for item in search.base.start if (item.object, item.path) not in extra)
    said = f"{start} elements have been put in and taken out before"
    base = search.base
    search.base = replace(search.base, start=(*kept, *fixed), calls=(), assumed=(*search.base.assumed, said))
    search.overflow = True
    search.far = tuple((name + path, start) for name, path in extra)
    search_states(search, State(world.save(), (), (), 0))
    search.base, search.overflow, search.far = base, False, ()  # what is asked next starts at the ring's own start
