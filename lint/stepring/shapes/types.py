"""What shapes gives: state machines as sets of facts with a graph, and rings with what walks them.

Everything here speaks of the original source (``Origin``), so that rules and reports need no way back.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, TypeAlias

import networkx

from stepring.places import Origin
from stepring.values.types import Interval

if TYPE_CHECKING:  # ring_types is made of what stands here
    from stepring.shapes.ring_types import Disagreement, Proof

# ---------------------------------------------------------------------------------------------------------- machines


@dataclass(frozen=True, slots=True)
class State:
    """A state: its value, its name as the source spells it, and how it is known.

    ``declared``: a constant of the enumeration or ``#define`` group that the machine's constants come from.
    ``labelled``: some dispatch has a case for it. ``tested``: compared with ``==`` or ``!=``. ``stored``: some code
    stores it. ``initial``: the value at start.
    ``where`` is its declaration if known, else its first use. ``elsewhere`` names another variable that the same
    constant is stored in, which may be the same memory under another type. ``kept``: nothing stores it but code that
    only runs in that very state, which enters nothing.
    """

    name: str
    value: int
    where: Origin
    declared: bool
    labelled: bool
    tested: bool
    stored: bool
    initial: bool
    elsewhere: str = ""
    kept: bool = False


Form: TypeAlias = Literal["switch", "if-chain", "table", "row list", "function pointer", "next state returned", "goto"]


@dataclass(frozen=True, slots=True)
class Label:
    """One ``case`` of a dispatch: the state names it covers; ``runs_on`` is the place it falls out of, if unmarked."""

    states: tuple[str, ...]
    low: int
    high: int
    written: int
    where: Origin
    constant: Origin
    fallen_into_from: Origin | None = None
    fall_marked: bool = False
    overwrites: bool = False


@dataclass(frozen=True, slots=True)
class DefaultFall:
    """A case that runs on into the ``default``: from where, and whether that is marked as meant.

    ``overwrites``: the default stores over what the case stored. ``faults`` are the functions it calls that report a
    fault.
    """

    source: Origin
    marked: bool
    overwrites: bool
    faults: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Dispatch:
    """One dispatch on the state: where it is, what it handles.

    ``form``: a ``switch``, or the equality tests of one function (``if-chain``: ``default`` is then the last ``else``
    of its longest chain), or the lookup in a table or call through it.

    ``default_does``: what the default does: ``none`` (there is none), ``nothing``, ``stores`` a state, ``calls``
    something,
    ``leaves`` the function, ``work`` otherwise. ``unreached`` are first statements of code that no label leads to.
    """

    function: str
    control: str
    where: Origin
    labels: tuple[Label, ...]
    default: Origin | None
    default_does: Literal["none", "nothing", "stores", "calls", "leaves", "work"]
    unreached: tuple[Origin, ...]
    control_low: int
    control_high: int
    form: Form = "switch"
    default_fall: DefaultFall | None = None


STEPPED = "arithmetic on its own value"


@dataclass(frozen=True, slots=True)
class StateStore:
    """A store into the state variable.

    ``values`` are the constants that can be stored (name, value), None where that is not known and ``why_unknown``
    says why. ``through`` is the setter's name where the store happens in one.
    """

    function: str
    where: Origin
    values: tuple[tuple[str, int], ...] | None
    why_unknown: str = ""
    through: str | None = None
    initial: bool = False


def _conjuncts(text: str) -> list[str]:
    """The parts of a conjunction, cut where no parenthesis is open."""
    parts: list[str] = []
    depth = start = 0
    for number, character in enumerate(text):
        depth += (character in "([") - (character in ")]")
        if depth == 0 and text.startswith(" && ", number):
            parts.append(text[start:number])
            start = number + 4
    return [*parts, text[start:]] if text else []


@dataclass(frozen=True, slots=True)
class Transition:
    """From one state to another, taken by a function at a place; ``guard`` is source text or empty.

    ``event`` is that part of the guard which tells an event (``code == CMD_STOP``; empty where nothing is recognised or
    the function itself is the event), ``condition`` the rest, ``actions`` are the functions called on the way.
    ``timed``: a clock or a counter is looked at.
    """

    source: str
    target: str
    function: str
    guard: str
    where: Origin
    event: str = ""
    actions: tuple[str, ...] = ()
    timed: bool = False

    @property
    def condition(self) -> str:
        """The guard without what tells the event."""
        told = {part.strip("()") for part in _conjuncts(self.event)}
        return " && ".join(part for part in _conjuncts(self.guard) if part.strip("()") not in told)


@dataclass(frozen=True, slots=True, eq=False)
class Machine:
    """A state variable, its states and all code that dispatches on it, tests it or stores into it.

    ``variable`` is how it is shown (``auger_state``, ``struct hopper.state``); ``kind`` is SARIF's logical location
    kind.
    ``complete`` is False where some store's value is unknown, the variable's address leaves the code that was read,
    or part of the program was not read; ``why_incomplete`` says which. ``family`` names the enumeration or
    ``#define`` group.
    """

    identity: str
    variable: str
    kind: Literal["variable", "member"]
    where: Origin
    form: str
    states: tuple[State, ...]
    dispatches: tuple[Dispatch, ...]
    stores: tuple[StateStore, ...]
    transitions: tuple[Transition, ...]
    initial: tuple[str, ...]
    complete: bool
    why_incomplete: tuple[str, ...]
    family: str
    # Whether the variable outlives the function; one that lives in a loop alone ends with it.
    lasting: bool = True

    def state(self, name: str) -> State:
        """The state of that name; ``KeyError`` if there is none."""
        for state in self.states:
            if state.name == name:
                return state
        raise KeyError(name)

    def graph(self) -> "networkx.MultiDiGraph[str]":
        """The states as nodes, the transitions as edges with ``function``, ``guard`` and ``where``."""
        graph: networkx.MultiDiGraph[str] = networkx.MultiDiGraph()
        graph.add_nodes_from(state.name for state in self.states)
        for step in self.transitions:
            graph.add_edge(step.source, step.target, function=step.function, guard=step.guard, where=step.where)
        return graph


# ---------------------------------------------------------------------------------------------------------- rings

WrapForm: TypeAlias = Literal["reset", "modulo", "mask", "subtract", "choice", "free-running", "decrement", "none"]
Scheme: TypeAlias = Literal["one slot empty", "count", "difference", "flag", "overwrite", "unchecked", "unknown"]


@dataclass(frozen=True, slots=True)
class Step:
    """What one advance does to an index, as found by running the code for every start value.

    ``pairs`` are (before, after); ``limit`` is the wrap's constant (N of ``>= N``, ``% N``, mask + 1) or None;
    ``wrap_where`` is the wrap's place and ``where`` the advance's.
    """

    function: str
    where: Origin
    wrap: WrapForm
    wrap_where: Origin | None
    limit: int | None
    pairs: tuple[tuple[int, int], ...]


@dataclass(frozen=True, slots=True)
class Access:
    """An access to the ring's storage through an index (or an index reduced on access).

    ``range`` is what the values engine says the subscript can be; ``exact`` are the subscripts that the index's real
    orbit gives, None where the orbit is not known.
    """

    function: str
    where: Origin
    index: str
    kind: Literal["load", "store", "address"]
    range: Interval | None
    exact: tuple[int, ...] | None
    reduction: WrapForm
    modulus: int | None
    steps: tuple["OrbitStep", ...] = ()


@dataclass(frozen=True, slots=True)
class OrbitStep:
    """One step of the shortest way to a bad value: where, what happens, and the index before and after."""

    where: Origin
    text: str
    values: tuple[tuple[str, str], ...]


BoundForm: TypeAlias = Literal["constant", "member", "variable", "argument"]
StorageForm: TypeAlias = Literal["array", "pointer", "elsewhere"]


@dataclass(frozen=True, slots=True)
class Bound:
    """Where the number of slots stands in the code: ``key`` plus ``plus`` (a mask is one less than the number).

    ``form``: a ``constant`` (``key`` is empty, ``plus`` the number), a ``member`` of the indices' structure (or of
    another one), a lasting ``variable``, or an ``argument`` of the functions. ``text`` is it as C would say it. ``key``
    holds the words of ``ring_keys.Key``: ``("member", structure, name)``, ``("var", identity)``, ``("local", frame,
    identity)``.
    """

    form: BoundForm
    text: str
    key: tuple[str, ...]
    plus: int = 0


@dataclass(frozen=True, slots=True)
class Index:
    """An index of a ring: how it is shown, its type's name and limits, its orbit and its steps.

    ``orbit`` are the values it really takes where it can be seen from outside a function, None if unknown. ``role``:
    ``write`` stores into the storage, ``read`` loads, ``both``, ``count`` counts the occupied slots. ``key`` are the
    words of ``ring_keys.Key``; ``form`` says whether it is a number or a pointer into the storage.
    """

    name: str
    identity: str
    type_name: str
    low: int
    high: int
    role: Literal["write", "read", "both", "count"]
    steps: tuple[Step, ...]
    orbit: tuple[int, ...] | None
    initial: int | None
    where: Origin
    key: tuple[str, ...] = ()
    form: Literal["integer", "pointer"] = "integer"


@dataclass(frozen=True, slots=True, eq=False)
class Ring:
    """Storage with indices that walk it round; ``capacity`` in elements, None where it is set at run time.

    ``bound`` says where the number of slots stands, None if the code does not show it. ``storage_key`` holds the words
    of ``ring_keys.Key`` (a final ``*``: what the pointer points to), empty where ``storage_form`` is ``elsewhere``:
    the code keeps the indices only and gives its caller the slot. ``struct`` is the identity of the structure that the
    indices are members of, empty for variables. ``functions`` are the identities of those that can be entered and
    access the storage or read or move an index, ``helpers`` those that are only called by them.
    """

    identity: str
    storage: str
    kind: Literal["variable", "member"]
    where: Origin
    capacity: int | None
    element_size: int | None
    indices: tuple[Index, ...]
    accesses: tuple[Access, ...]
    scheme: Scheme
    wrap: WrapForm
    notes: tuple[str, ...] = ()
    # Why stores into its indices may have been missed, one clause each: what was concluded from them is then open.
    unseen: tuple[str, ...] = ()
    proofs: "tuple[Proof, ...]" = ()
    disagreements: "tuple[Disagreement, ...]" = ()
    bound: Bound | None = None
    storage_key: tuple[str, ...] = ()
    storage_form: StorageForm = "array"
    struct: str = ""
    functions: tuple[str, ...] = ()
    helpers: tuple[str, ...] = ()
    # Whether its operations were run: only then does it mean something that no disagreement was found.
    explored: bool = False
    # Why no run of its operations can show anything, a clause; empty if they were run, None if nobody tried.
    unrun: str | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Program:
    """All that rules read."""

    machines: tuple[Machine, ...]
    rings: tuple[Ring, ...]
