"""Witnesses run again in the interpreter: those that end as they say, and all the ways in which one can fail to."""

from dataclasses import replace

import pytest
from tests.support import lower_text

from stepring.paths.interpreter import Program, program
from stepring.paths.replay import Replayed, replay
from stepring.paths.types import Fault
from stepring.paths.witness import Ending, Made, OutsideValue, Reference, StartValue, Value, Witness, WitnessCall
from stepring.places import Origin, Position

FEED = """
typedef unsigned char uint8_t; typedef unsigned short uint16_t;
struct feed_command { uint8_t auger; uint16_t grams; };
struct feed_queue { struct feed_command slots[4]; uint8_t head, tail; };
static uint16_t weights[8];
static uint8_t weight_at;
int shore_ready(void); int shore_byte(uint8_t *to); void shore_ack(int code);
int feed_put(struct feed_queue *q, uint16_t grams) {
    q->slots[q->head].grams = grams;
    q->head = q->head + 1;
    return 1;
}
int feed_count(const struct feed_queue *q) { return q->head - q->tail; }
static int weight_add(uint16_t value) {
    static uint8_t calls;
    weights[weight_at] = value;
    weight_at = (weight_at + 1) % 7;
    calls++;
    return calls;
}
int weight_poll(void) {
    int added = 0;
    while (shore_ready()) {
        weight_add(7);
        shore_ack(added);
        added++;
    }
    return added;
}
int feed_copy(uint8_t *to, int n) { for (int i = 0; i < n; i++) to[i] = (uint8_t)i; return n; }
int feed_wait(void) { while (weight_at != 200) { } return 0; }
extern volatile uint8_t shore_status;
int scale_read(void) {
    int low = *(volatile uint8_t *)0xc6;
    return low + *(volatile uint8_t *)0xc6 * 256 + shore_status;
}
int use(void) { return weight_add(1); }
"""
LINES = FEED.splitlines()


def at(text: str) -> Origin:
    """The place of the first line that holds a text."""
    number = next(number for number, line in enumerate(LINES, 1) if text in line)
    return Origin("feeder.c", number, 1, 2)


def origin(position: Position) -> Origin:
    return Origin(position.file, position.line, max(1, position.column), max(1, position.column) + 1)


@pytest.fixture(scope="module")
def feed() -> Program:
    unit = lower_text(FEED)
    assert not unit.notices
    return program([unit])


def undefined(place: str, fault: Fault | None) -> Ending:
    return Ending("undefined", at(place), fault)


QUEUE = Made("q", "struct feed_queue", 1)
HEAD = (("head", "q", ".head"), ("tail", "q", ".tail"))
FIFTH = Witness(
    "LP64",
    (QUEUE,),
    (StartValue("q", ".head", 2), StartValue("q", ".tail", 2)),
    tuple(WitnessCall("feed_put", (Reference("q"), grams)) for grams in (10, 20, 30)),
    undefined("q->slots[q->head].grams", "bounds"),
    HEAD,
)


def test_a_run_to_an_undefined_step(feed: Program) -> None:
    done = replay(feed, FIFTH, origin=origin)
    assert done.held, done.why
    texts = [step.text for step in done.steps]
    assert texts[:3] == ["call feed_put(&q, 10)", "q->head becomes 3", "returns 1"]
    assert texts[-2] == "call feed_put(&q, 30)"
    assert "is 4; the array has 4 elements" in texts[-1]
    assert done.steps[0].values == (("head", "2"), ("tail", "2"))
    assert done.steps[-1].values == (("head", "4"), ("tail", "2"))
    assert done.steps[-1].where.line == at("q->slots[q->head]").line


@pytest.mark.parametrize(
    ("changed", "words"),
    [
        ({"calls": FIFTH.calls[:2]}, "nothing undefined happens"),
        ({"calls": (*FIFTH.calls, FIFTH.calls[0])}, "call 3 of 4 does not return"),
        ({"calls": ()}, "no call"),
        ({"ending": undefined("q->head = q->head + 1", "bounds")}, "it ends at line 9 and not at line 10"),
        ({"ending": undefined("q->slots[q->head].grams", "overflow")}, "not as overflow"),
        ({"start": (StartValue("q", ".heap", 2),)}, "cannot be set"),
        ({"start": (StartValue("r", ".head", 2),)}, "cannot be set"),
        ({"made": (Made("q", "struct feed_heap", 1),)}, "the type struct feed_heap is not in the program"),
        ({"calls": (WitnessCall("feed_drop", ()),)}, "no unit has a function feed_drop"),
        ({"calls": (WitnessCall("feed_put", ()),)}, "takes 2 arguments"),
        ({"calls": (WitnessCall("feed_put", (Reference("r"), 1)),)}, "to point to"),
        ({"calls": (WitnessCall("feed_put", (Reference("q", 2), 1)),)}, "outside its object"),
    ],
)
def test_a_witness_that_does_not_hold(feed: Program, changed: dict[str, object], words: str) -> None:
    done = replay(feed, replace(FIFTH, **changed), origin=origin)  # type: ignore[arg-type]
    assert not done.held
    assert words in done.why


