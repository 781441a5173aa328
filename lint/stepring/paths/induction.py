"""Relations that every operation keeps, found from candidates by dropping those that some operation breaks.

The method is that of C. Flanagan and K. R. M. Leino ("Houdini, an annotation assistant for ESC/Java", 2001): assume all
candidates wherever a function begins, ask the solver at every return and every call that may come back whether they
hold there, drop those that do not, and begin again until nothing is dropped. What is left holds at all these points in
all runs, if it held at the start. A loop's head is treated the same way with candidates of its own.

Candidates speak of one object: a structure at an address, or the program's variables. They are assumed and asked for
every object that a function touches; the others stay as they were.
"""

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from time import perf_counter
from typing import Literal, TypeAlias

import z3

from stepring.meaning.types import IntType
from stepring.paths.induction_loops import LoopRelation, loop_relations
from stepring.paths.symbolic_memory import Pointer, State, Value, added, address_mark, guard_of, home_of, read, row_of
from stepring.paths.symbolic_sums import Sums, whole
from stepring.paths.symbolic_terms import Number, Term, Truth, as_truth, both, either, equal, negated, stretch
from stepring.paths.symbolic_types import FLAG, SET_FRAME, Limits, Point, Trace
from stepring.shapes.ring_keys import Key

Look: TypeAlias = Callable[[Key], Value]
"""What a key holds, in the object and at the point that are asked about."""

LONGEST = 10_000
"""Milliseconds after which a question is given up whatever its units: some steps of the solver count none."""


DROPPING = (
    ("bits", 200_000),
    ("sums", 200_000),
    ("bits", 1_500_000),
    ("sums", 1_000_000),
    ("bits", 6_000_000),
)

PROVING = (
    ("sums", 50_000),
    ("bits", 300_000),
    ("sums", 200_000),
    ("bits", 1_500_000),
    ("sums", 1_000_000),
    ("bits", 6_000_000),
)
"""Tries at a question, each with its effort in the solver's units. Most code about rings adds and compares, which is
settled at once by arithmetic over whole numbers, which also tells what a proof rests on; models, masks and what wraps
round in other ways need bits."""

MANY = 16
"""Candidates at one point that are tried one by one, where the solver does not settle them together."""


@dataclass(frozen=True, slots=True, eq=False)
class Relation:
    """A candidate: its text as a C expression, the keys that it speaks of, and the formula over what they hold."""

    text: str
    keys: tuple[Key, ...]
    formula: Callable[["View"], Truth]


@dataclass(frozen=True, slots=True, eq=False)
class View:
    """An object at a point: ``number`` gives an integer as a signed number of ``width`` bits, ``pointer`` a pointer."""

    look: Look
    types: Mapping[Key, IntType]
    width: int

    def number(self, key: Key) -> Number:
        """An integer's value."""
        return stretch(self.look(key), self.types[key], self.width)

    def pointer(self, key: Key) -> Pointer | None:
        """A pointer's value, None where it is not followed."""
        found = self.look(key)
        return found if isinstance(found, Pointer) else None


@dataclass(frozen=True, slots=True)
class Family:
    """What makes up one object: a structure's members by their offset in bytes, and variables.

    ``sizes`` are those of the variables. ``types`` are the integers' types, ``pointers`` the pointers' (by key).
    """

    struct: str
    offsets: Mapping[Key, int]
    variables: frozenset[Key]
    types: Mapping[Key, IntType]
    pointers: Mapping[Key, "object"]
    width: int

    @property
    def keys(self) -> frozenset[Key]:
        return frozenset(self.offsets) | self.variables


@dataclass(slots=True, eq=False)
class Body:
    """A trace with its solver: ``assumes`` says whether candidates may be assumed where it begins (an operation) or not
    (a function that sets up)."""

    trace: Trace
    assumes: bool
    objects: list[Number | None] = field(default_factory=list)
    asks: bool = True
    assumed: dict[str, list[Term]] = field(default_factory=dict)
    switches: dict[str, Term] = field(default_factory=dict)
    goals: list[tuple[Point, Term, list[tuple[str, Term]]]] = field(default_factory=list)
    done: list[frozenset[str]] = field(default_factory=list)


