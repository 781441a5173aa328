"""Paths as formulas mean what the interpreter does: a model of a path runs along it, and each run is on one path."""

import random
from typing import Any

import pytest
import z3
from tests.paths.programs import LIBRARY, program_text
from tests.support import lower_text

from stepring.meaning.types import CType, Function, IntType, TypedUnit
from stepring.paths.interpreter import fresh, program, run
from stepring.paths.symbolic import Path, can_hold, enumerate_paths, trace_function
from stepring.paths.symbolic_types import Around, Limits

FEEDER = """
typedef unsigned char uint8_t; typedef unsigned short uint16_t;
static uint8_t level = 7; static int16_t trim; static uint16_t marks[4] = {1, 2, 3, 4};
struct hopper { uint8_t door; int16_t grams; struct { uint8_t row[3]; } in; } hopper;
static uint8_t wrapped(uint8_t i) { return i + 1 >= 5 ? 0 : i + 1; }
int dose(int a, int b) {
    hopper.grams = (int16_t)a;
    if (a < 0) { level -= (uint8_t)b; return -level; }
    level = wrapped(level);
    hopper.in.row[a % 3] = (uint8_t)b;
    if (marks[b & 3] > level) marks[(b + 1) & 3] = level;
    return marks[0] + marks[1] * 2 + hopper.in.row[1] + hopper.grams + trim;
}
int mixed(int a, int b) {
    switch (a & 7) { case 0: return b / 3; case 1: case 2: return b % 5 - a; case 5: return -(b >> 2); default: break; }
    uint16_t sum = 0;
    for (int i = 0; i < (b & 3); i++) sum += (uint16_t)(a * i);
    return sum > 100 ? sum : (b > 4 && a < 9) ? 1 : ~a;
}
""".replace("static int16_t", "typedef short int16_t; static int16_t").replace("int16_t trim", "int16_t trim", 1)


def around(unit: TypedUnit) -> Around:
    """A unit with nothing around it."""
    bodies = {function.name: function for function in unit.functions}
    return Around(unit.types.structs, unit.types.model, lambda _, name: bodies.get(name))


def number(model: Any, term: Any, type_: CType) -> int:
    """A term's value in a model, as C has it."""
    value = model.eval(term, model_completion=True).as_long() if not isinstance(term, int) else term
    assert isinstance(type_, IntType)
    value &= (1 << type_.width) - 1
    return value - (1 << type_.width) if type_.signed and value >> (type_.width - 1) else value


def of(unit: TypedUnit, name: str) -> Function:
    return next(function for function in unit.functions if function.name == name)


def solver_for(paths: Any, condition: Any) -> Any:
    solver = z3.SolverFor("QF_BV")
    solver.add(*paths.trace.terms.facts, condition)
    return solver