def test_a_wrong_result(feed: Program) -> None:
    start = (StartValue("q", ".head", 1), StartValue("q", ".tail", 3))
    call = WitnessCall("feed_count", (Reference("q"),))
    wrong = Witness("LP64", (QUEUE,), start, (call,), Ending("result", at("feed_count"), None, "", "-2", "2"), HEAD)
    done = replay(feed, wrong, origin=origin)
    assert done.held, done.why
    assert done.steps[-1].text == "the call returns -2; 2 is due"
    for found, due in (("-2", "-2"), ("-2", "-4 to 0"), ("2", "-2")):
        other = replace(wrong, ending=replace(wrong.ending, found=found, expected=due))
        assert not replay(feed, other, origin=origin).held
    outside = replace(wrong, ending=replace(wrong.ending, expected="0 to 3"))
    assert replay(feed, outside, origin=origin).held


def test_a_wrong_value_of_a_file_static(feed: Program) -> None:
    ending = Ending("value", at("% 7"), None, "feeder.c:weight_at", "0", "7")
    start = (StartValue("feeder.c:weight_at", "", 6),)
    wrong = Witness("LP64", (), start, (WitnessCall("feeder.c:weight_add", (40,)),), ending)
    done = replay(feed, wrong, origin=origin)
    assert done.held, done.why
    assert not replay(feed, replace(wrong, start=()), origin=origin).held


def test_a_function_s_own_static_is_set(feed: Program) -> None:
    calls = next(
        item.variable.identity for unit in feed.units for item in unit.objects if item.variable.name == "calls"
    )
    ending = Ending("result", at("return calls"), None, "", "0", "256")
    start = (StartValue(calls, "", 255),)
    wrong = Witness("LP64", (), start, (WitnessCall("use", ()),), ending, (("calls", calls, ""),))
    done = replay(feed, wrong, origin=origin)
    assert done.held, done.why
    assert done.steps[0].values == (("calls", "255"),)


def outside(*pairs: tuple[str, Value]) -> tuple[OutsideValue, ...]:
    return tuple(OutsideValue(name, value) for name, value in pairs)


def test_values_from_outside_come_in_their_order(feed: Program) -> None:
    rounds = 3 * (("shore_ready", 1), ("shore_ack", None))
    given = outside(*rounds, ("shore_ready", 0))
    ending = Ending("value", at("% 7"), None, "weight_at", "3", "0")
    good = Witness("LP64", (), (), (WitnessCall("weight_poll", (), given),), ending, (("weight_at", "weight_at", ""),))
    done = replay(feed, good, origin=origin)
    assert done.held, done.why
    assert "shore_ready gives 1" in [step.text for step in done.steps]

    def with_outside(values: tuple[OutsideValue, ...]) -> Replayed:
        return replay(feed, replace(good, calls=(WitnessCall("weight_poll", (), values),)), origin=origin)

    assert "shore_ready was given no result" in with_outside(given[:-1]).why
    assert "does not ask for shore_ready" in with_outside((*given, *outside(("shore_ready", 0)))).why


def test_registers_and_volatile_objects_from_elsewhere_are_asked_for_at_each_read(feed: Program) -> None:
    given = outside(("0xc6", 2), ("0xc6", 1), ("shore_status", 3))
    ending = Ending("result", at("int scale_read"), None, "", "261", "0 to 255")
    wrong = Witness("LP64", (), (), (WitnessCall("scale_read", (), given),), ending)
    done = replay(feed, wrong, origin=origin)
    assert done.held, done.why
    assert [step.text for step in done.steps[1:4]] == ["0xc6 gives 2", "0xc6 gives 1", "shore_status gives 3"]
    short = replay(feed, replace(wrong, calls=(WitnessCall("scale_read", (), given[:1]),)), origin=origin)
    assert "0xc6 was given no value to be read" in short.why


def test_a_callers_buffer_of_several_bytes(feed: Program) -> None:
    made = (Made("buffer", "unsigned char", 3),)
    ending = undefined("to[i] = (uint8_t)i", "bounds")
    wrong = Witness("LP64", made, (), (WitnessCall("feed_copy", (Reference("buffer"), 4)),), ending)
    assert replay(feed, wrong, origin=origin).held
    short = replace(wrong, calls=(WitnessCall("feed_copy", (Reference("buffer", 1), 3)),))
    assert replay(feed, short, origin=origin).held
    assert not replay(feed, replace(wrong, made=(Made("buffer", "unsigned char", 4),)), origin=origin).held
    assert replay(feed, replace(wrong, calls=(WitnessCall("feed_copy", (None, 1)),)), origin=origin).why == (
        "it ends as null (to[i] uses a null pointer) and not as bounds"
    )


def test_a_call_that_does_not_come_back(feed: Program) -> None:
    endless = Witness("LP64", (), (), (WitnessCall("feed_wait", ()),), Ending("endless", at("while (weight_at")))
    assert replay(feed, endless, origin=origin, steps=1000).held
    comes_back = replace(endless, start=(StartValue("weight_at", "", 200),))
    assert "comes to an end" in replay(feed, comes_back, origin=origin, steps=1000).why


def test_a_long_run_keeps_its_first_and_last_steps(feed: Program) -> None:
    calls = tuple(WitnessCall("use", ()) for _ in range(600))
    watched = (("weight_at", "weight_at", ""),)
    ending = Ending("value", at("% 7"), None, "weight_at", str(600 % 7), "0")
    done = replay(feed, Witness("LP64", (), (), calls, ending, watched), origin=origin)
    assert done.held, done.why
    assert any("left out" in step.text for step in done.steps)
    assert len(done.steps) <= 401
