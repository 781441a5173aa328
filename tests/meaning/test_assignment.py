"""Assignment: conversions, compound forms, steps, volatile objects, and the order in which values are taken."""

from pathlib import Path

import pytest
from tests.meaning.features import Case, check, host_agrees, joined
from tests.support import lower_function_text

from stepring.meaning.types import Assign, Load, VariablePlace
from stepring.paths.interpreter import fresh, run

CASES = (
    Case(
        "compound assignment converts twice",
        """
        typedef unsigned char u8; typedef signed char i8; typedef unsigned short u16; typedef unsigned u32;
        int added(int a) { u8 x = a; x += 300; return x; } int less(int a) { u8 x = a; x -= 1u; return x; }
        int times(int a) { i8 x = a; x *= 3; return x; } int real_(int a) { u8 x = a; x *= 1.5; return x; }
        int left_(int a, int n) { u8 x = a; x <<= n; return x; } int right_(int a, int n) { i8 x = a; x >>= n;
            return x; }
        int divided(int a) { i8 x = a; x /= 2u; return x; } int rest(int a) { u16 x = a; x %= -7; return x; }
        long wide(int a) { long x = a; x += 4000000000u; return x; } int bool_(int a) { _Bool b = a; b += 2; b ^= 1;
            return b; }
        int mixed(int a) { int x = a; x += 1u << 31; return x; } int masked(int a) { u16 x = a; x &= ~3; x |= 1;
            return x; }
        int value_of(int a) { u8 x = 0; int y = (x = a); int z = (x += 200); return y * 1000 + z; }
        int pointed(int a) { u8 t[3] = {1, 2, 3}, *p = t; *p++ += a; *++p -= a; p[-1] ^= a; p -= 1u; p += -1;
            return t[0] * 10000 + t[1] * 100 + t[2] + (p - t); }
        """,
        {"added(10)": 54, "less(0)": 255, "times(50)": -106, "real_(5)": 7, "left_(0x81, 1)": 2, "left_(1, 9)": 0}
        | {
            "right_(-128, 3)": -16,
            "divided(-6)": -3,
            "rest(65535)": 1,
            "wide(-1)": 3999999999,
            "bool_(0)": 0,
            "bool_(1)": 0,
        }
        | {"mixed(5)": -2147483643, "masked(14)": 13, "value_of(300)": 44244, "pointed(7)": 80752},
    ),
    Case(
        "steps",
        """
        int post(unsigned char a) { int v = a++; return v * 1000 + a; } int pre(unsigned char a) { int v = --a;
            return v * 1000 + a; }
        int in_subscript(void) { int t[4] = {0}, i = 0; t[i++] = 5; t[++i] = 6; t[i--]++;
            return t[0] * 100 + t[2] * 10 + i; }
        int of_members(void) { struct { unsigned char n; unsigned f : 2; } s = {255, 3}, *p = &s; int v = p->n++;
            int w = s.f++;
            return v * 100 + w * 10 + s.n + s.f; }
        int of_pointer(void) { int t[3] = {4, 5, 6}, *p = t; int v = *p++; int w = (*p)++; int x = *++p; return v * 1000
            + w * 100 + x * 10 + t[1]; }
        int of_bool(void) { _Bool b = 0; b++; b++; int v = b; b--; return v * 10 + b;
            } int of_real(void) { double d = 0.5; d++;
            return d * 10; }
        int highest(void) { int a = 2147483647; a++; return a; } int highest_short(short a) { a++; return a; }
        """,
        {"post(255)": 255000, "pre(0)": 255255, "in_subscript()": 571, "of_members()": 25530, "of_pointer()": 4566}
        | {"of_bool()": 10, "of_real()": 15, "highest()": None, "highest_short(32767)": -32768},
    ),
    Case(
        "what stands left is taken first",
        """
        static int n_; static int next_(void) { return ++n_; } static int set_(int v) { n_ = v; return v; }
        int left_kept(int a) { n_ = a; int before = n_; return before * 10 + set_(3); }
        int places(void) { int t[3] = {0}; n_ = 0; t[next_()] = 7; return t[1]; }
        int twice_in_turn(void) { int t[3] = {1, 2, 3}, i = 0; i = t[i] + (i = 1, t[i]); return i; }
        int chained(int a) { unsigned char b; long c; int d = c = b = a; return d + c; }
        struct box { int a, b; } box_; static struct box make(int a) { struct box r = {a, n_}; return r; }
        int of_result(int a) { n_ = 4; return make(a).b * 10 + make(a + 1).a; } int whole(int a) { box_ = make(a);
            struct box
            other; other = box_; box_.a = 0; return other.a; }
        """,
        {"left_kept(5)": 53, "places()": 7, "chained(300)": 88, "of_result(2)": 43, "whole(9)": 9},
    ),
)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_case(case: Case) -> None:
    check(case)


