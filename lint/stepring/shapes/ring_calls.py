"""One call of a ring's function on concrete values, with everything of it that a queue's user could see.

What comes from outside during a call follows a plain ``Policy``; what was asked for is noted, so that the same call can
be made again. What goes outside is collected in channels: the result, a caller's buffer, a device's register, the
arguments of functions whose body is not known.
"""

import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal, TypeAlias

from stepring.meaning.types import IntType
from stepring.paths.devices import Devices
from stepring.paths.interpreter import run
from stepring.paths.types import ASSEMBLY, Event, Outcome, Unsettled
from stepring.paths.witness import OutsideValue, Reference, WitnessCall
from stepring.shapes.ring_parameters import GIVEN, STORAGE, TAKEN, Operation, arguments
from stepring.shapes.ring_world import World

Policy: TypeAlias = Literal["zero", "one", "once", "token", "token once"]
"""What the outside gives in one call: always 0; always 1; 1 and then 0; the element; the element and then 0."""
_GUARD = re.compile(r"assert|abort|panic|fatal|hardfault|unreachable|trap$", re.IGNORECASE)
READY = 2000
"""What making a function ready to run costs, in steps."""
_ASSERTION = "an assertion of the program fails"


@dataclass(frozen=True, slots=True)
class Way:
    """How an operation is called: what the outside gives, and whether its buffer takes or gives."""

    policy: Policy = "zero"
    taking: bool = False


@dataclass(frozen=True, slots=True)
class Effect:
    """What a call did.

    ``before`` and ``after`` are the indices' values, ``stored`` the slots whose bytes changed as (slot, bytes as a
    number). ``outputs`` are the channels with the element values that came out, in order. ``prior`` is the call that
    has to come before this one, where an element is looked at by one function and dropped by another.
    """

    call: WitnessCall
    outcome: Outcome
    before: tuple[Any, ...]
    after: tuple[Any, ...]
    stored: tuple[tuple[int, int], ...]
    outputs: dict[str, tuple[int, ...]]
    prior: "Effect | None" = None

    @property
    def returned(self) -> bool:
        return self.outcome.kind == "returned"

    @property
    def asserted(self) -> bool:
        """Whether the program's own assertion ended the call."""
        return self.outcome.kind == "stopped" and (
            self.outcome.reason == _ASSERTION or self.outcome.reason == "the program ends itself here"
        )

    @property
    def refused(self) -> bool:
        """Whether the ring is as it was: the call said no, waits, or its assertion failed."""
        if self.returned:
            return self.before == self.after and not self.stored
        return self.outcome.kind == "limit" or self.asserted


@dataclass(slots=True)
class Purse:
    """Interpreter steps that may still be spent."""

    left: int


def call(
    world: World,
    operation: Operation,
    way: Way,
    purse: Purse,
    *,
    token: int = 0,
    number: int | None = None,
    length: int = 1,
    watch: list[Event] | None = None,
) -> Effect:
    """Call an operation on the world's memory.

    ``token`` is the position of the element that is given; ``number`` the argument of an operation that takes a number
    which is no element (by default it is the element); ``length`` how many elements a buffer has.
    """
    element = world.tokens[token % len(world.tokens)]
    buffer = Reference(TAKEN) if way.taking else Reference(GIVEN, token % len(world.tokens) * world.parts)
    if way.taking:
        _clear(world)
    given = arguments(
        operation, number=element if number is None else number, given=buffer, length=length, bound=world.slots
    )
    asked: list[OutsideValue] = []
    outputs: dict[str, list[int]] = {}

    def ask(name: str) -> int:
        match way.policy:
            case "one":
                value = 1
            case "once":
                value = 0 if asked else 1
            case "token":
                value = element
            case "token once":
                value = 0 if asked else element
            case _:
                value = 0
        asked.append(OutsideValue(name, value))
        return value

    def external(name: str, values: Sequence[Any]) -> Any:
        if name == ASSEMBLY:  # no element: an interrupt mask, or the result of an exclusive store
            asked.append(OutsideValue(name, 0))
            return 0
        condition = bool(values and isinstance(values[0], int) and name not in world.group.unconditional)
        if _GUARD.search(name) and not (condition and values[0]):
            raise Unsettled(_ASSERTION)
        _hand_out(world, name, values, outputs)
        return ask(name) if name in world.group.wanted else 0

    before, slots = world.values(), world.raw()
    ready = len(world.group.program.codes)
    devices = Devices(world.group.program, world.memory, ask)
    most = min(purse.left, 3000 + 150 * world.slots)
    outcome = run(
        world.group.program,
        operation.function.identity,
        [world.pointer(item) for item in given],
        external,
        steps=max(1, most),
        memory=world.memory,
        volatile=devices.volatile,
        observe=None if watch is None else watch.append,
        device=devices.register,
    )
    devices.settle()
    purse.left -= outcome.steps + 40 + READY * (len(world.group.program.codes) - ready)
    stored = _changed(slots, world.raw(), world.element)
    for name, told in devices.told:
        outputs.setdefault(f"device {name}", []).append(told)
    made = WitnessCall(operation.function.identity, given, tuple(asked))
    effect = Effect(made, outcome, before, world.values(), stored, {})
    _results(world, operation, way, effect, outputs)
    mask = (1 << 8 * world.element) - 1
    effect.outputs.update({name: tuple(item & mask for item in values) for name, values in outputs.items()})
    return effect


