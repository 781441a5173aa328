"""What symbolic runs are given and give: the program around a function, limits, accesses, points and paths.

A *point* is a moment at which what holds of the memory counts for other code: a function begins or returns, it calls
code that is not laid out, a loop begins or comes round.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Literal, TypeAlias

from stepring.meaning.types import CType, DataModel, Expr, Function, IntType, StructLayout
from stepring.paths.symbolic_memory import Memories, Pointer, State, Value
from stepring.paths.symbolic_terms import Number, Terms
from stepring.places import Position
from stepring.shapes.ring_keys import Key


@dataclass(frozen=True, slots=True)
class Limits:
    """How far a run and its questions may go; none of them depends on the clock but ``seconds``.

    ``effort`` are the solver's resource units for one question, ``queries`` the questions for one ring, ``paths`` those
    of one function, ``depth`` how deep calls are laid out, ``blocks`` the size of a function that is, ``work`` the
    blocks of one run in all, ``unroll`` how often a path goes round a loop.
    """

    effort: int = 1_500_000
    queries: int = 150
    paths: int = 256
    depth: int = 4
    blocks: int = 80
    work: int = 1500
    unroll: int = 3
    seconds: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Around:
    """The program around a function.

    ``resolve`` gives the body of a callee by the caller and its name; ``constants`` the values of objects that nothing
    changes; ``exposed`` the keys of scalars whose address some code takes; ``defined`` the names of all functions that
    the program defines, None where that is not known. ``opaque`` are the identities of functions that are not laid out.
    """

    structs: Mapping[str, StructLayout]
    model: DataModel
    resolve: Callable[[Function, str], Function | None]
    constants: Mapping[str, int] = field(default_factory=dict)
    exposed: frozenset[Key] = frozenset()
    defined: frozenset[str] | None = None
    opaque: frozenset[str] = frozenset()


AccessKind: TypeAlias = Literal["load", "store", "address"]


@dataclass(frozen=True, slots=True, eq=False)
class Accessed:
    """An access through a subscript or a stepped pointer.

    ``array`` is the array's key with its length, None behind a pointer that was loaded (``pointer``). ``first`` is the
    subscript, ``bytes_`` how many bytes from there are accessed (None: one element), ``unit`` an element's size.
    ``written`` is the subscript as the code has it.
    """

    position: Position
    also: Position | None
    function: str
    kind: AccessKind
    array: tuple[Key, int | None] | None
    pointer: Pointer | None
    first: Number
    bytes_: Number | None
    unit: int | None
    state: State
    written: Expr | None = None


CUT: tuple[int, str] = (0, "%cut")
"""In a state's variables: the number of the latest beginning of a stretch (entry, loop, return of a call)."""
SET_FRAME = -1
"""In a state's variables, with a key: 1 where something was stored into memory of that key."""
FLAG = IntType("unsigned int", 16, False, 3)


PointKind: TypeAlias = Literal["entry", "return", "call", "after call", "before loop", "loop", "round"]


@dataclass(frozen=True, slots=True, eq=False)
class Point:
    """A moment that counts. ``loop`` tells loops apart; ``keys`` are what the call may store into, None for anything.

    ``name`` is the callee's; ``frame`` and ``moved`` the frame of a loop and the variables that it changes.
    """

    kind: PointKind
    state: State
    position: Position
    name: str = ""
    loop: int = 0
    frame: int = 0
    moved: tuple[tuple[int, str], ...] = ()
    keys: frozenset[Key] | None = None
    value: Value = None


@dataclass(frozen=True, slots=True, eq=False)
class Store:
    """A store into a lasting place: for what is asked of advances."""

    key: Key
    at: Number
    position: Position
    function: str
    state: State


@dataclass(frozen=True, slots=True, eq=False)
class Branching:
    """A condition where it stands, with the state there; ``guesses`` counts what was not settled on the way."""

    function: str
    block: int
    state: State
    holds: object
    guesses: int


@dataclass(slots=True, eq=False)
class Trace:
    """What a run leaves: its terms, what was accessed, and the points in the order they were come to.

    ``troubles`` say what was not modelled, each a reason of the ledger with a clause; ``calls`` are the functions that
    were called but not laid out, ``handed`` the addresses that they were given, ``sets`` those that each key was stored
    into, ``spoiled`` the keys of which nothing was known any more at some point, ``covered`` the positions of the
    statements that ran.
    """

    function: Function
    terms: Terms
    memories: Memories
    accesses: list[Accessed] = field(default_factory=list)
    points: list[Point] = field(default_factory=list)
    stores: list[Store] = field(default_factory=list)
    branches: list[Branching] = field(default_factory=list)
    troubles: dict[tuple[str, str], None] = field(default_factory=dict)
    calls: dict[str, None] = field(default_factory=dict)
    laid_out: dict[str, None] = field(default_factory=dict)
    given: dict[Key, str] = field(default_factory=dict)
    handed: list[tuple[Number, str]] = field(default_factory=list)
    volatile: dict[Key, None] = field(default_factory=dict)
    types: dict[tuple[int, str], CType] = field(default_factory=dict)
    arguments: dict[str, Value] = field(default_factory=dict)
    sets: dict[Key, list[Number]] = field(default_factory=dict)
    spoiled: set[Key] = field(default_factory=set)
    bounded: bool = False
