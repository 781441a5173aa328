"""Walking paths: an index's advance with one start value, forks, helpers, what values depend on."""

from __future__ import annotations

from random import Random

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from tests.support import lower_text

from stepring.meaning.types import Function, StructType, TypedUnit
from stepring.values.callees import resolver
from stepring.values.intervals import constant, contains
from stepring.values.spots import Exposure
from stepring.values.surroundings import Surroundings
from stepring.values.types import Cell, FieldCell, Interval, VariableCell
from stepring.values.walk import Walk, walk

from . import test_sound as sound
from .concrete import Address, Enough, Machine, Undefined, Value

QUEUE = """
typedef unsigned char uint8_t;
struct shore_queue { uint8_t slots[6]; uint8_t head; uint8_t tail; uint8_t *more; };
static struct shore_queue shore;
static uint8_t backlog[8];
static uint8_t last;
static uint8_t next_of(uint8_t at) { return (uint8_t)((at + 1u) % 6u); }
int shore_put(struct shore_queue *q, uint8_t command) {
    uint8_t next = next_of(q->head);
    if (next == q->tail) { return 0; }
    q->slots[q->head] = command;
    q->head = next;
    return 1;
}
int shore_put_own(uint8_t command) { return shore_put(&shore, command); }
void keep(uint8_t command) {
    backlog[last] = command;
    if (++last == 8) { last = 0; }
}
void keep_more(struct shore_queue *q, uint8_t command) { q->more[q->head++] = command; }
int drain(void) {
    int n = 0;
    while (shore.tail != shore.head) { shore.tail = next_of(shore.tail); n++; }
    return n;
}
void publish(void);
void keep_and_publish(uint8_t command) { last = 3; publish(); backlog[last] = command; }
"""


def unit() -> TypedUnit:
    return lower_text(QUEUE, "ILP32")


UNIT = unit()
BY_NAME = {function.name: function for function in UNIT.functions}
BODIES = resolver(UNIT.functions)
AROUND = Surroundings(exposure=Exposure(), bodies=BODIES, depth=3)


def struct() -> str:
    kind = BY_NAME["shore_put"].parameters[0].type
    target = getattr(kind, "to", None)
    assert isinstance(target, StructType)
    return target.identity


def field(name: str) -> Cell:
    return FieldCell(struct(), (name,))


def variable(function: Function, name: str, path: tuple[str, ...] = ()) -> Cell:
    return VariableCell(next(v.identity for v in function.variables if v.name == name), path)


def test_every_start_of_an_index_gives_its_own_single_step() -> None:
    function = BY_NAME["keep"]
    cell = variable(function, "last")
    left = []
    for start in range(8):
        paths = list(walk(function, {cell: constant(start)}, surroundings=AROUND))
        assert len(paths) == 1
        access = next(event for event in paths[0].events if event.kind == "access")
        assert (access.value, access.use) == (constant(start), "store")
        assert access.depends == {cell}
        assert all(event.decided for event in paths[0].events if event.kind == "branch")
        left.append(paths[0].cells[cell].low)
    assert left == [1, 2, 3, 4, 5, 6, 7, 0]


def test_a_helper_is_walked_through_and_the_unknown_tail_forks() -> None:
    function = BY_NAME["shore_put"]
    paths = list(walk(function, {field("head"): constant(5), field("tail"): Interval(0, 5, 1)}, surroundings=AROUND))
    assert sorted(path.returned.low for path in paths if path.returned) == [0, 1]
    stored = next(path for path in paths if path.returned == constant(1))
    assert stored.cells[field("head")] == constant(0)
    assert stored.cells[field("tail")] == Interval(1, 5, 1)
    full = next(path for path in paths if path.returned == constant(0))
    assert full.cells[field("tail")] == constant(0)
    branch = next(event for event in stored.events if event.kind == "branch")
    assert not branch.decided
    assert branch.depends == {field("head"), field("tail")}
    accesses = [event for event in stored.events if event.kind == "access"]
    assert [(a.value, a.cell) for a in accesses] == [(constant(5), FieldCell(struct(), ("slots", "[]")))]
    assert not any(event.kind == "access" for event in full.events)


