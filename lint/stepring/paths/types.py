"""What running IR gives: how a run ended, what happened on the way, and the two reasons for not going on.

``Undefined`` is a step to which C gives no meaning (N1570 3.4.3); ``Unsettled`` is one whose meaning the text that was
read does not give (a function without body, a value that a device sets). They are kept apart because only the first
is a defect of the program.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal, TypeAlias

from stepring.places import Position

Fault = Literal[
    "overflow",
    "shift",
    "division",
    "bounds",
    "null",
    "uninitialised",
    "lifetime",
    "pointer",
    "conversion",
    "read-only",
    "overlap",
    "arguments",
]
"""What is undefined: a signed result that does not fit (6.5p5), a shift count or a shifted value out of range (6.5.7),
division by zero (6.5.5p5), an access outside its array (6.5.6p8), a null pointer used (6.5.3.2p4), a value read before
it was set (6.3.2.1p2), an object used after its life (6.2.4p2), a pointer made outside its array, or pointers into
different objects compared or subtracted (6.5.6p8, p9, 6.5.8p5), a real that its integer type cannot hold (6.3.1.4p1),
a constant object changed (6.7.3p6), a copy whose ends overlap (7.24.2.1), a call with the wrong number of arguments
(6.5.2.2p6)."""


class Undefined(Exception):
    """The program did something that C leaves undefined."""

    def __init__(self, fault: Fault, reason: str, position: Position | None = None) -> None:
        super().__init__(reason)
        self.fault: Fault = fault
        self.reason = reason
        self.position = position


class Unsettled(Exception):
    """The program needs something that was not read or not given."""

    def __init__(self, reason: str, position: Position | None = None) -> None:
        super().__init__(reason)
        self.reason = reason
        self.position = position


@dataclass(frozen=True, slots=True)
class Event:
    """One thing that a watched run did: ``text`` is what was stored into, tested, called or left, as C spells it."""

    kind: Literal["store", "branch", "switch", "call", "return"]
    function: str
    position: Position
    text: str
    value: Any


@dataclass(frozen=True, slots=True)
class Outcome:
    """How a run ended.

    ``returned``: with ``value`` (None from a function without result). ``undefined``: ``fault`` and ``reason`` say
    what, ``position`` and ``function`` where. ``stopped``: something needed is not known (``reason``). ``limit``: the
    steps given did not suffice. ``steps`` are the IR statements and block ends that ran.
    """

    kind: Literal["returned", "undefined", "stopped", "limit"]
    value: Any
    reason: str
    position: Position | None
    function: str
    fault: Fault | None
    steps: int


ASSEMBLY = "inline assembly"
"""What inline assembly is called, where it gives a value (an interrupt mask) in a function that nothing goes into."""
External: TypeAlias = Callable[[Sequence[Any]], Any]
Externals: TypeAlias = Callable[[str, Sequence[Any]], Any] | Mapping[str, External]
"""Functions that have no body in the units: by name, or one that is asked for all. They get the arguments (integers,
reals, pointers) and give the result; it is converted to the result's type. ``ASSEMBLY`` is asked for as a function."""
