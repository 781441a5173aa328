"""The exact interpreter: runs a program's IR on concrete values, with the target's sizes, and stops where C ends.

``program`` joins typed units as a linker would; ``fresh`` gives its memory as it is at start; ``run`` calls a function
on a memory. Whatever C leaves undefined ends a run with its place, and so does whatever the text that was read does
not settle: nothing is ever assumed. A run with the same program, memory, arguments and externals always gives the
same outcome.

Choices that C leaves open are those of lowering (operands from left to right) and of the trade's compilers: bytes in
little-endian order, signed conversion modulo 2^N, arithmetic right shift. A library function of ``library.BUILTINS``
is carried out here even if the program has its own.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from stepring.meaning.fold import convert
from stepring.meaning.types import (
    CType,
    IntType,
    TypedUnit,
)
from stepring.paths.arithmetic import adopted
from stepring.paths.library import BUILTINS
from stepring.paths.memory import Cells, FunctionPointer, Memory, new_cells, write_value
from stepring.paths.program import Program, Run, fresh, program
from stepring.paths.translate import Code, Enter, Leave
from stepring.paths.types import Event, Externals, Outcome, Undefined, Unsettled
from stepring.places import Position

__all__ = ["Program", "fresh", "program", "run"]

DEEPEST = 2000
"""The most calls that may be open at once; deeper recursion ends a run with ``limit``."""


@dataclass(slots=True)
class _Frame:
    """An open call: its code, its values, where it goes on, and the caller's top of memory."""

    code: Code
    values: list[Any]
    block: int
    top: int
    result: CType | None = None

    def __iter__(self) -> Any:
        return iter(self.values)


def run(
    units: Program | Sequence[TypedUnit],
    function: str,
    arguments: Sequence[Any] = (),
    externals: Externals | None = None,
    *,
    steps: int = 1_000_000,
    memory: Memory | None = None,
    volatile: Callable[[Memory, str, str], None] | None = None,
    observe: Callable[[Event], None] | None = None,
    device: Callable[[int, int, str], Any] | None = None,
) -> Outcome:
    """Call a function of a program with the given arguments (integers, reals, pointers of ``memory``).

    ``externals`` stand in for functions without body. ``memory`` is changed; by default it is a fresh one. ``steps``
    bounds the IR statements that may run. ``volatile`` is told of every access to a volatile object just before it
    happens (memory, place, ``load`` or ``store``) and may change the memory, or run a function on it, as an interrupt
    would. ``observe`` is told of every store, branch, call and return. A static function can be named
    ``file:function``. ``KeyError`` if there is no such function, ``ValueError`` for a wrong number of arguments.
    """
    made = units if isinstance(units, Program) else program(units)
    unit, name = _find(made, function)
    kept = memory if memory is not None else Memory(made)
    state = Run(made, kept, externals, volatile, observe, device)
    try:
        code = made.code(unit, name, observe is not None)
    except RecursionError:
        at = made.functions[unit][name].position
        return Outcome("stopped", None, f"{name} has expressions that are nested too deeply", at, name, None, 0)
    made.grow(kept)  # making code ready can bring string literals
    if len(arguments) != len(code.parameters):
        raise ValueError(f"{function} takes {len(code.parameters)} arguments and was given {len(arguments)}")
    given = [adopted(item, type_, name, None) for item, (_, type_) in zip(arguments, code.parameters, strict=True)]
    stack: list[_Frame] = []
    kept.stacks.append(stack)
    top = kept.top
    try:
        return _loop(state, stack, code, given, steps)
    finally:
        kept.stacks.pop()
        for frame in stack:
            _close(kept, frame)
        kept.top = top


def _find(made: Program, function: str) -> tuple[int, str]:
    known = made.found.get(function)
    if known is None:
        known = made.found[function] = _search(made, function)
    return known


def _search(made: Program, function: str) -> tuple[int, str]:
    if function in made.external:
        return made.external[function], function
    found = [
        (number, item.name)
        for number, unit in enumerate(made.units)
        for item in unit.functions
        if item.identity == function or item.name == function
    ]
    if not found:
        raise KeyError(f"no unit has a function {function!r}")
    if len({made.functions[unit][name].identity for unit, name in found}) > 1:
        names = ", ".join(made.functions[unit][name].identity for unit, name in found)
        raise KeyError(f"{function!r} could be any of {names}")
    return found[0]


def _open(state: Run, code: Code, arguments: Sequence[Any]) -> _Frame:
    memory = state.memory
    values: list[Any] = [memory.cells, state, None] + [None] * (code.width - 3)
    top = memory.top
    for resident in code.residents:
        size = resident.size or 0
        cells = values[resident.slot] = new_cells(resident.name, size, memory.top)
        memory.top += (size + 31) // 16 * 16
        if resident.size is None:
            cells.why = f"the size of {resident.name} is not known here"
    for (slot, type_), given in zip(code.parameters, arguments, strict=True):
        if isinstance(values[slot], Cells):
            if given is not None:
                write_value(values[slot], 0, type_, given)
        else:
            values[slot] = given
    return _Frame(code, values, 0, top)


