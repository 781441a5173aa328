"""Running a witness again: the same start, the same calls, the same values from outside, and the ending it claims.

A finding is only as good as the run that shows it, so the run is done once more from nothing: fresh memory, the objects
that the witness makes, its start values, then its calls one after another. What comes of it is compared with the
witness's ``Ending``; anything else than exactly that, one value from outside too few included, means that the witness
does not hold. On the way the steps are noted that a person wants to see: the calls, the stores that change a watched
place, what came from outside, and the end.
"""

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

from stepring.meaning.models import integer
from stepring.meaning.scope import size_of
from stepring.meaning.types import ArrayType, CType, StructType
from stepring.paths.devices import Devices
from stepring.paths.interpreter import Program, fresh, run
from stepring.paths.memory import FunctionPointer, Memory
from stepring.paths.types import Event, Outcome, Undefined, Unsettled
from stepring.paths.witness import Made, OutsideValue, Reference, Value, Witness, WitnessCall
from stepring.places import Origin, Position

STEPS = 1_000_000
"""How many IR statements one call may run; more is taken for a call that does not come back."""

SHOWN_STEPS = 400
"""The most steps that are kept for display; of a longer run the first and the last."""

_TEMPORARY = re.compile(r"%\d+")

Placer = Callable[[Position], Origin]


@dataclass(frozen=True, slots=True)
class ReplayStep:
    """One step as shown: where, what happens, and the watched places' values after it as (shown name, text)."""

    where: Origin
    text: str
    values: tuple[tuple[str, str], ...] = ()


@dataclass(frozen=True, slots=True)
class Replayed:
    """What came of a witness: ``held`` if it ended as it says; ``why`` is one clause, what happened instead if not.

    ``before`` are the watched places' values before each call that was made.
    """

    held: bool
    why: str
    steps: tuple[ReplayStep, ...] = ()
    before: tuple[tuple[tuple[str, str], ...], ...] = ()


class Unfit(Exception):
    """The witness does not fit the program: an object, a function or a type that it names is not there."""


@dataclass(slots=True)
class _Replay:
    """One run under way."""

    program: Program
    witness: Witness
    memory: Memory
    origin: Placer
    steps: list[ReplayStep] = field(default_factory=list)
    before: list[tuple[tuple[str, str], ...]] = field(default_factory=list)
    given: list[OutsideValue] = field(default_factory=list)
    last: tuple[tuple[str, str], ...] = ()
    where: Position = field(default_factory=lambda: Position("", 0))

    def note(self, where: Origin, text: str) -> None:
        self.last = self.values()
        self.steps.append(ReplayStep(where, text, self.last))

    def values(self) -> tuple[tuple[str, str], ...]:
        return tuple((shown, held(self.memory, item + path)) for shown, item, path in self.witness.watched)

    def observe(self, event: Event) -> None:
        self.where = event.position
        if event.kind == "store" and self.values() != self.last:
            self.note(self.origin(event.position), f"{event.text} becomes {value_text(event.value)}")

    def outside(self, name: str) -> Any:
        """The next value from outside, if it is this function's or register's turn."""
        if not self.given or self.given[0].name != name:
            return None
        value = self.given.pop(0).value
        if value is not None:
            self.note(self.origin(self.where), f"{name} gives {shown_value(value)}")
        return pointed(self.program, self.memory, value)

    def external(self, name: str, _arguments: Sequence[Any]) -> Any:
        return self.outside(name)


def replay(program: Program, witness: Witness, *, origin: Placer, steps: int = STEPS) -> Replayed:
    """Run a witness on fresh memory of a program and compare its ending.

    ``origin`` gives the original place of a position in the IR. ``steps`` bounds the IR statements of each call.
    Nothing is raised for a witness that does not fit the program; ``why`` says so.
    """
    try:
        state = _Replay(program, witness, prepared(program, witness), origin)
    except Unfit as trouble:
        return Replayed(False, str(trouble))
    if not witness.calls:
        return Replayed(False, "the witness has no call")
    outcome = None
    for number, call in enumerate(witness.calls, 1):
        try:
            outcome = _call(state, call, steps)
        except Unfit as trouble:
            return Replayed(False, str(trouble), _kept(state.steps))
        if outcome.kind != "returned" and number < len(witness.calls):
            text = f"call {number} of {len(witness.calls)} does not return: {_ending_text(outcome)}"
            return Replayed(False, text, _kept(state.steps))
        if state.given:
            break
    assert outcome is not None
    trouble_text = _mismatch(state, outcome)
    if not trouble_text:
        state.note(_end_place(state, outcome), _shown_end(state, outcome))
    why = trouble_text or _shown_end(state, outcome)
    return Replayed(not trouble_text, why, _kept(state.steps), tuple(state.before))


