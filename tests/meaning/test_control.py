"""Loops, jumps, conditions, comma and statement expressions do what they do in C."""

from pathlib import Path

import pytest
from tests.meaning.features import Case, check, host_agrees

CASES = (
    Case(
        "loops",
        """
        int sum_for(int n) { int s = 0; for (int i = 0, j = n; i < j; i++, j--) s += j - i; return s; }
        int sum_while(int n) { int s = 0; while (n--) { if (n == 3) continue; if (n > 8) break; s += n; } return s; }
        int once(int n) { int s = 0; do s++; while (n-- > 0 && s < 10); return s; }
        int endless(int n) { for (;;) { if (n % 7 == 0) return n; n++; } }
        int nothing(int n) { while (0) n = 99; do n++; while (0); for (; 0;) n = 99; return n; }
        int inner(int n) { int s = 0; for (int i = 0; i < n; i++) for (int i = 5; i > 3; i--) s += i; return s; }
        """,
        {"sum_for(5)": 9, "sum_while(6)": 12, "sum_while(20)": 0, "once(0)": 1, "once(3)": 4, "once(99)": 10}
        | {"endless(3)": 7, "nothing(4)": 5, "inner(2)": 18},
    ),
    Case(
        "continue tests a do loop's condition",
        "int tries(int n) { int s = 0; do { s += 10; if (n == 2) continue; s++; } while (--n); return s; }",
        {"tries(3)": 32, "tries(1)": 11},
    ),
    Case(
        "goto in and out of loops",
        """
        int out(int n) { int s = 0; for (int i = 0; i < 9; i++) for (int j = 0; j < 9; j++) {
            s++; if (i * j == n) goto found; } s = -1; found: return s; }
        int into(int n) { int s = 0, i = 7; if (n) goto middle; for (i = 0; i < 3; i++) { s += 10; middle: s += i; }
            return s; }
        int back(int n) { int s = 0; again: s += n; if (--n > 0) goto again; return s; }
        int end(int n) { if (n > 2) goto done; n = 7; done: ; int m = n; return m; }
        """,
        {"out(6)": 16, "out(1000)": -1, "into(0)": 33, "into(1)": 7, "back(4)": 10, "end(1)": 7, "end(5)": 5},
    ),
    Case(
        "logical operators evaluate only what they must",
        """
        static int log_; static int saw(int v) { log_ = log_ * 10 + 1; return v; }
        int and_(int a, int b) { log_ = 0; int r = saw(a) && saw(b); return log_ * 10 + r; }
        int or_(int a, int b) { log_ = 0; int r = saw(a) || saw(b); return log_ * 10 + r; }
        int mixed(int a, int b) { return a && !b || (a > 3 && b); }
        int with_constant(int a) { return (0 || (a ^ 5)) * 10 + (1 && (a + 2)); }
        int not_constant(int a) { return (1 || a) + (0 && a) * 5 + !!(a & 12) * 100; }
        int as_condition(int a, double d) { if (d && a) return 1; if (!d || !a) return 2; return 3; }
        int guard(int *p) { return p && *p == 3; }
        int guarded(void) { int three = 3; return guard(0) * 10 + guard(&three); }
        """,
        {"and_(0, 1)": 10, "and_(2, 1)": 111, "and_(2, 0)": 110, "or_(0, 1)": 111, "or_(2, 0)": 11, "or_(0, 0)": 110}
        | {"mixed(1, 0)": 1, "mixed(2, 2)": 0, "mixed(4, 1)": 1, "with_constant(3)": 11, "with_constant(5)": 1}
        | {"not_constant(0)": 1, "not_constant(4)": 101, "guarded()": 1},
    ),
    Case(
        "conditional expressions have one type",
        """
        long widened(int c) { return c ? -1 : 1u; }
        int chosen(int c) { return c ? 0 ? 5 : 6 : 7; }
        int constant(void) { return (1 ? -1 : 0u) > 0; }
        int shared(int c) { static int made; int r = c ? ++made : made--; return r * 10 + made; }
        int same(int a, int b) { return a ? __stepring_same : b; }
        static int calls_; static int counted(int v) { calls_++; return v; }
        int same_once(int a) { calls_ = 0; int r = counted(a) ? __stepring_same : 40; return r * 10 + calls_; }
        int of_void(int c) { int r = 1; c ? (void)(r = 5) : (void)(r = 6); return r; }
        struct pair { int a, b; }; int of_struct(int c) { struct pair x = {1, 2}, y = {3, 4}; return (c ? x : y).b; }
        int of_pointer(int c) { int v = 9; int *p = c ? &v : 0; return p ? *p : -1; }
        """,
        {"widened(1)": 4294967295, "widened(0)": 1, "chosen(1)": 6, "chosen(0)": 7, "constant()": 1}
        | {"shared(1)": 11, "shared(0)": 10, "same(3, 4)": 3, "same(0, 4)": 4, "same_once(6)": 61, "same_once(0)": 401}
        | {
            "of_void(1)": 5,
            "of_void(0)": 6,
            "of_struct(1)": 2,
            "of_struct(0)": 4,
            "of_pointer(1)": 9,
            "of_pointer(0)": -1,
        },
    ),
    Case(
        "comma",
        """
        int comma(int a) { int b = (a++, a * 2); return b + a; }
        int in_condition(int a) { int n = 0; while (n++, a--) ; return n; }
        int in_for(int n) { int s = 0, i; for (i = 1, s = 100; i < n; i += 2, s--) ; return s * 10 + i; }
        int in_subscript(int i) { int t[3] = {7, 8, 9}; return t[i++, i]; }
        """,
        {"comma(3)": 12, "in_condition(4)": 5, "in_for(4)": 985, "in_subscript(1)": 9},
    ),
    Case(
        "statement expressions",
        """
        int most(int a, int b) { return ({ int x = a, y = b; x > y ? x : y; }); }
        int looped(int n) { int r = ({ int s = 0; for (int i = 0; i < n; i++) s += i; s; }) + 1; return r; }
        int left(int a) { return ({ if (a > 2) return -1; a; }) * 10; }
        int none(int a) { ({ a += 5; (void)0; }); ({ ; }); return a; }
        int jumps(int n) { int s = 0; while (n) { s += ({ if (n == 2) break; n--; n; }); } return s * 10 + n; }
        """,
        {"most(3, 8)": 8, "looped(4)": 7, "left(2)": 20, "left(3)": -1, "none(1)": 6, "jumps(5)": 92},
    ),
)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_case(case: Case) -> None:
    check(case)


def test_the_host_agrees(tmp_path: Path) -> None:
    host_agrees(CASES, tmp_path)
