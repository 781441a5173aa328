"""Functions as formulas: every path with its condition and effects, or one trace in which all runs are.

``enumerate_paths`` gives the paths of a function one by one, with loops gone round a bounded number of times (and
says if that left any out). ``trace_function`` runs every block once on joined states, with loops cut at their heads, so
that what is proved of it holds for all runs. ``can_hold`` settles whether a branch's condition can hold where it
stands.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import z3

from stepring.meaning.types import Function, StructType, VariablePlace
from stepring.paths.symbolic_graph import graph_of
from stepring.paths.symbolic_memory import Memories, State, Value, guard_of, new_epoch
from stepring.paths.symbolic_run import new_frame, run_body
from stepring.paths.symbolic_terms import Term, Terms, as_truth
from stepring.paths.symbolic_types import CUT, FLAG, Around, Limits, Point, Trace
from stepring.paths.symbolic_values import Engine, Frame, anything, cut, home, locate, store, trouble


@dataclass(frozen=True, slots=True, eq=False)
class Path:
    """A path: the conditions under which it is taken, what it returns, and the state it ends in.

    ``exact`` says that nothing on it is a guess: each model of its conditions is a run.
    """

    condition: Term
    returns: Value
    state: State
    exact: bool


@dataclass(frozen=True, slots=True, eq=False)
class Paths:
    """The paths of a function. ``bounded``: some were left out; ``unknown``: what was not modelled, with reasons."""

    paths: tuple[Path, ...]
    trace: Trace
    bounded: bool
    unknown: tuple[tuple[str, str], ...]


def _begin(around: Around, function: Function, limits: Limits, merging: bool) -> tuple[Engine, State]:
    terms = Terms(exact=not merging)
    pointer = around.model.pointer
    memories = Memories(terms, max(32, pointer), max(32, pointer) + 2)
    engine = Engine(around, limits, Trace(function, terms, memories), merging)
    return engine, State((), {}, {}, new_epoch(memories))


def _enter(engine: Engine, function: Function, state: State, arguments: Sequence[Value] | None) -> Frame:
    frame = new_frame(engine, function, ())
    for number, parameter in enumerate(function.parameters):
        spot = locate(engine, state, frame, VariablePlace(parameter))
        if isinstance(parameter.type, StructType):
            continue
        value = arguments[number] if arguments is not None else None
        if value is None:
            value = anything(engine, parameter.type, parameter.name)
            engine.terms.unknowns -= 1
        engine.trace.arguments[parameter.name] = value
        store(engine, state, frame, spot, value)
    return frame


def enumerate_paths(
    around: Around, function: Function, *, limits: Limits | None = None, arguments: Sequence[Value] | None = None
) -> Paths:
    """The paths of a function; ``arguments`` (numbers, terms, pointers) are free where None is given.

    Paths that differ only in what they do after the limit are left out, and ``bounded`` says so.
    """
    limits = limits or Limits()
    engine, state = _begin(around, function, limits, merging=False)
    for variable in function.variables:
        if variable.lasting:
            home(engine, ("var", variable.identity), variable.type)
    frame = _enter(engine, function, state, arguments)
    exits = run_body(engine, frame, state)
    exact = engine.terms.unknowns == 0 and not engine.trace.troubles
    paths = tuple(Path(as_truth(guard_of(exit_.state)), exit_.value, exit_.state, exact) for exit_ in exits)
    return Paths(paths, engine.trace, engine.trace.bounded, tuple(engine.trace.troubles))


def trace_function(around: Around, function: Function, *, limits: Limits | None = None, private: bool = False) -> Trace:
    """All runs of a function from any state of memory, in one trace.

    ``private``: calls that are not laid out touch nothing that the function works on (it sets something up).
    """
    limits = limits or Limits()
    doubted: set[tuple[str, int, str]] = set()
    for _ in range(4):
        known = set(doubted)
        trace = _traced(around, function, limits, doubted, private)
        if doubted == known:
            return trace
    trace.troubles["bound reached", "a loop's pointers were not settled"] = None
    return trace


def _traced(
    around: Around, function: Function, limits: Limits, doubted: set[tuple[str, int, str]], private: bool
) -> Trace:
    engine, state = _begin(around, function, limits, merging=True)
    engine.doubted = doubted
    engine.private = private
    frame = _enter(engine, function, state, None)
    engine.trace.types[CUT] = FLAG
    cut(engine, state)
    engine.trace.points.append(Point("entry", state.copy(), function.position))
    if graph_of(function).irreducible:
        trouble(engine, "not modelled", "a loop is entered in the middle")
        return engine.trace
    for exit_ in run_body(engine, frame, state):
        engine.trace.points.append(Point("return", exit_.state.copy(), exit_.position, value=exit_.value))
    return engine.trace


Answer = Literal["yes", "no", "unknown"]


def can_hold(
    around: Around, function: Function, block: int, *, outcome: bool = True, limits: Limits | None = None
) -> Answer:
    """Whether the condition that ends a block can be true (``outcome``) or false, from any state of memory.

    ``no`` is a proof. ``yes`` means that the model rests on nothing but the function's own inputs.
    """
    limits = limits or Limits()
    trace = trace_function(around, function, limits=limits)
    if trace.troubles:
        return "unknown"
    here = [item for item in trace.branches if item.function == function.identity and item.block == block]
    if not here:
        return "no"
    solver = z3.Solver()
    solver.set("rlimit", limits.effort)
    solver.set("random_seed", 0)
    solver.add(*trace.terms.facts)
    wanted = []
    for item in here:
        holds = as_truth(item.holds)
        wanted.append(z3.And(as_truth(guard_of(item.state)), holds if outcome else z3.Not(holds)))
    found = solver.check(z3.Or(*wanted))
    if found == z3.unsat:
        return "no"
    return "yes" if found == z3.sat and all(item.guesses == 0 for item in here) else "unknown"