def _kept(steps: Sequence[ReplayStep]) -> tuple[ReplayStep, ...]:
    """The steps, the middle of a very long run left out and said."""
    if len(steps) <= SHOWN_STEPS:
        return tuple(steps)
    half = SHOWN_STEPS // 2
    middle = steps[half : len(steps) - half]
    said = ReplayStep(middle[-1].where, f"{len(middle)} steps of the same kind are left out here", middle[-1].values)
    return (*steps[:half], said, *steps[len(steps) - half :])


# ------------------------------------------------------------------------------------------------------- preparation


def prepared(program: Program, witness: Witness) -> Memory:
    """Fresh memory with the witness's objects and start values. ``Unfit`` where it does not fit the program."""
    memory = fresh(program)
    for made in witness.made:
        try:
            memory.declare(made.name, made_type(program, made), zero=True)
        except (ValueError, Unsettled) as trouble:
            raise Unfit(f"the object {made.name} cannot be made: {trouble}") from None
    single = {made.name for made in witness.made if made.elements == 1}
    for start in witness.start:
        path = start.path.removeprefix("[0]") if start.object in single else start.path
        value = pointed(program, memory, start.value)
        try:
            memory.write(start.object + path, value)
        except (KeyError, ValueError, AttributeError) as trouble:
            raise Unfit(f"{start.object}{path} cannot be set: {_words(trouble)}") from None
    return memory


def made_type(program: Program, made: Made) -> CType:
    """The type of an object that a witness makes: an array where it has several elements."""
    type_ = named_type(program, made.type)
    return type_ if made.elements == 1 else ArrayType(type_, made.elements)


def named_type(program: Program, name: str) -> CType:
    """An integer type by its name, or a structure by its identity or the part of it before ``@``."""
    try:
        return integer(program.model, name)
    except KeyError:
        pass
    exact = [layout for identity, layout in program.structs.items() if identity == name]
    found = exact or [layout for identity, layout in program.structs.items() if identity.partition("@")[0] == name]
    complete = [layout for layout in found if layout.size is not None]
    if not complete:
        raise Unfit(f"the type {name} is not in the program")
    if len({(layout.size, layout.fields) for layout in complete}) > 1:
        raise Unfit(f"the type {name} could be any of {len(complete)} structures")
    return StructType(complete[0].identity, complete[0].union)


def pointed(program: Program, memory: Memory, value: Value) -> Any:
    """A witness's value as the interpreter has it: an integer, or a pointer into the memory."""
    if value is None:
        return 0
    if not isinstance(value, Reference):
        return value
    try:
        pointer = memory.address(value.to + value.path)
        if value.at == 0:
            return pointer
        size = _element_size(program, memory, value)
    except (KeyError, ValueError) as trouble:
        raise Unfit(f"there is no {shown_value(value)} to point to: {_words(trouble)}") from None
    cells, offset, low, high = pointer
    moved = offset + value.at * size
    if not low <= moved <= high:
        raise Unfit(f"{shown_value(value)} lies outside its object")
    return (cells, moved, low, high)


def _element_size(program: Program, memory: Memory, value: Reference) -> int:
    type_ = memory.type_at(value.to + value.path)
    element = type_.element if isinstance(type_, ArrayType) else type_
    return size_of(program.structs, element) or 0


def _words(trouble: Exception) -> str:
    return str(trouble.args[0]) if trouble.args else str(trouble)


# -------------------------------------------------------------------------------------------------------------- a call


def _call(state: _Replay, call: WitnessCall, steps: int) -> Outcome:
    """Run one call of the witness; its outside values are taken in order."""
    function = _position_of(state.program, call.function)
    arguments = [pointed(state.program, state.memory, value) for value in call.arguments]
    state.given = list(call.outside)
    state.where = function
    state.note(state.origin(function), call_text(call))
    state.before.append(state.last)
    devices = Devices(state.program, state.memory, state.outside)
    try:
        outcome = run(
            state.program,
            call.function,
            arguments,
            state.external,
            steps=steps,
            memory=state.memory,
            volatile=devices.volatile,
            observe=state.observe,
            device=devices.register,
        )
    except (KeyError, ValueError) as trouble:
        raise Unfit(_words(trouble)) from None
    if outcome.kind == "returned" and outcome.value is not None and call is not state.witness.calls[-1]:
        state.note(state.origin(state.where), f"returns {value_text(outcome.value)}")
    return outcome


def _position_of(program: Program, function: str) -> Position:
    for unit in program.units:
        for item in unit.functions:
            if function in (item.identity, item.name):
                return item.position
    raise Unfit(f"no unit has a function {function}")