Verdict: TypeAlias = Literal["holds", "fails", "unknown"]


@dataclass(slots=True, eq=False)
class Induction:
    """Candidates with the bodies that keep them; ``active`` are those that none breaks (so far).

    ``dropped`` gives for the others the body and the point that broke them; ``queries`` counts questions.
    """

    family: Family
    limits: Limits
    relations: dict[str, Relation]
    bodies: list[Body] = field(default_factory=list)
    active: set[str] = field(default_factory=set)
    loops: dict[str, LoopRelation] = field(default_factory=dict)
    dropped: dict[str, tuple[str, Point, str]] = field(default_factory=dict)
    given: frozenset[str] = frozenset()
    setting: tuple[Key, ...] = ()
    queries: int = 0
    exhausted: str = ""
    deadline: float | None = None
    core: tuple[str, ...] = ()


def induct(
    family: Family,
    relations: Iterable[Relation],
    operations: Sequence[Trace],
    setups: Sequence[Trace],
    ends: Sequence[Callable[[View], Number]],
    limits: Limits,
    given: Sequence[str] = (),
    setting: Iterable[Key] = (),
) -> Induction:
    """Drop the relations that an operation breaks, or that a function which sets up does not establish.

    ``ends`` are numbers (a capacity) that loops' variables are compared with; ``given`` the relations that the callers
    of functions which set up see to, and ``setting`` the keys (a capacity, a buffer) whose store sets up an object.
    """
    made = Induction(family, limits, {relation.text: relation for relation in relations})
    made.deadline = perf_counter() + limits.seconds if limits.seconds is not None else None
    made.active = set(made.relations)
    made.given = frozenset(given)
    made.setting = tuple(sorted(setting))
    for trace, assumes in (*((trace, True) for trace in operations), *((trace, False) for trace in setups)):
        made.bodies.append(_prepared(made, trace, assumes, ends))
    _settle(made)
    return made


# -------------------------------------------------------------------------------------------------------- preparation


def objects_of(family: Family, trace: Trace) -> list[Number | None]:
    """The objects of a family that a trace touches, by their addresses; None stands for variables alone."""
    if not family.struct:
        return [None]
    found: list[Number | None] = []
    marks: set[object] = set()
    for key, offset in family.offsets.items():
        for at in trace.memories.met.get(key, ()):
            base = added(trace.memories, at, -offset)
            if address_mark(base) not in marks:
                marks.add(address_mark(base))
                found.append(base)
    return found


def look_at(family: Family, trace: Trace, state: State, base: Number | None) -> View:
    """An object in a state."""

    def look(key: Key) -> Value:
        type_ = family.types.get(key) or family.pointers.get(key)
        if key in family.offsets and base is not None:
            at = added(trace.memories, base, family.offsets[key])
        else:
            at = home_of(trace.memories, key, 8)
        return read(trace.memories, row_of(trace.memories, state, key), at, type_)  # type: ignore[arg-type]

    return View(look, family.types, family.width)


def concerns(family: Family, point: Point) -> bool:
    """Whether a point matters: a call that can store into nothing of the family does not."""
    return point.keys is None or bool(point.keys & family.keys)


