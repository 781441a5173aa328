"""What the engine finds in small functions written by hand."""

from stepring.meaning.types import ArrayType
from stepring.values.engine import analyse
from stepring.values.spots import Exposure
from stepring.values.surroundings import Effect, Surroundings
from stepring.values.types import FieldCell, Interval, VariableCell

from .build import (
    I8,
    INT,
    STRUCT,
    U8,
    U16,
    U32,
    Body,
    address,
    arrow,
    at,
    cast,
    element,
    load,
    local,
    member,
    num,
    op,
    parameter,
    pointer,
    static,
)  # fmt: skip


def known(table):  # type: ignore[no-untyped-def]
    """A table as the function that the surroundings ask."""
    return lambda name, caller: table.get(name)


HEAD = static("head", U8)
COUNT = static("count", U16)
HEAD_CELL = VariableCell(HEAD.identity)
FIELD = FieldCell("struct hopper", ("head",))


def test_a_loop_counter_has_the_range_of_its_test() -> None:
    i = local("i", INT)
    body = Body().set(i, 0)
    body.loop(op("<", load(i), 10), lambda b: b.set(i, op("+", load(i), 1)))
    found = analyse(body.give(load(i)).function(variables=[i], returns=INT))
    assert found.returned == Interval(10, 10, 0)
    inside = found.at_end(2)
    assert inside is not None
    start = found.before(2, 0)
    assert start is not None
    assert start.read(at(i)) == Interval(0, 9, 1)
    assert inside.read(at(i)) == Interval(1, 10, 1)


def test_a_stride_survives_the_loop() -> None:
    i = local("i", U16)
    body = Body().set(i, 3)
    body.loop(op("<", load(i), 100), lambda b: b.set(i, op("+", load(i), 4)))
    found = analyse(body.give(load(i)).function(variables=[i], returns=U16))
    start = found.before(2, 0)
    assert start is not None
    assert start.read(at(i)) == Interval(3, 99, 4)
    assert found.returned == Interval(103, 103, 0)


def test_an_increment_and_reset_leaves_the_index_in_range_where_other_code_looks() -> None:
    body = Body().set(HEAD, op("+", load(HEAD), 1))
    body.when(op(">=", load(HEAD), 12), lambda b: b.set(HEAD, 0))
    around = Surroundings({HEAD_CELL: Interval(0, 11, 1)})
    found = analyse(body.function(variables=[HEAD]), None, around)
    assert found.exits[HEAD_CELL] == Interval(0, 11, 1)
    assert found.record.stored[HEAD_CELL] == Interval(0, 12, 1)


def test_a_test_of_a_copy_limits_what_it_was_copied_from() -> None:
    old = local("old", U8)
    body = Body().set(old, load(HEAD)).set(HEAD, op("+", load(old), 1))
    body.when(op("==", load(old), 11), lambda b: b.set(HEAD, 0))
    found = analyse(body.function(variables=[HEAD, old]), None, Surroundings({HEAD_CELL: Interval(0, 11, 1)}))
    assert found.exits[HEAD_CELL] == Interval(0, 11, 1)


def test_a_byte_wraps_and_a_mask_keeps_it_in_range() -> None:
    body = Body().set(HEAD, op("&", op("+", load(HEAD), 1), 0x1F))
    found = analyse(body.function(variables=[HEAD]), None, Surroundings({HEAD_CELL: Interval(0, 31, 1)}))
    assert found.exits[HEAD_CELL] == Interval(0, 31, 1)
    body = Body().set(HEAD, op("+", load(HEAD), 1))
    found = analyse(body.function(variables=[HEAD]), None, Surroundings({HEAD_CELL: Interval(255, 255, 0)}))
    assert found.exits[HEAD_CELL] == Interval(0, 0, 0)


def test_two_pointers_may_lead_to_one_object() -> None:
    p, q = parameter("p", pointer(STRUCT)), parameter("q", pointer(STRUCT))
    seen = local("seen", U8)
    body = Body().set(arrow(load(p), "head", U8), 1).set(arrow(load(q), "head", U8), 5)
    body.set(seen, load(arrow(load(p), "head", U8)))
    found = analyse(body.give(load(seen)).function(parameters=[p, q], variables=[seen], returns=U8))
    assert found.returned == Interval(1, 5, 4)


def test_a_pointer_that_moves_on_takes_the_old_value_to_the_rest() -> None:
    p, q = parameter("p", pointer(STRUCT)), parameter("q", pointer(STRUCT))
    body = Body().set(arrow(load(p), "head", U8), 7).set(p, load(q))
    body.give(load(arrow(load(p), "head", U8)))
    around = Surroundings({FIELD: Interval(0, 3, 1)})
    found = analyse(body.function(parameters=[p, q], returns=U8), None, around)
    assert found.returned == Interval(0, 7, 1)
    assert found.exits[FIELD] == Interval(0, 7, 1)


def test_a_pointer_set_once_to_a_variable_is_that_variable() -> None:
    hopper = static("hopper", STRUCT)
    p = local("p", pointer(STRUCT))
    body = Body().set(p, address(hopper)).set(arrow(load(p), "head", U8), 4)
    body.give(load(member(at(hopper), "head", U8)))
    assert analyse(body.function(variables=[p, hopper], returns=U8)).returned == Interval(4, 4, 0)