def _changed(old: bytes, new: bytes, size: int) -> tuple[tuple[int, int], ...]:
    """The slots whose bytes differ, with the new bytes as a number."""
    if old == new:
        return ()
    found: list[tuple[int, int]] = []
    chunk = 64 * size
    for start in range(0, len(new), chunk):
        if old[start : start + chunk] != new[start : start + chunk]:
            for at in range(start, min(start + chunk, len(new)), size):
                part = new[at : at + size]
                if part != old[at : at + size]:
                    found.append((at // size, int.from_bytes(part, "little")))
    return tuple(found)


def _clear(world: World) -> None:
    cells = world.memory.names[TAKEN][0]
    cells.data[:] = bytes(cells.size)


def _results(world: World, operation: Operation, way: Way, effect: Effect, outputs: dict[str, list[int]]) -> None:
    """The result and the caller's buffer as channels."""
    value = effect.outcome.value if effect.returned else None
    if isinstance(value, int) and isinstance(operation.function.type.returns, IntType):
        outputs["result"] = [value]
    elif isinstance(value, tuple) and value[0] is world.storage:
        slot, rest = divmod(value[1] - world.offset, world.element)
        if rest == 0 and 0 <= slot < world.slots:
            outputs["slot"] = [world.slot(slot)]
    if way.taking:
        cells = world.memory.names[TAKEN][0]
        found: list[int] = []
        for at in range(0, cells.size - world.element + 1, world.element):
            item = int.from_bytes(cells.data[at : at + world.element], "little")
            if item == 0:
                break
            found.append(item)
        outputs["buffer"] = found


def _hand_out(world: World, name: str, values: Sequence[Any], outputs: dict[str, list[int]]) -> None:
    """What a function without body is given: numbers, and elements of the storage with their number beside."""
    numbers = [item for item in values if isinstance(item, int)]
    for at, item in enumerate(values):
        if isinstance(item, int):
            outputs.setdefault(f"{name} {at}", []).append(item)
        elif isinstance(item, tuple) and item[0] is world.storage and world.storage is not None:
            slot, rest = divmod(item[1] - world.offset, world.element)
            count = next((number for number in numbers if 0 < number <= world.slots), 1)
            if rest == 0:
                some = [world.slot(number) for number in range(slot, min(slot + count, world.slots))]
                outputs.setdefault(f"{name} {at}", []).extend(some)


def about_storage(world: World, effect: Effect) -> bool:
    """Whether what is undefined is an access to, or a pointer out of, the ring's storage."""
    outcome = effect.outcome
    if outcome.kind != "undefined" or outcome.fault not in ("bounds", "pointer"):
        return False
    if re.search(rf"\bof ({GIVEN}|{TAKEN}|(?:thing|told)_\d+)\b", outcome.reason):
        return False
    short = re.split(r"[.\[]", world.ring.storage.replace("[]", ""))[-1]
    if re.search(rf"\b{re.escape(short)}\b|\bof {STORAGE}\b", outcome.reason):
        return True
    if world.storage is None:
        return False
    end = world.offset + world.slots * world.element
    limits = rf"bytes {world.offset} to ({end - 1}|{end}) of {re.escape(world.storage.name)}\b"
    return re.search(limits, outcome.reason) is not None


def below(effect: Effect) -> bool:
    """Whether the access is below the storage."""
    found = re.search(r"(?: is|byte) (-?\d+)", effect.outcome.reason)
    return found is not None and int(found[1]) < 0