def _prepared(made: Induction, trace: Trace, assumes: bool, ends: Sequence[Callable[[View], Number]]) -> Body:
    body = Body(trace, assumes)
    body.objects = objects_of(made.family, trace)
    keys = made.family.keys
    body.asks = bool(keys & trace.sets.keys()) or any(access.array or access.pointer for access in trace.accesses)
    number = len(made.bodies)
    heads: dict[int, Point] = {}
    for point in trace.points:
        if not concerns(made.family, point):
            continue
        match point.kind:
            case "entry":
                _assume(made, body, point, "")
            case "after call" if assumes:
                _assume(made, body, point, "")
            case "return" if not assumes:
                _assume(made, body, point, "", made.given)
                _ask(made, body, point, "", made.given)
            case "return" | "call" if assumes:
                _ask(made, body, point, "")
            case "before loop":
                heads[point.loop] = point
            case "loop":
                began = heads[point.loop]
                views = [look_at(made.family, trace, point.state, base) for base in body.objects[:2]]
                for relation in loop_relations(trace, began, point, number, views, ends) if body.asks else ():
                    made.loops[relation.text] = relation
                    made.active.add(relation.text)
                for text in made.relations:
                    made.active.add(f"{text} [loop {number}.{point.loop}]")
                mark = f" [loop {number}.{point.loop}]"
                _assume(made, body, point, mark)
                _ask(made, body, began, mark)
            case "round":
                _ask(made, body, point, f" [loop {number}.{point.loop}]")
    return body


def _at(made: Induction, body: Body, point: Point, mark: str) -> list[tuple[str, Term]]:
    """Every candidate at a point, by its name there."""
    found = []
    for base in body.objects:
        view = look_at(made.family, body.trace, point.state, base)
        concerned = _concerned(made, body, point, base)
        for text, relation in made.relations.items():
            found.append((text + mark, as_truth(either(negated(concerned), relation.formula(view)))))
    if mark:
        for own in made.loops.values():
            if own.mark == mark:
                found.append((own.text, as_truth(own.formula(point.state))))
    return found


def _concerned(made: Induction, body: Body, point: Point, base: Number | None) -> Truth:
    """Whether a function that sets up has to do with an object at a point, as far as candidates go.

    What it found is taken to be set up already, but not the objects that it sets up itself; at its end, only what it
    has set up counts (it may have refused to).
    """
    if body.assumes:
        return True
    family, memories = made.family, body.trace.memories
    if point.kind == "entry":
        others = [
            equal(added(memories, at, -family.offsets.get(key, 0)), base, memories.address)
            for key in made.setting
            for at in body.trace.sets.get(key, ())
            if base is not None
        ]
        if base is None or not body.trace.spoiled.isdisjoint(made.setting):
            return False
        return negated(either(*others))
    flags = []
    for key in sorted(made.setting):
        flag = point.state.local.get((SET_FRAME, "/".join(key)), 0)
        flags.append(negated(equal(flag, 0, FLAG.width)))
    return either(*flags)


def _assume(made: Induction, body: Body, point: Point, mark: str, only: frozenset[str] | None = None) -> None:
    guard = as_truth(guard_of(point.state))
    for name, term in _at(made, body, point, mark):
        if only is not None and name not in only:
            continue
        body.assumed.setdefault(name, []).append(z3.Implies(guard, term))
        if name not in body.switches:
            body.switches[name] = z3.Bool(f"keeps {name}")


def _ask(made: Induction, body: Body, point: Point, mark: str, but: frozenset[str] = frozenset()) -> None:
    goals = [(name, term) for name, term in _at(made, body, point, mark) if name not in but]
    body.goals.append((point, as_truth(guard_of(point.state)), goals))


# ------------------------------------------------------------------------------------------------------------ dropping


def _settle(made: Induction) -> None:
    """Drop until nothing is dropped."""
    changed = True
    while changed and not made.exhausted:
        changed = False
        for body in made.bodies:
            if body.trace.troubles:
                continue
            for point, guard, goals in body.goals:
                changed = _drop(made, body, point, guard, goals) or changed
    if made.exhausted:
        for name in sorted(made.active):
            made.dropped.setdefault(name, ("", made.bodies[0].goals[0][0], made.exhausted))
        made.active.clear()


