"""Relations that every operation keeps: what stays, what is dropped and by whom, and in what order."""

import itertools

import pytest
import z3
from tests.support import lower_text

from stepring.meaning.types import IntType
from stepring.paths.induction import Family, Induction, Relation, View, induct, kept_by, proved
from stepring.paths.symbolic import trace_function
from stepring.paths.symbolic_terms import compared
from stepring.paths.symbolic_types import Around, Limits, Trace
from stepring.shapes.ring_keys import Key

BYTE = IntType("unsigned char", 8, False, 1)
WIDTH = 12
TEXT = """
static unsigned char at, left; static unsigned char slots[10]; void tell(void);
void forward(void) { at++; if (at >= 10) at = 0; }
void too_far(void) { at++; if (at > 10) at = 0; }
void drop(void) { if (left > 0) left--; }
void both(void) { if (left < 10) { slots[at] = 1; at = (at + 1) % 10; left++; } }
void told_in_between(void) { at++; tell(); if (at >= 10) at = 0; }
void told_after(void) { at++; if (at >= 10) at = 0; tell(); slots[at] = 2; }
void copied(void) { left = at; }
void jumped(void) { at = 20; }
void looped(void) { while (left > 0) { slots[at] = 0; at++; if (at == 10) at = 0; left--; } }
void start(void) { at = 3; left = 0; }
void start_late(void) { at = 10; left = 0; }
"""


def trace(name: str) -> Trace:
    """A function of the text with all its runs."""
    unit = lower_text(TEXT)
    assert not unit.notices
    bodies = {function.name: function for function in unit.functions}
    around = Around(unit.types.structs, unit.types.model, lambda _, called: bodies.get(called))
    return trace_function(around, bodies[name])


def key(name: str) -> Key:
    unit = lower_text(TEXT)
    return next(("var", item.variable.identity) for item in unit.objects if item.variable.name == name)


AT, LEFT = key("at"), key("left")
FAMILY = Family("", {}, frozenset({AT, LEFT}), {AT: BYTE, LEFT: BYTE}, {}, WIDTH)


def relation(text: str, of: Key, op: str, limit: int) -> Relation:
    def formula(view: View) -> object:
        return compared(op, view.number(of), limit, WIDTH, True)

    return Relation(text, (of,), formula)


RELATIONS = (
    relation("at < 10", AT, "<", 10),
    relation("at <= 10", AT, "<=", 10),
    relation("left <= 10", LEFT, "<=", 10),
    relation("left == 0", LEFT, "==", 0),
)


def induction(*operations: str, setups: tuple[str, ...] = (), limits: Limits | None = None) -> Induction:
    traces = [trace(name) for name in operations]
    begun = [trace(name) for name in setups]
    return induct(FAMILY, RELATIONS, traces, begun, [], limits or Limits(), setting=[AT] if setups else [])


def test_what_all_operations_keep_stays() -> None:
    made = induction("forward", "drop", "both", "looped")
    assert kept_by(made) == ("at < 10", "at <= 10", "left <= 10")


def test_what_one_operation_breaks_is_dropped_and_said() -> None:
    made = induction("forward", "too_far", "drop")
    assert kept_by(made) == ("at <= 10", "left <= 10", "left == 0")
    name, point, verdict = made.dropped["at < 10"]
    assert (name, point.kind, verdict) == ("too_far", "return", "fails")


def test_what_rests_on_a_dropped_relation_falls_with_it() -> None:
    # An index that may come from "at" is below 10 only as long as "at < 10" is kept, and "too_far" breaks that.
    assert kept_by(induction("copied")) == ("at < 10", "at <= 10", "left <= 10")
    made = induction("copied", "forward", "too_far")
    assert kept_by(made) == ("at <= 10", "left <= 10")
    made = induction("copied", "jumped")
    assert kept_by(made) == () and made.dropped["left <= 10"][0] == "copied"


def test_a_call_that_may_enter_again_is_asked_too() -> None:
    made = induction("told_in_between")
    assert made.dropped["at < 10"][1].kind == "call"
    assert kept_by(made) == ("left <= 10", "left == 0")
    made = induction("told_after")
    assert "at < 10" in kept_by(made)
    # What was known of the index before the call is not known after it, but what all operations keep is.
    (body,) = made.bodies
    access = body.trace.accesses[-1]
    assert proved(made, body, access.state, compared("<", access.first, 10, body.trace.memories.step, True)) == "holds"
    assert proved(made, body, access.state, compared("<", access.first, 9, body.trace.memories.step, True)) == "fails"


def test_a_function_that_sets_up_must_establish_what_is_kept() -> None:
    assert "at < 10" in kept_by(induction("forward", setups=("start",)))
    made = induction("forward", setups=("start_late",))
    assert "at < 10" not in kept_by(made) and "at <= 10" in kept_by(made)
    assert made.dropped["at < 10"][0] == "start_late"


def test_the_order_of_operations_changes_nothing() -> None:
    names = ("forward", "both", "drop", "told_in_between")
    results = {kept_by(induction(*order)) for order in itertools.islice(itertools.permutations(names), 0, None, 5)}
    assert results == {("left <= 10",)}


def test_two_runs_are_alike() -> None:
    one, other = (induction("forward", "too_far", "both", "looped") for _ in range(2))
    assert one.queries == other.queries and one.active == other.active
    assert {text: found[:1] for text, found in one.dropped.items()} == {
        text: found[:1] for text, found in other.dropped.items()
    }


def test_nothing_is_kept_where_the_questions_run_out() -> None:
    made = induction("forward", "both", limits=Limits(queries=1))
    assert made.exhausted == "query limit" and kept_by(made) == ()


@pytest.mark.parametrize("name", ["forward", "both", "looped"])
def test_a_false_goal_is_not_proved(name: str) -> None:
    made = induction(name)
    (body,) = made.bodies
    end = next(point for point in body.trace.points if point.kind == "return")
    assert proved(made, body, end.state, z3.BoolVal(False)) == "fails"
