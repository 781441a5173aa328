"""A run is sought for what the code alone says of a ring: for accesses known to go wrong, and for steps that do.

The one idea: where a subscript is known to leave the array at some place, any sequence of calls that ends at that very
place is a proof, whatever its arguments; so many are tried, states first in which the indices stand as they never did
before. Elsewhere an argument may be the caller's fault: an access outside counts there only if a call without numbers
makes it, or if the function looks at its argument and refuses what is far too large.
"""

import heapq
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from stepring.paths.witness import StartValue
from stepring.shapes.ring_alone import Odd, blameless, odd_step
from stepring.shapes.ring_calls import Effect, Policy, Purse, Way, about_storage
from stepring.shapes.ring_compare import call_from, fault
from stepring.shapes.ring_parameters import GIVEN, TAKEN, Operation, variants
from stepring.shapes.ring_report import Search, State, made_of
from stepring.shapes.ring_uses import Use

BUDGET = 300_000
"""Interpreter steps for one way of looking."""
STATES = 3000
END = 16
Place = tuple[str, int]


@dataclass(frozen=True, slots=True)
class _Choice:
    """One way to call an operation."""

    use: Use
    given: Mapping[str, int]


@dataclass(slots=True, eq=False)
class _Seek:
    """What is still sought, and the states that wait, those with seldom seen indices first."""

    search: Search
    targets: set[Place]
    odd: Odd
    free: bool
    heap: list[tuple[int, int, State]] = field(default_factory=list)
    seen: set[Any] = field(default_factory=set)
    often: Counter[Any] = field(default_factory=Counter)

    @property
    def done(self) -> bool:
        return not self.targets and not self.odd and not (self.free and not self.search.found)


def seek(search: Search, odd: Odd) -> None:
    """Look for runs that show what the code says; ``odd`` are steps known to be wrong."""
    compared = search.put is not None and search.take is not None
    targets = set(_targets(search))
    wanted = {} if any(doubt in ("slots", "overflow") for doubt, _ in search.found) else odd
    free = not compared and not search.found
    if not targets and not wanted and not free:
        return
    sought = _Seek(search, targets, wanted, free)
    world, purse = search.world, search.probe.purse
    entered = [item for item in world.operations if not item.helper]
    helpers = [item for item in world.operations if item.helper]
    rounds: list[Sequence[Operation]] = [entered]
    if world.feeders:
        rounds.append([*entered, *world.feeders])
    if helpers:
        rounds.append(world.operations)
    for operations in rounds:
        if sought.done:
            break
        search.probe.purse = Purse(BUDGET)
        _round(sought, operations)
        sought.free = False  # only what can be entered may show something new
        if not sought.targets and not sought.odd:
            break
    _from_orbits(sought)
    search.probe.purse = purse


def _from_orbits(sought: _Seek) -> None:
    """Once more from indices that stand where the ring's own code was found to bring them.

    What moves them may need what is not there to be run: a device's answers, another unit's settings.
    """
    search, world, base, start = sought.search, sought.search.world, sought.search.base, sought.search.probe.start
    for place, index in zip(world.places, world.ring.indices, strict=True):
        shown, name, path, _ = place
        for value in _some(index.orbit or ()):
            if not sought.targets:
                return
            search.probe.start = start
            search.probe.back()
            if index.form == "pointer" or world.memory.read(name + path) == value:
                continue
            world.memory.write(name + path, value)
            kept = tuple(item for item in base.start if (item.object, item.path) != (name, path))
            fixed = StartValue(name, path, value)
            said = f"{shown} is {value} at first, where the ring's own code brings it"
            search.base = replace(base, start=(*kept, fixed), calls=(), assumed=(*base.assumed, said))
            search.probe.start = world.save()
            search.probe.purse = Purse(BUDGET // 10)
            _round(sought, world.operations, first_only=True)
    search.probe.start, search.base = start, base


def _some(orbit: Sequence[int]) -> Sequence[int]:
    """The values of an orbit; of a long one those at its ends."""
    return orbit if len(orbit) <= 2 * END else (*orbit[:END], *orbit[-END:])


def _targets(search: Search) -> Iterator[Place]:
    """The places of accesses that are known to go wrong and that no run shows yet."""
    shown = {
        (item.witness.ending.where.file, item.witness.ending.where.line)
        for item in search.found.values()
        if item.witness.ending.kind == "undefined"
    }
    for access in search.world.ring.accesses:
        place = (access.where.file, access.where.line)
        if getattr(access, "bad", None) is not None and place not in shown:
            yield place


def _round(sought: _Seek, operations: Sequence[Operation], *, first_only: bool = False) -> None:
    """Call the operations in all ways from state after state, or from the first state alone."""
    search = sought.search
    search.probe.back()
    sought.heap = []
    sought.seen = set()
    sought.often = Counter()
    _wait(sought, State(search.probe.start, (), (), 0))
    choices = [choice for operation in operations for choice in _choices(search, operation)]
    while sought.heap and not search.spent and not sought.done and len(sought.seen) < STATES:
        _, _, state = heapq.heappop(sought.heap)
        for choice in choices:
            if search.spent or sought.done:
                return
            _step(sought, state, choice)
        if first_only:
            return


def _wait(sought: _Seek, state: State) -> None:
    """Keep a state for later unless it is known; the memory is the state's."""
    world = sought.search.world
    values = world.values()
    rest = [
        bytes(cells.data) for cells in world.kept if cells is not world.storage and cells.name not in (GIVEN, TAKEN)
    ]
    key = (values, tuple(rest))
    if key in sought.seen:
        return
    sought.seen.add(key)
    heapq.heappush(sought.heap, (sought.often[values], len(sought.seen), state))
    sought.often[values] += 1


def _choices(search: Search, operation: Operation) -> Iterator[_Choice]:
    """The ways in which an operation is called: each number at the ends of the ring, and what the outside may give."""
    slots = search.world.slots
    numbers = tuple(dict.fromkeys((0, 1, 2, slots - 1, slots)))
    for variant in variants(operation):
        lengths = numbers[1:] if variant.has("length") else (1,)
        for number in numbers if variant.has("value") else (0,):
            for length in lengths:
                policies: tuple[Policy, ...] = ("token", "zero", "once") if number == numbers[0] else ("token",)
                for policy in policies:
                    use = Use(variant, "put", Way(policy, False))
                    yield _Choice(use, {"number": number, "length": length})


def _step(sought: _Seek, state: State, choice: _Choice) -> None:
    search, use, given = sought.search, choice.use, dict(choice.given)
    effect = call_from(search, state, use, **given)
    if use.way.policy != "token" and not effect.call.outside:
        return  # as with any other policy
    if not effect.returned:
        if about_storage(search.world, effect) and _counts(sought, state, choice, effect):
            fault(search, state, use, effect, **given)
            sought.targets -= {_place(search, effect)}
        return
    if odd_step(search, state, use, effect, sought.odd):
        sought.odd = {}
        return
    search.world.load(state.saved)
    effect = call_from(search, state, use, **given)
    _wait(sought, State(search.world.save(), (), (*state.run, *made_of(search, effect)), state.token + 1))


def _place(search: Search, effect: Effect) -> Place:
    assert effect.outcome.position is not None
    where = search.origin(effect.outcome.position)
    return where.file, where.line


def _counts(sought: _Seek, state: State, choice: _Choice, effect: Effect) -> bool:
    """Whether an access outside is the ring's fault and not the caller's."""
    if _place(sought.search, effect) in sought.targets:
        return True
    return sought.free and blameless(sought.search, state, choice.use, choice.given)
