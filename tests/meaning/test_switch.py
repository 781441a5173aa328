"""``switch`` in any shape, and what is noted of how it was written."""

from pathlib import Path

import pytest
from tests.meaning.features import Case, check, host_agrees
from tests.support import lower_function_text

from stepring.meaning.types import Switch, SwitchSyntax

CASES = (
    Case(
        "plain",
        """
        enum auger { IDLE, PRIME = 4, FEED, PURGE = -2 };
        int plain(int e) { switch (e) { case IDLE: return 1; case PRIME: case FEED: return 2; case PURGE: return 3; }
            return 0; }
        int falls(int e) { int s = 0; switch (e) { case 1: s += 1; case 2: s += 10; break; case 3: s += 100; default:
            s += 1000; } return s; }
        int default_first(int e) { switch (e) { default: return 9; case 1: return 1; case 2: return 2; } }
        int default_inside(int e) { int s = 0; switch (e) { case 1: s++; default: s += 10; case 2: s += 100; }
            return s; }
        int no_braces(int e) { int s = 0; switch (e) case 3: s = 5; switch (e) s = 7; switch (e) default: s++;
            return s; }
        int empty(int e) { int n = 0; switch (n++, e) { } switch (n++, e) ; return n; }
        """,
        {"plain(0)": 1, "plain(4)": 2, "plain(5)": 2, "plain(-2)": 3, "plain(7)": 0, "falls(1)": 11, "falls(2)": 10}
        | {"falls(3)": 1100, "falls(0)": 1000, "default_first(5)": 9, "default_first(2)": 2, "default_inside(1)": 111}
        | {"default_inside(2)": 100, "default_inside(8)": 110, "no_braces(3)": 6, "no_braces(0)": 1, "empty(1)": 2},
    ),
    Case(
        "labels anywhere",
        """
        int device(int n, int count) { int s = 0; int loops = (count + 3) / 4; switch (count % 4) {
            case 0: do { s += n; case 3: s += n; case 2: s += n; case 1: s += n; } while (--loops > 0); } return s; }
        int nested(int e) { int s = 0; switch (e) { case 1: { s += 1; case 2: s += 10; } break;
            if (s) { case 3: s += 100; } else { case 4: s += 1000; } s += 5; } return s; }
        int in_for(int e) { int i = 0, s = 0; switch (e) { for (i = 0; i < 3; i++) { case 7: s += 10; } s++;
            } return s; }
        int resumed(int *at) { switch (*at) { case 0: *at = 1; return 10; case 1: while (1) { *at = 2; return 20;
            case 2: if (1) { *at = 3; return 30; } } case 3: return 40; } return -1; }
        int coroutine(int calls) { int at = 0, r = 0; while (calls--) r = resumed(&at); return r; }
        """,
        {"device(3, 1)": 3, "device(3, 4)": 12, "device(2, 7)": 14, "nested(1)": 11, "nested(2)": 10, "nested(3)": 105}
        | {"nested(4)": 1005, "nested(0)": 0, "in_for(7)": 31, "in_for(6)": 0, "coroutine(1)": 10, "coroutine(2)": 20}
        | {"coroutine(3)": 30, "coroutine(4)": 40},
    ),
    Case(
        "ranges",
        """
        int class_(int c) { switch (c) { case __stepring_range('0', '9'): return 1; case __stepring_range(-5, -1):
            return 2; case __stepring_range(100, 1000000): return 3; case 20: return 4; default: return 0; } }
        """,
        {"class_(48)": 1, "class_(57)": 1, "class_(58)": 0, "class_(-5)": 2, "class_(-6)": 0, "class_(100)": 3}
        | {"class_(1000000)": 3, "class_(1000001)": 0, "class_(20)": 4},
    ),
    Case(
        "labels have the control's type",
        """
        int promoted(unsigned char c) { switch (c) { case 255: return 1; case -1: return 2; default: return 0; } }
        int unsigned_(unsigned c) { switch (c) { case -1: return 1; case 0x7fffffff: return 2; default: return 0; } }
        int wide(long long c) { switch (c) { case 0x100000001: return 1; case 1: return 2; default: return 0; } }
        int signed_(signed char c) { switch (c) { case 0xff: return 1; case -1: return 2; default: return 0; } }
        """,
        {"promoted(255)": 1, "promoted(-1)": 1, "unsigned_(4294967295)": 1, "unsigned_(0x7fffffff)": 2}
        | {"wide(0x100000001)": 1, "wide(1)": 2, "signed_(-1)": 2, "signed_(255)": 2},
    ),
    Case(
        "break, continue and loops",
        """
        int steps(int n) { int s = 0; for (int i = 0; i < n; i++) { switch (i) { case 1: continue; case 3: break;
            default: s += i; } s += 100; } return s; }
        int outer(int n) { int s = 0; switch (n) { case 1: for (;;) { if (s++ > 3) break; } s += 50; break;
            case 2: switch (s) { case 0: s = 7; break; default: s = 8; } s += 10; } return s; }
        int jumped(int n) { switch (n) { case 1: goto two; case 2: two: return 22; case 3: return 33; } return 0; }
        """,
        {"steps(5)": 406, "outer(1)": 55, "outer(2)": 17, "jumped(1)": 22, "jumped(3)": 33},
    ),
)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_case(case: Case) -> None:
    check(case)


def test_the_host_agrees(tmp_path: Path) -> None:
    host_agrees(CASES, tmp_path)