def test_the_host_agrees(tmp_path: Path) -> None:
    host_agrees(CASES, tmp_path)


def accesses(text: str, function: str, *arguments: int) -> list[tuple[str, str]]:
    """The volatile accesses of a call, in order."""
    made = joined(Case("volatile", text, {}))
    seen: list[tuple[str, str]] = []
    outcome = run(made, function, arguments, volatile=lambda _, place, kind: seen.append((kind, place)))
    assert outcome.kind == "returned", outcome
    return seen


VOLATILE = """
volatile int reg; volatile unsigned char port[4]; struct device { volatile int status; int plain; } dev;
typedef volatile int hard; hard typed; int plain;
"""


@pytest.mark.parametrize(
    ("body", "wanted"),
    [
        ("reg++;", [("load", "reg"), ("store", "reg")]),
        ("int v = reg++; plain = v;", [("load", "reg"), ("store", "reg")]),
        ("plain = --reg;", [("load", "reg"), ("store", "reg")]),
        ("plain = reg += 2;", [("load", "reg"), ("store", "reg")]),
        ("plain = reg = 3;", [("store", "reg")]),
        ("reg;", [("load", "reg")]),
        ("(void)reg;", [("load", "reg")]),
        ("plain = reg + reg;", [("load", "reg"), ("load", "reg")]),
        ("if (reg && reg) plain = 1;", [("load", "reg")]),
        ("port[1] |= 4;", [("load", "port[1]"), ("store", "port[1]")]),
        ("dev.status = dev.plain;", [("store", "dev.status")]),
        ("plain = (typed, 4);", [("load", "typed")]),
        ("switch (reg) { case 1: case 2: ; }", [("load", "reg")]),
        ("plain = reg ? 1 : 2;", [("load", "reg")]),
    ],
)
def test_volatile_objects_are_read_and_written_as_often_as_written(body: str, wanted: list[tuple[str, str]]) -> None:
    assert accesses(f"{VOLATILE} void step(void) {{ {body} }}", "step") == wanted


def test_a_value_that_a_later_call_may_change_is_saved_before_it() -> None:
    text = "int head; int advance(void); int step(void) { return head + advance(); }"
    (block, *_) = lower_function_text(text, "step").blocks
    first = block.statements[0]
    assert isinstance(first, Assign) and isinstance(first.value, Load)
    assert isinstance(first.value.place, VariablePlace) and first.value.place.variable.name == "head"
    made = joined(Case("saved", text, {}))
    memory = fresh(made)
    memory.write("head", 5)

    def advance(arguments: object) -> int:
        memory.write("head", 70)
        return 1

    assert run(made, "step", memory=memory, externals={"advance": advance}).value == 6


def test_an_operand_without_side_effects_to_its_right_needs_no_temporary() -> None:
    function = lower_function_text("int head, tail; int step(int n) { return head + tail * n; }", "step")
    assert [block.statements for block in function.blocks] == [()]