def _close(memory: Memory, frame: _Frame) -> None:
    for resident in frame.code.residents:
        frame.values[resident.slot].alive = False
    memory.top = frame.top


def _loop(state: Run, stack: list[_Frame], code: Code, arguments: Sequence[Any], steps: int) -> Outcome:
    """Run blocks until the first call returns or something ends the run."""
    try:
        frame = _open(state, code, arguments)
    except Unsettled as end:
        return Outcome("stopped", None, end.reason, code.position, code.name, None, 0)
    stack.append(frame)
    blocks, values, number = code.blocks, frame.values, 0
    left = steps
    at: Position = code.position
    try:
        while True:
            block, cost, at = blocks[number]
            left -= cost
            if left < 0:
                return Outcome("limit", None, f"{steps} steps did not suffice", at, frame.code.name, None, steps)
            number = block(values)
            if number.__class__ is int:
                continue
            ending: Any = number
            if ending.__class__ is Enter:
                frame.block, frame.result = ending.after, ending.result
                at = ending.position
                entered = _enter(state, frame, ending)
                if entered is None:
                    number = frame.block
                    continue
                if len(stack) >= DEEPEST:
                    reason = f"{DEEPEST} calls are open at once"
                    return Outcome("limit", None, reason, at, frame.code.name, None, steps - left)
                stack.append(entered)
                frame = entered
                blocks, values, number = frame.code.blocks, frame.values, 0
                continue
            assert isinstance(ending, Leave)
            _close(state.memory, stack.pop())
            if not stack:
                return Outcome("returned", ending.value, "", None, code.name, None, steps - left)
            frame = stack[-1]
            blocks, values, number = frame.code.blocks, frame.values, frame.block
            values[2] = ending.value
    except Undefined as end:
        where = end.position or at
        return Outcome("undefined", None, end.reason, where, frame.code.name, end.fault, steps - left)
    except RecursionError:
        reason = "a function that is called here has expressions that are nested too deeply"
        return Outcome("stopped", None, reason, at, frame.code.name, None, steps - left)
    except Unsettled as end:
        return Outcome("stopped", None, end.reason, end.position or at, frame.code.name, None, steps - left)


def _enter(state: Run, frame: _Frame, call: Enter) -> _Frame | None:
    """The frame of a called function, or None where it had no body and its result is there already."""
    callee = call.callee
    made = state.program
    if not isinstance(callee, FunctionPointer):
        if callee == 0:
            raise Undefined("null", "a null pointer is called", call.position)
        if callee.__class__ is tuple:
            raise Undefined("pointer", f"{callee[0].name} is called, which is no function", call.position)
        raise Unsettled(f"the address 0x{callee:x} is called, where no function is known", call.position)
    if callee.unit < 0:
        frame.values[2] = _outside_call(state, callee.name, call)
        return None
    code = made.code(callee.unit, callee.name, state.observe is not None)
    if len(made.statics) > len(state.memory.cells):
        made.grow(state.memory)
    arguments = call.arguments
    if len(arguments) != len(code.parameters):
        function = made.functions[callee.unit][callee.name]
        if len(arguments) < len(code.parameters) or not function.type.variadic:
            wanted = len(code.parameters)
            reason = f"{callee.name} takes {wanted} arguments and is called with {len(arguments)}"
            raise Undefined("arguments", reason, call.position)
        arguments = arguments[: len(code.parameters)]
    settled = [
        convert(item, type_) if isinstance(item, int) and isinstance(type_, IntType) else item
        for item, (_, type_) in zip(arguments, code.parameters, strict=True)
    ]
    return _open(state, code, settled)


def _outside_call(state: Run, name: str, call: Enter) -> Any:
    if name in BUILTINS:
        result = BUILTINS[name](state, call.arguments, call.position)
    else:
        given = state.externals
        if isinstance(given, Mapping):
            function = given.get(name)
            if function is None:
                raise Unsettled(f"{name} has no body in the units that were read", call.position)
            result = function(call.arguments)
        elif given is not None:
            result = given(name, call.arguments)
        else:
            raise Unsettled(f"{name} has no body in the units that were read", call.position)
        for argument in call.arguments:
            # It may have set what it was given a pointer to: such bits are unknown now, not indeterminate.
            if argument.__class__ is tuple and argument[0].known is not None and not argument[0].why:
                argument[0].why = f"{name} may have set it"
    if call.result is None:
        return None
    return adopted(result, call.result, name, call.position)