def started(unit: TypedUnit, paths: Any) -> list[Any]:
    """What the memory is at start, as far as the paths asked for it: constant initial values of whole variables and of
    the elements of one array, else 0."""
    known: dict[tuple[str, ...], dict[int, int]] = {}
    for item in unit.objects:
        for initial in item.initial:
            assert len(initial.path) < 2
            place = int(initial.path[0]) if initial.path else 0
            key = ("var", item.variable.identity, *["[]"] * len(initial.path))
            known.setdefault(key, {})[place] = getattr(initial.value, "value", 0)
    facts = []
    memories = paths.trace.memories
    for name, rows in memories.rows.items():
        key = tuple(name.rsplit("@", 1)[0].split("/"))
        values = known.get(key, {0: 0})
        for at, term in rows:
            home = memories.homes.get(key[:2], 0)
            inside = [home + place * (term.size() // 8) for place in values]
            for there, value in zip(inside, values.values(), strict=True):
                facts.append(z3.Implies(z3.BoolVal(True) if key not in known else at == there, term == value))
            if key in known:
                facts.append(z3.Implies(z3.And([at != there for there in inside]), term == 0))
    return facts


ARGUMENTS = ((0, 0), (1, 2), (-3, 7), (2, 1), (8, 3), (40, 11), (7, 5))


@pytest.mark.parametrize("name", ["dose", "mixed"])
def test_a_model_of_each_path_runs_along_it(name: str) -> None:
    unit = lower_text(FEEDER)
    assert not unit.notices
    function = of(unit, name)
    paths = enumerate_paths(around(unit), function, limits=Limits(unroll=4))
    assert len(paths.paths) > 3
    assert not paths.bounded
    made = program([unit])
    for path in paths.paths:
        solver = solver_for(paths, path.condition)
        solver.add(*started(unit, paths))
        a, b = (paths.trace.arguments[item.name] for item in function.parameters)
        solver.add(a > -1000, a < 1000, b > -1000, b < 1000)
        if solver.check() != z3.sat:
            continue
        model = solver.model()
        given = [number(model, term, item.type) for term, item in zip((a, b), function.parameters, strict=True)]
        outcome = run(made, name, given, memory=fresh(made))
        if outcome.kind == "undefined":
            continue
        assert outcome.kind == "returned"
        assert outcome.value == number(model, path.returns, function.type.returns)


@pytest.mark.parametrize("name", ["dose", "mixed"])
def test_each_run_is_on_one_path(name: str) -> None:
    unit = lower_text(FEEDER)
    function = of(unit, name)
    paths = enumerate_paths(around(unit), function, limits=Limits(unroll=4))
    made = program([unit])
    ran = 0
    for arguments in ARGUMENTS:
        outcome = run(made, name, arguments, memory=fresh(made))
        if outcome.kind != "returned":
            continue
        ran += 1
        taken = list(on(unit, paths, function, arguments))
        assert len(taken) == 1
        path, model = taken[0]
        assert outcome.value == number(model, path.returns, function.type.returns)
    assert ran > 5


def on(unit: TypedUnit, paths: Any, function: Function, arguments: Any) -> Any:
    """The paths that a run with some arguments may take, each with a model."""
    for path in paths.paths:
        solver = solver_for(paths, path.condition)
        solver.add(*started(unit, paths))
        for item, value in zip(function.parameters, arguments, strict=True):
            solver.add(paths.trace.arguments[item.name] == value)
        if solver.check() == z3.sat:
            yield path, solver.model()


@pytest.mark.parametrize("seed", [1, 2, 4, 5])
def test_random_programs_run_along_a_path(seed: int) -> None:
    """What the interpreter returns is what some path returns, whatever was guessed on the way."""
    unit = lower_text(LIBRARY + program_text(random.Random(seed), "0").replace("KEEP(", "("))
    assert not unit.notices
    function = of(unit, "f0_0")
    paths = enumerate_paths(around(unit), function, limits=Limits(unroll=4, paths=40, work=400, effort=300_000))
    if paths.bounded or any(not isinstance(item.type, IntType) for item in function.parameters):
        return
    made = program([unit])
    for first in (0, 1, 7):
        arguments = [first] * len(function.parameters)
        outcome = run(made, "f0_0", arguments, memory=fresh(made))
        if outcome.kind != "returned" or not isinstance(outcome.value, int):
            continue
        returns = function.type.returns
        assert isinstance(returns, IntType)
        possible = []
        for path in paths.paths:
            solver = solver_for(paths, path.condition)
            for item, value in zip(function.parameters, arguments, strict=True):
                term = paths.trace.arguments[item.name]
                if not isinstance(term, int):
                    solver.add(term == value)
            if isinstance(path.returns, int):
                if path.returns != outcome.value:
                    continue
            else:
                solver.add(path.returns == outcome.value)
            solver.set("rlimit", 400_000)
            possible.append(solver.check() != z3.unsat)
        assert any(possible)


def test_a_guard_that_cannot_hold() -> None:
    unit = lower_text(
        "static unsigned char mode; int step(unsigned n) { unsigned low = n & 7; if (low > 7) return 1;"
        " if (mode > 3) return 2; for (unsigned i = 0; i < n; i++) { if (i >= n) return 3; } return 0; }"
    )
    function = of(unit, "step")
    answers = {}
    for block, item in enumerate(function.blocks):
        if type(item.terminator).__name__ == "Branch":
            answers[block] = can_hold(around(unit), function, block)
    assert list(answers.values()).count("no") == 2
    assert "yes" in answers.values()


def test_a_loop_is_never_cut_short_for_a_proof() -> None:
    unit = lower_text("static unsigned char at; void walk(int n) { for (int i = 0; i < n; i++) at++; }")
    trace = trace_function(around(unit), of(unit, "walk"))
    assert [point.kind for point in trace.points] == ["entry", "before loop", "loop", "round", "return"]
    paths = enumerate_paths(around(unit), of(unit, "walk"), limits=Limits(unroll=2))
    assert paths.bounded
    assert all(isinstance(path, Path) for path in paths.paths)