def call_text(call: WitnessCall) -> str:
    """A call as C spells it, near enough for a person."""
    return f"call {call.function.rpartition(':')[2]}({', '.join(shown_value(item) for item in call.arguments)})"


# -------------------------------------------------------------------------------------------------------------- endings


def _mismatch(state: _Replay, outcome: Outcome) -> str:
    """What is not as the witness says; empty if all is."""
    trouble = _ending_mismatch(state, outcome)
    if state.given and (not trouble or outcome.kind == "returned"):
        return f"the call does not ask for {state.given[0].name}, which is to give {shown_value(state.given[0].value)}"
    return trouble


def _ending_mismatch(state: _Replay, outcome: Outcome) -> str:
    ending = state.witness.ending
    if ending.kind == "undefined":
        return _undefined_mismatch(state, outcome)
    if ending.kind == "endless":
        return "" if outcome.kind == "limit" else f"the call comes to an end: {_ending_text(outcome)}"
    if outcome.kind != "returned":
        return f"the call does not return: {_ending_text(outcome)}"
    found = value_text(outcome.value) if ending.kind == "result" else held(state.memory, ending.place)
    what = "the call returns" if ending.kind == "result" else f"{ending.place} is"
    if found != ending.found:
        return f"{what} {found} and not {ending.found}"
    if as_due(found, ending.expected):
        return f"{what} {found}, which is due"
    return ""


def _undefined_mismatch(state: _Replay, outcome: Outcome) -> str:
    ending = state.witness.ending
    if outcome.kind != "undefined":
        return f"nothing undefined happens: {_ending_text(outcome)}"
    where = _end_place(state, outcome)
    if ending.fault is not None and outcome.fault != ending.fault:
        return f"it ends as {outcome.fault} ({_spoken(outcome)}) and not as {ending.fault}"
    if (where.file, where.line) != (ending.where.file, ending.where.line):
        return f"it ends at line {where.line} and not at line {ending.where.line}: {_spoken(outcome)}"
    return ""


def as_due(found: str, expected: str) -> bool:
    """Whether a value is what is due: the same text, or a number in a range in words (``0 to 15``)."""
    if found == expected:
        return True
    low, separator, high = expected.partition(" to ")
    try:
        return bool(separator) and int(low) <= int(found) <= int(high)
    except ValueError:
        return False


def _end_place(state: _Replay, outcome: Outcome) -> Origin:
    ending = state.witness.ending
    if ending.kind == "undefined" and outcome.position is not None:
        return state.origin(outcome.position)
    return ending.where


def _ending_text(outcome: Outcome) -> str:
    if outcome.kind == "returned":
        return "it returns" if outcome.value is None else f"it returns {value_text(outcome.value)}"
    return _spoken(outcome)


def _spoken(outcome: Outcome) -> str:
    """The reason of an ending; what a call gave has no name in the source."""
    return _TEMPORARY.sub("(…)", outcome.reason)


def _shown_end(state: _Replay, outcome: Outcome) -> str:
    ending = state.witness.ending
    due = f"; {ending.expected} is due" if ending.expected else ""
    if ending.kind == "undefined":
        return _spoken(outcome)
    if ending.kind == "endless":
        return f"the call does not come back: {outcome.steps} steps ran"
    if ending.kind == "result":
        return f"the call returns {ending.found}{due}"
    return f"afterwards {ending.place} is {ending.found}{due}"


# --------------------------------------------------------------------------------------------------------------- values


def held(memory: Memory, path: str) -> str:
    """What a place holds, as text; ``not set`` where it has no value, ``not known`` where that cannot be told."""
    try:
        return value_text(memory.read(path))
    except Undefined:
        return "not set"
    except (Unsettled, KeyError):
        return "not known"


def value_text(value: Any) -> str:
    """A value of a run as text: a number, or what a pointer points to."""
    if isinstance(value, tuple):
        cells, offset = value[0], value[1]
        return f"&{cells.name}" + (f" + {offset} bytes" if offset else "")
    if isinstance(value, FunctionPointer):
        return value.name
    if value is None:
        return "nothing"
    return repr(value) if isinstance(value, int | float) else "a structure"


def shown_value(value: Value) -> str:
    """A witness's value as C spells it."""
    if value is None:
        return "NULL"
    if not isinstance(value, Reference):
        return str(value)
    name = value.to.rpartition(":")[2] + value.path
    return f"&{name}[{value.at}]" if value.at else f"&{name}"


def start_values(witness: Witness) -> tuple[tuple[str, str], ...]:
    """The start values as (place, text), for display."""
    return tuple((start.object.rpartition(":")[2] + start.path, shown_value(start.value)) for start in witness.start)