def the_switch(text: str) -> Switch:
    """The outermost switch of ``step``."""
    blocks = lower_function_text("int hopper, weight(void); void stop(void);\n" + text, "step").blocks
    found = [block.terminator for block in blocks if isinstance(block.terminator, Switch)]
    return min(found, key=lambda switch: switch.syntax.position)


def syntax(body: str) -> SwitchSyntax:
    """The notes on a switch whose body's lines are the text's lines from 3 on."""
    return the_switch("void step(int e) {\nswitch (e) {\n" + body + "\n} }").syntax


def falls(body: str) -> list[tuple[int, int]]:
    """(line of the statement that runs on, line of the label), counted in the body from 1."""
    return [(fall.source.line - 3, fall.label.line - 3) for fall in syntax(body).falls]


@pytest.mark.parametrize(
    ("body", "wanted"),
    [
        ("case 1:\nhopper = 1;\ncase 2:\nhopper = 2;\nbreak;", [(2, 3)]),
        ("case 1:\nhopper = 1;\nbreak;\ncase 2:\nhopper = 2;", []),
        ("case 1:\ncase 2:\ncase 3:\nhopper = 2;\nbreak;\ndefault:\nbreak;", []),
        ("case 1:\nhopper = 1;\ndefault:\nbreak;", [(2, 3)]),
        ("default:\nhopper = 1;\ncase 1:\nbreak;", [(2, 3)]),
        ("case 1:\nreturn;\ncase 2:\ngoto out;\ncase 3:\nhopper = 1; out: ;\nbreak;", []),
        ("case 1:\nfor (;;) weight();\ncase 2:\nwhile (1) { hopper++; }\ncase 3:\ndo ; while (1);\ncase 4: ;", []),
        ("case 1:\nfor (;;) { if (hopper) break; }\ncase 2:\nbreak;", [(2, 3)]),
        ("case 1:\nif (hopper) return; else break;\ncase 2:\nbreak;", []),
        ("case 1:\nif (hopper)\nbreak;\ncase 2:\nbreak;", [(3, 4)]),
        ("case 1:\n{ hopper = 1;\nbreak; }\ncase 2:\nbreak;", []),
        ("case 1:\n{ hopper = 1;\nhopper = 3; }\ncase 2:\nbreak;", [(3, 4)]),
        ("case 1:\nswitch (hopper) { case 5: return; default: return; }\ncase 2:\nbreak;", []),
        ("case 1:\nswitch (hopper) { case 5: return; }\ncase 2:\nbreak;", [(2, 3)]),
        ("case 1:\nhopper = 1;\ncase 2:\nhopper = 2;\ncase 3:\nhopper = 3;", [(2, 3), (4, 5)]),
        ("case 1: ;\ncase 2:\nbreak;", []),
    ],
)
def test_falls(body: str, wanted: list[tuple[int, int]]) -> None:
    assert falls(body) == wanted


def test_no_fall_after_a_function_that_does_not_return() -> None:
    assert falls("case 1:\nabort();\ncase 2:\nbreak;") == []


@pytest.mark.parametrize(
    ("body", "wanted"),
    [
        ("hopper = 1;\ncase 1:\nbreak;", [1]),
        ("int local;\ncase 1:\nlocal = 2; hopper = local;\nbreak;", []),
        ("case 1:\nbreak;\nhopper = 2;\ncase 2:\nbreak;", [3]),
        ("case 1:\nreturn;\nbreak;\ncase 2:\nbreak;", []),
        ("case 1:\nreturn;\nhopper = 1;\nhopper = 2;\nbreak;\ncase 2:\nhopper = 3;", [3]),
        ("case 1:\nhopper = 2;\nbreak;\nout:\nhopper = 3;\nbreak;\ncase 2:\ngoto out;", []),
        ("case 1:\nfor (;;) weight();\nhopper = 1;\ncase 2: ;", [3]),
        ("case 1:\nif (hopper) { return; } else { return; }\nhopper = 1;\ncase 2: ;", [3]),
        ("case 1:\nhopper = 1;\nbreak;\ncase 2: ;", []),
        ("do {\ncase 1:\nhopper++;\n} while (hopper < 3);", []),
    ],
)
def test_unreached(body: str, wanted: list[int]) -> None:
    assert [place.line - 3 for place in syntax(body).unreached] == wanted


def test_nested_labels() -> None:
    assert not syntax("case 1: { hopper = 1; break; } case 2: break;").nested_labels
    assert not syntax("case 1: for (;;) { switch (hopper) { case 3: ; } }").nested_labels
    assert syntax("case 1: do { case 2: ; } while (hopper);").nested_labels
    assert syntax("case 1: if (hopper) { case 2: ; }").nested_labels


def test_default_end_and_labels() -> None:
    switch = the_switch(
        "enum mode { IDLE, FEED = 3 };\nvoid step(enum mode e) {\n  switch (e) {\n"
        "    case FEED: hopper = 1; break;\n    case __stepring_range(8, 12): break;\n    default: break;\n  }\n}"
    )
    assert switch.syntax.default is not None
    assert (switch.syntax.default.line, switch.syntax.end, switch.syntax.position.line) == (7, 7, 4)
    feed, ranged = switch.cases
    assert (feed.low, feed.high, feed.name, feed.position.line, feed.position.column) == (3, 3, "FEED", 5, 5)
    assert (feed.constant.line, feed.constant.column) == (5, 10)
    assert (ranged.low, ranged.high, ranged.name) == (8, 12, None)


def test_a_label_the_control_cannot_hold_keeps_its_written_value() -> None:
    (label,) = the_switch("void step(unsigned e) { switch (e) { case -1: ; } }").cases
    assert (label.low, label.written) == (0xFFFFFFFF, -1)