def _drop(made: Induction, body: Body, point: Point, guard: Term, goals: Sequence[tuple[str, Term]]) -> bool:
    dropped = False
    while True:
        left = [(name, term) for name, term in goals if name in made.active]
        if not left or made.exhausted:
            return dropped
        verdict, model = _question(made, body, [guard, z3.Not(z3.And(*(term for _, term in left)))])
        if verdict == "holds":
            return dropped
        broken = []
        if verdict == "fails" and model is not None:
            broken = [name for name, term in left if z3.is_false(model.eval(term, model_completion=True))]
        if not broken and len(left) > MANY:
            # Too much at once: a loop's own variables are what is most easily done without.
            broken = [name for name, _ in left if name in made.loops]
        if not broken:
            # The solver did not settle all at once; those that it settles one by one may stay.
            for name, term in left:
                if _question(made, body, [guard, z3.Not(term)])[0] != "holds":
                    broken.append(name)
            if not broken:
                return dropped
        for name in broken:
            made.active.discard(name)
            made.dropped.setdefault(name, (body.trace.function.name, point, verdict if body.assumes else "set up"))
        dropped = True


def _question(
    made: Induction, body: Body, terms: Sequence[Term], schedule: Sequence[tuple[str, int]] = DROPPING
) -> tuple[Verdict, Term]:
    """Whether terms cannot hold together under what is active; a model where they can."""
    if made.queries >= made.limits.queries:
        made.exhausted = "query limit"
        return "unknown", None
    if made.deadline is not None and perf_counter() > made.deadline:
        made.exhausted = "time limit"
        return "unknown", None
    # A question about a large function counts as several: it costs as much.
    made.queries += 1 + len(body.trace.terms.facts) // 200
    made.core = ()
    active = [name for name in body.assumed if name in made.active]
    facts = [*body.trace.terms.facts, *terms]
    for kind, effort in schedule:
        if effort > made.limits.effort:
            break
        found, model = _tried(made, body, facts, active, kind, effort)
        if found != "unknown":
            return found, model
    return "unknown", None


def _tried(
    made: Induction, body: Body, facts: Sequence[Term], active: Sequence[str], kind: str, effort: int
) -> tuple[Verdict, Term]:
    """One try at a question."""
    bits_ = kind == "bits"
    if bits_:
        steps = ("simplify", "propagate-values", "solve-eqs", "elim-uncnstr", "simplify", "smt")
        solver = z3.Then(*steps).solver()
    else:
        solver = z3.SimpleSolver()
    solver.set("rlimit", effort)
    solver.set("timeout", LONGEST)
    solver.set("random_seed", 0)
    known = [(name, term) for name in active for term in body.assumed[name]]
    if bits_:
        solver.add(*facts, *(term for _, term in known))
    else:
        try:
            sums = Sums()
            solver.add(*(whole(sums, term) for term in facts))
            for name, term in known:
                solver.add(z3.Implies(body.switches[name], whole(sums, term)))
            solver.add(*sums.rules)
        except RecursionError:
            return "unknown", None
    switches = [body.switches[name] for name in active]
    try:
        answer = solver.check() if bits_ else solver.check(*switches)
        if answer == z3.unsat:
            names = active if bits_ else {str(term).removeprefix("keeps ") for term in solver.unsat_core()}
            made.core = tuple(sorted(names))
            return "holds", None
        if answer == z3.sat and bits_:
            return "fails", solver.model()
    except z3.Z3Exception:
        # A tactic that gives up says so by an exception.
        return "unknown", None
    return "unknown", None


def proved(made: Induction, body: Body, state: State, goal: Truth) -> Verdict:
    """Whether a goal holds in a state of a body, in all runs, given what all operations keep."""
    if body.trace.troubles:
        return "unknown"
    return _question(made, body, [as_truth(both(guard_of(state))), z3.Not(as_truth(goal))], PROVING)[0]


def basis(made: Induction) -> tuple[str, ...]:
    """The relations on which the latest proof rests, as C expressions."""
    return tuple(text for text in made.relations if text in made.core)


def kept_by(made: Induction) -> tuple[str, ...]:
    """The relations that are left, as C expressions."""
    return tuple(text for text in made.relations if text in made.active)