def test_a_pointer_argument_leads_to_the_callers_object() -> None:
    function = BY_NAME["shore_put_own"]
    head = VariableCell(next(o.variable.identity for o in UNIT.objects if o.variable.name == "shore"), (".head",))
    tail = VariableCell(head.variable, (".tail",))
    paths = list(walk(function, {head: constant(2), tail: constant(4)}, surroundings=AROUND))
    assert len(paths) == 1
    assert paths[0].cells[head] == constant(3)
    assert paths[0].depends[head] == {head}


def test_an_access_through_a_pointer_member_names_the_member() -> None:
    function = BY_NAME["keep_more"]
    paths = list(walk(function, {field("head"): constant(250)}, surroundings=AROUND))
    access = next(event for event in paths[0].events if event.kind == "access")
    assert (access.value, access.cell) == (constant(250), field("more"))
    assert paths[0].cells[field("head")] == constant(251)


def test_a_loop_is_followed_turn_by_turn() -> None:
    function = BY_NAME["drain"]
    head, tail = variable(function, "shore", (".head",)), variable(function, "shore", (".tail",))
    for start in range(6):
        (path,) = walk(function, {head: constant(1), tail: constant(start)}, surroundings=AROUND)
        assert path.returned == constant((1 - start) % 6)
    bounded = list(walk(function, {head: constant(9), tail: constant(0)}, surroundings=AROUND, max_loop=20))
    assert [path.ended for path in bounded] == ["bounded"]


def test_unknown_code_takes_away_what_is_known() -> None:
    function = BY_NAME["keep_and_publish"]
    cell = variable(function, "last")
    (path,) = walk(function, {cell: constant(1)}, surroundings=AROUND)
    access = next(event for event in path.events if event.kind == "access")
    assert access.value == Interval(0, 255, 1)
    assert access.depends == frozenset()


def test_too_many_paths_are_cut_and_said() -> None:
    text = "int feed(int a) { int n = 0; " + " ".join(f"if (a & {1 << k}) n += {k};" for k in range(8)) + " return n; }"
    function = lower_text(text).functions[0]
    paths = list(walk(function, {}, max_paths=10))
    assert len(paths) == 11
    assert [path.ended for path in paths] == ["returned"] * 10 + ["cut"]


@pytest.mark.parametrize("pointers", (False, True), ids=("plain", "pointers"))
@given(seed=st.integers(0, 2**40))
@settings(max_examples=100, deadline=None, suppress_health_check=list(HealthCheck))
def test_some_path_has_what_a_run_does(pointers: bool, seed: int) -> None:
    examine(Random(seed), pointers)


def examine(random: Random, pointers: bool) -> None:
    """Run a random function; one of its paths must end with the values that the run ends with."""
    inner = sound.callee(random)
    function = sound.Maker(random, 2, pointers, callee=True).function()
    lasting = sound.scalars()
    memory: dict[Address, Value] = {}
    start: dict[Cell, Interval] = {}
    for address, cell, kind in lasting:
        memory[address] = min(kind.high, random.choice((0, 1, 5, kind.high)))
        if "[]" not in getattr(cell, "path", ()):
            start[cell] = constant(memory[address])  # type: ignore[arg-type]
    around = Surroundings(bodies=lambda name, caller: inner if name == "step" else None, depth=3)
    paths: list[Walk] = list(walk(function, start, surroundings=around, max_paths=60, max_loop=40))
    if paths[-1].ended == "cut":
        return

    def outside(machine: Machine) -> None:
        for address, _, kind in lasting:
            if random.random() < 0.5:
                machine.memory[address] = min(kind.high, random.choice((0, 2, kind.high)))

    machine = Machine(memory, {"step": inner}, outside, lambda m, a, b, n: None)
    try:
        result = machine.run(function, ((sound.ONE.identity,),))
    except (Undefined, Enough):
        return
    assert isinstance(result, int)
    assert any(path.ended == "bounded" or agrees(path, result, machine, lasting) for path in paths)


def agrees(path: Walk, result: int, machine: Machine, lasting: list[tuple[Address, Cell, object]]) -> bool:
    if not contains(path.returned, result):
        return False
    for address, cell, _ in lasting:
        value = machine.memory[address]
        assert isinstance(value, int)
        plain = "[]" not in getattr(cell, "path", ())
        if plain and cell in path.cells and not contains(path.cells[cell], value):
            return False
    return True
