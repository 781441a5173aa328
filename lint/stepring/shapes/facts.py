"""What one unit says about state variables: plain facts that can be stored, sent and merged.

A state variable is known by its ``key``: a variable's identity, or a structure's identity with a member's name,
whatever object is meant. Facts name values as the source does and carry original places only, so the program stage
needs nothing else of a unit. A transition's source is a value, or ``OTHER``: any value that the function does not
mention (``mentioned``).
"""

from dataclasses import dataclass, field
from typing import Literal, TypeAlias

from stepring.places import Origin
from stepring.shapes.types import DefaultFall, Form

OTHER = None  # a source that stands for every value not mentioned
Source: TypeAlias = int | None


@dataclass(frozen=True, slots=True)
class Constant:
    """A constant as it is used: its value, the name the source spells it with (None for a plain number), the place."""

    value: int
    name: str | None
    where: Origin


@dataclass(frozen=True, slots=True)
class Family:
    """A declared group of constants: an enumeration, or neighbouring ``#define``s with a prefix in common."""

    identity: str
    kind: Literal["enumeration", "macros"]
    members: tuple[Constant, ...]


@dataclass(frozen=True, slots=True)
class KeyFact:
    """A state variable's identity: how it is shown, where it is declared, its type's limits."""

    key: str
    shown: str
    kind: Literal["variable", "member"]
    where: Origin
    low: int
    high: int
    enum: str | None
    scope: Literal["lasting", "local", "parameter"]
    initials: tuple[Constant, ...]
    # Whether objects are known to start as zero (static storage) and no initialiser says otherwise.
    starts_zero: bool
    file: str


@dataclass(frozen=True, slots=True)
class LabelFact:
    """One ``case``; ``fell_from`` is set where the code before runs on into it."""

    constant: Constant
    high: int
    written: int
    where: Origin
    fell_from: Origin | None
    fall_marked: bool
    overwrites: bool


@dataclass(frozen=True, slots=True)
class DispatchFact:
    """One ``switch`` on a key, or the equality tests of it in one function (``form`` is then ``if-chain``).

    ``carried``: a constant stored while a loop runs reaches this dispatch again (what makes a local variable a state).
    ``packet``: the object is bytes looked at through a structure, as a received message is. ``working``: a copy is
    dispatched on that is changed and stored back.
    """

    key: str
    instance: str
    function: str
    control: str
    where: Origin
    labels: tuple[LabelFact, ...]
    default: Origin | None
    default_does: Literal["none", "nothing", "stores", "calls", "leaves", "work"]
    unreached: tuple[Origin, ...]
    characters: bool
    line_numbers: bool
    carried: bool
    packet: bool
    working: bool
    end: int
    form: Form = "switch"
    default_fall: DefaultFall | None = None


@dataclass(frozen=True, slots=True)
class TestFact:
    """A comparison of a key with a constant."""

    key: str
    function: str
    constant: Constant
    where: Origin


@dataclass(frozen=True, slots=True)
class StoreFact:
    """A store into a key: the constants it can store, or why they are not known.

    ``parameter`` is the number of the function's parameter whose value is stored. ``fresh``: the object is one that
    the function made or reset, so the store is an initial value, not a transition. ``stepped``: ``++``, ``--`` or
    arithmetic on the old value.
    """

    key: str
    function: str
    where: Origin
    constants: tuple[Constant, ...]
    why_unknown: str = ""
    parameter: int | None = None
    fresh: bool = False
    stepped: bool = False
    copied: bool = False


@dataclass(frozen=True, slots=True)
class TransitionFact:
    """A step of a key's value, taken by a function: from a value (or ``OTHER``) to a constant.

    ``stored_by`` is the function that stores it, which may be a setter. ``through`` names a function of another unit
    and the number of its argument: the step is one only if that function stores its argument in the key.
    ``dispatched``: the source is what a ``switch`` on the key found, not only a test.
    """

    key: str
    function: str
    source: Source
    mentioned: tuple[int, ...]
    target: Constant
    guard: str
    where: Origin
    stored_by: str
    through: tuple[str, int] | None = None
    dispatched: bool = False
    event: str = ""
    actions: tuple[str, ...] = ()
    timed: bool = False


@dataclass(frozen=True, slots=True)
class CallFact:
    """A call of a function that may be a setter, with an argument that is a constant, or else its text."""

    callee: str
    argument: int
    constant: Constant | None
    function: str
    where: Origin
    text: str = ""


@dataclass(frozen=True, slots=True)
class ForwardFact:
    """A call that hands on the caller's own parameter (its number) as an argument."""

    callee: str
    argument: int
    caller: str
    parameter: int


@dataclass(frozen=True, slots=True)
class HandlerFact:
    """Something about a variable that holds a function: one is ``stored`` in it (or is its ``initial`` one), it is
    ``called``, or a function ``returned`` another (no key then).

    ``constant`` names the function; its value stands for it. ``callers`` are those of a static function that stores.
    ``kept``: the result of the call is stored in the variable again. ``idle``: the function that stores is static, and
    nothing calls it or takes its address; ``fits`` says that the variable could hold it.
    """

    kind: Literal["stored", "initial", "called", "returned"]
    key: str
    function: str
    constant: Constant
    where: Origin
    callers: tuple[str, ...]
    guard: str
    event: str
    actions: tuple[str, ...]
    timed: bool = False
    kept: bool = False
    idle: bool = False
    fits: bool = False


@dataclass(frozen=True, slots=True)
class StateFacts:
    """All that a unit says about state variables."""

    keys: tuple[KeyFact, ...] = ()
    dispatches: tuple[DispatchFact, ...] = ()
    tests: tuple[TestFact, ...] = ()
    stores: tuple[StoreFact, ...] = ()
    transitions: tuple[TransitionFact, ...] = ()
    calls: tuple[CallFact, ...] = ()
    families: tuple[Family, ...] = ()
    # Keys whose transitions may be incomplete because a bound was met.
    bounded: tuple[str, ...] = ()
    exposed: tuple[tuple[str, Origin], ...] = field(default=())
    # Functions that give objects their first state, as their names say, each with a function that calls it (or none).
    starters: tuple[tuple[str, str | None], ...] = ()
    forwards: tuple[ForwardFact, ...] = ()
    # Variables whose value is stored in a state, with that state: a next state that is committed later.
    commits: tuple[tuple[str, str], ...] = ()
    handlers: tuple[HandlerFact, ...] = ()