def test_an_element_chosen_by_a_local_index_is_one_object_until_the_index_changes() -> None:
    hoppers = static("hoppers", ArrayType(STRUCT, 4))
    i = parameter("i", U8)
    head = member(element(at(hoppers), load(i)), "head", U8)
    cell = VariableCell(hoppers.identity, ("[]", ".head"))
    around = Surroundings({cell: Interval(0, 7, 1)}, Exposure())
    body = Body().set(head, op("+", load(head), 1)).when(op("==", load(head), 8), lambda b: b.set(head, 0))
    assert analyse(body.function(parameters=[i], variables=[hoppers]), None, around).exits[cell] == Interval(0, 7, 1)
    body = Body().set(head, op("+", load(head), 1)).set(i, 0).when(op("==", load(head), 8), lambda b: b.set(head, 0))
    assert analyse(body.function(parameters=[i], variables=[hoppers]), None, around).exits[cell] == Interval(0, 8, 1)


def test_unknown_code_gives_lasting_cells_their_summary_again() -> None:
    x = local("x", U8)
    body = Body().set(HEAD, 3).set(x, 2).call("poll").give(op("+", load(HEAD), load(x)))
    around = Surroundings({HEAD_CELL: Interval(0, 9, 1)})
    found = analyse(body.function(variables=[HEAD, x], returns=INT), None, around)
    assert found.returned == Interval(2, 11, 1)
    assert found.exits[HEAD_CELL] == Interval(3, 3, 0)


def test_an_effect_changes_what_it_says_and_nothing_else() -> None:
    body = Body().set(HEAD, 3).set(COUNT, 2).call("poll").give(op("+", load(HEAD), load(COUNT)))
    effect = Effect({HEAD_CELL: Interval(5, 6, 1)}, certain=frozenset((HEAD_CELL,)))
    around = Surroundings(effects=known({"poll": effect}))
    assert analyse(body.function(variables=[HEAD, COUNT], returns=INT), None, around).returned == Interval(7, 8, 1)


def test_a_body_runs_in_place_on_the_callers_objects() -> None:
    r = parameter("r", pointer(STRUCT))
    limit = parameter("limit", U8)
    head = arrow(load(r), "head", U8)
    inner = Body().set(head, op("+", load(head), 1)).when(op(">=", load(head), load(limit)), lambda b: b.set(head, 0))
    advance = inner.give(load(head)).function("advance", [r, limit], returns=U8)
    hopper, x = static("hopper", STRUCT), local("x", U8)
    body = Body().set(member(at(hopper), "head", U8), 6)
    body.call("advance", address(hopper), num(8, U8), result=at(x), returns=U8)
    body.call("advance", address(hopper), num(8, U8), returns=U8)
    caller = body.give(op("+", op("*", load(member(at(hopper), "head", U8)), 100), load(x))).function(
        "feed", variables=[hopper, x], returns=INT
    )
    around = Surroundings(bodies=known({"advance": advance}))
    assert analyse(caller, None, around).returned == Interval(7, 7, 0)


def test_an_index_behind_a_pointer_that_is_passed_on() -> None:
    index = parameter("index", pointer(U8))
    from stepring.meaning.types import DerefPlace

    target = DerefPlace(load(index), U8)
    step = Body().set(target, op("%", op("+", load(target), 1), 10)).function("step", [index])
    body = Body().set(HEAD, 9).call("step", address(HEAD)).give(load(HEAD))
    found = analyse(body.function(variables=[HEAD], returns=U8), None, Surroundings(bodies=known({"step": step})))
    assert found.returned == Interval(0, 0, 0)


def test_a_volatile_is_never_tracked_unless_it_is_steady() -> None:
    ticks = static("ticks", U8, volatile=True)
    cell = VariableCell(ticks.identity)
    body = Body().set(ticks, 3).give(load(ticks))
    function = body.function(variables=[ticks], returns=U8)
    assert analyse(function).returned == Interval(0, 255, 1)
    assert analyse(function, None, Surroundings(steady=lambda c: c == cell)).returned == Interval(3, 3, 0)


def test_a_switch_limits_its_control_and_its_default() -> None:
    x = parameter("x", U8)
    y = local("y", U8)
    body = Body().switch(
        cast(INT, load(x)),
        [(0, 0, lambda b: b.set(y, load(x))), (1, 3, lambda b: b.set(y, op("*", load(x), 10)))],
        lambda b: b.set(y, load(x)),
    )
    found = analyse(body.give(load(y)).function(parameters=[x], variables=[y], returns=U8))
    views = [found.at_end(block) for block in (1, 2, 3)]
    assert [view and view.read(at(y)) for view in views] == [
        Interval(0, 0, 0), Interval(10, 30, 10), Interval(4, 255, 1)
    ]  # fmt: skip


def test_narrow_signed_arithmetic_promotes_and_wraps_on_the_way_back() -> None:
    x = parameter("x", I8)
    body = Body().give(cast(I8, op("+", load(x), 1)))
    function = body.function(parameters=[x], returns=I8)
    cell = VariableCell(x.identity)
    assert analyse(function, {cell: Interval(127, 127, 0)}).returned == Interval(-128, -128, 0)
    assert analyse(function, {cell: Interval(-5, 5, 1)}).returned == Interval(-4, 6, 1)


def test_the_difference_of_unsigned_indices_may_be_huge() -> None:
    head, tail = parameter("head", U32), parameter("tail", U32)
    body = Body().give(op("-", load(head), load(tail)))
    entry = {VariableCell(head.identity): Interval(0, 7, 1), VariableCell(tail.identity): Interval(0, 7, 1)}
    returned = analyse(body.function(parameters=[head, tail], returns=U32), entry).returned
    assert returned == Interval(0, 0xFFFFFFFF, 1)
