"""Bit-fields, unions, enumerations, sizes, and the other features in which types decide."""

from pathlib import Path

import pytest
from tests.meaning.features import Case, check, host_agrees
from tests.support import lower_function_text, lower_text

from stepring.meaning.fold import fold
from stepring.meaning.models import MODELS
from stepring.meaning.types import IntType, Return

CASES = (
    Case(
        "bit-fields",
        """
        struct flags { unsigned a : 3; int b : 4; unsigned char c : 2, : 0, d : 5; unsigned e : 31; _Bool f : 1;
            long g : 40; };
        struct flags fl = {5, -3, 1, 17, 0x7fffffff, 1, -9};
        int fields(int i) { switch (i) { case 0: return fl.a; case 1: return fl.b; case 2: return fl.c;
            case 3: return fl.d;
            case 4: return fl.e == 0x7fffffff; case 5: return fl.f; default: return fl.g; } }
        int narrowed(int v) { struct flags s = {0}; s.a = v; s.b = v; int stored = (s.c = v);
            return s.a * 10000 + s.b * 100
            + stored * 10 + s.c; }
        int stepped_(void) { struct flags s = {7, 7}; s.a++; s.b++; s.c--; s.d += 40;
            return s.a * 1000 + s.b * 100 + s.c * 10
            + s.d; }
        int promoted(void) { struct flags s = {1}; return (s.a - 2 < 0) * 10 + (s.e - 2 < 0); }
        int beside(int v) { struct flags s = {1, 2, 3, 4, 5, 1, 6}; s.b = v;
            return s.a * 1000 + s.c * 100 + s.d * 10 + s.e; }
        int tests_(int v) { struct flags s = {0}; s.f = v; if (s.f && !s.a) return 1; return 0; }
        int not_set(void) { struct flags s; s.a = 1; return s.b; } int set(void) { struct flags s; s.a = 6;
            return s.a; }
        int layout(void) { return sizeof(struct flags); }
        """,
        {
            "fields(0)": 5,
            "fields(1)": -3,
            "fields(2)": 1,
            "fields(3)": 17,
            "fields(4)": 1,
            "fields(5)": 1,
            "fields(6)": -9,
        }
        | {"narrowed(14)": 59822, "narrowed(3)": 30333, "stepped_()": -762, "promoted()": 11, "beside(-1)": 1345}
        | {"tests_(4)": 1, "tests_(0)": 0, "set()": 6, "layout()": 16},
    ),
    Case(
        "bit-field not set",
        "int unset_field(void) { struct { int a : 3, b : 3; } s; s.a = 1; return s.b; }",
        {"unset_field()": None},
        host=False,
    ),
    Case(
        "unions and views as bytes",
        """
        union view { unsigned long long whole; unsigned short halves[4]; unsigned char bytes[8]; float real;
            struct { signed char
            low; int mid; } parts; };
        int viewed(int i) { union view v; v.whole = 0x8182838485868788;
            return i < 8 ? v.bytes[i] : i < 12 ? v.halves[i - 8]
            : v.parts.low; }
        int poked(void) { union view v = {0}; v.bytes[1] = 2; v.parts.mid = -1; return (v.whole >> 32 == 0xffffffff)
            * 1000 + v.halves[0]; }
        unsigned bits_of(void) { union view v; v.real = 1.5f; return v.bytes[3] * 256u + v.bytes[2]; }
        int through_pointer(int v) { unsigned char *p = (unsigned char *)&v; p[0]++; p[3] = 0; return v; }
        int pointers(void) { union { int *p; unsigned char raw[sizeof(int *)]; } u, w; int v = 6; u.p = &v;
            for (int i = 0; i < (int)sizeof(int *); i++) w.raw[i] = u.raw[i]; return *w.p; }
        """,
        {
            "viewed(0)": 0x88,
            "viewed(7)": 0x81,
            "viewed(9)": 0x8586,
            "viewed(12)": -120,
            "poked()": 1512,
            "bits_of()": 0x3FC0,
        }
        | {"through_pointer(0x01020304)": 0x020305, "pointers()": 6},
    ),
    Case(
        "sizes",
        """
        struct mixed { char a; int b; char c; double d; char e[3]; }; struct inner_ { char a; struct mixed m;
            short s; };
        union wide { char a[9]; int b; }; struct none { int n; int flexible[]; }; enum mode { OFF, ON };
            typedef int row[7];
        long sizes(int i, char text[20]) { char t[20]; row r; int (*p)[7] = &r; switch (i) {
            case 0: return sizeof(struct mixed); case 1: return sizeof(struct inner_);
                case 2: return sizeof(union wide);
            case 3: return sizeof(struct none); case 4: return sizeof(enum mode); case 5: return sizeof t; case 6:
            return sizeof text; case 7: return sizeof r / sizeof *r; case 8: return sizeof *p;
                case 9: return sizeof(char)
            + sizeof 'a' + sizeof(1 ? 1 : 2L) + sizeof 1.0f; case 10: return sizeof t[0] + sizeof(&t) + sizeof(t + 0);
            case 11: return sizeof(_Bool) + sizeof(long double); case 12: return _Alignof(struct inner_); case 13:
            return sizeof "a" "bc"; case 14: return sizeof(int (*)[3]) + sizeof(int[3]) + sizeof(struct { char a;
                short b; });
            case 15: return sizeof i++ + i; case 16: return sizeof((char)1 + (char)1); case 17: return sizeof(sizes);
            default: return sizeof((struct mixed *)0)->e; } }
        """,
        {
            f"sizes({i}, 0)": value
            for i, value in enumerate((32, 48, 12, 4, 4, 20, 8, 7, 28, 17, 17, 17, 8, 4, 24, 19, 4, 1, 3))
        },
    ),
    Case(
        "offsets",
        """
        struct laid { char a; struct { int x; short y[3]; } in; unsigned b; union { int c; char d; }; };
        long offset(int i) { switch (i) { case 0: return offsetof(struct laid, b); case 1:
            return offsetof(struct laid, in.y[2]); case 2: return offsetof(struct laid, d); default:
            return (long)&((struct laid *)0)->in.y; } }
        int member_to_whole(void) { struct laid v = {0}; v.b = 77; short *y = &v.in.y[1];
            return ((struct laid *)((char *)y - offsetof(struct laid, in.y[1])))->b; }
        """,
        {"offset(0)": 16, "offset(1)": 12, "offset(2)": 20, "offset(3)": 8, "member_to_whole()": 77},
    ),
    Case(
        "old definitions, unnamed members, flexible arrays",
        """
        int old(a, b) char a; long b; { return a * 10 + b; } int plain_old(n) { return n + 1;
            } int old_none() { return 4; }
        int call_old(void) { return old(300, 5) + plain_old(1) * 1000 + old_none(); }
        struct deep { int a; union { int b; struct { int c; union { int d, e; }; }; }; } dp = {1, {2}};
        int deep_(void) { struct deep s = dp, *p = &s; p->e = 5; return p->a * 1000 + s.b * 100 + p->c * 10 + s.d; }
        void *malloc(unsigned long); struct queue { int n; short items[]; };
        int flexible(int n) { struct queue *q = malloc(sizeof *q + n * sizeof q->items[0]); q->n = n;
            for (int i = 0; i < n; i++) q->items[i] = i * i; return q->items[n - 1]; }
        """,
        {"call_old()": 2449, "deep_()": 1225, "flexible(5)": 16},
    ),
    Case(
        "past the end of a flexible array",
        """
        void *malloc(unsigned long); struct tray { int n; short items[]; }; struct bin { int n; char items[1]; };
        int tray(int n, int at) { struct tray *q = malloc(sizeof *q + n * sizeof q->items[0]); q->items[at] = 3;
            return 1; }
        int bin(int n, int at) { struct bin *q = malloc(sizeof *q + n); q->items[at] = 3; return 1; }
        """,
        {"tray(3, 2)": 1, "tray(3, 3)": None, "tray(3, -1)": 1, "tray(3, -3)": None, "bin(4, 7)": 1, "bin(4, 8)": None},
        host=False,
    ),
    Case(
        "generic selection",
        """
        struct g { unsigned b : 3; unsigned char c; }; enum shade { DARK, LIGHT };
        int kind(int i) { int t[3]; struct g s = {1, 2}; const char *text = "x"; (void)text; switch (i) {
            case 0: return _Generic(t, int *: 1, default: 0); case 1: return _Generic("x", char *: 2, default: 0);
            case 2: return _Generic(s.c, unsigned char: 3, int: 4);
                case 3: return _Generic(+s.c, unsigned char: 3, int: 4);
            case 4: return _Generic(1ul, unsigned long long: 5, unsigned long: 6); case 5: return _Generic(DARK, int: 7,
            unsigned: 8); case 6: return _Generic((enum shade)0, int: 7, unsigned: 8); case 7: return _Generic(kind,
            int (*)(int): 9, default: 0); case 8: return _Generic(1 ? 1u : -1, int: 1, unsigned: 10); case 9:
            return _Generic(s, struct g: 11, default: 0); case 10: return _Generic(1.0f * 2, float: 12, double: 13);
            case 11: return _Generic((char)1 << 1L, int: 14, long: 15);
                case 12: return _Generic(i += 1L, int: 16, long: 17);
            default: return _Generic(&t, int (*)[3]: 18, int **: 19); } }
        """,
        {f"kind({i})": value for i, value in enumerate((1, 2, 3, 4, 6, 7, 8, 9, 10, 11, 12, 14, 16, 18))},
    ),
    Case(
        "enumerations",
        """
        enum gate { SHUT, OPEN = 5, AJAR, LAST = AJAR, NEGATIVE = -3, AFTER }; enum big { HUGE_ = 0x100000000 };
        int constants(void) { return SHUT * 10000 + AJAR * 1000 + LAST * 100 + (AFTER + 2) * 10; }
        int compared(int v) { enum gate g = v; return g < 0; } int local_(void) { enum { SHUT = 3, HERE };
            return SHUT + HERE; }
        int unsigned_enum(void) { enum only { ZERO_, ONE_ } e = ZERO_; return e - 1 < 0; } int sizes_(void) { return
            sizeof(enum big) * 10 + sizeof SHUT; } long huge(void) { return HUGE_ >> 30; }
        struct holder { enum { INSIDE = 6 } e; enum gate g : 4; };
            int inside(void) { struct holder h = {INSIDE, NEGATIVE};
            return h.e * 10 + h.g; }
        """,
        {
            "constants()": 6600,
            "compared(-1)": 1,
            "local_()": 7,
            "unsigned_enum()": 0,
            "sizes_()": 84,
            "huge()": 4,
            "inside()": 57,
        },
    ),
    Case(
        "pointers",
        """
        int walk(int n) { int t[8], *p = t, *end = t + 8; while (p < end) *p++ = n++; p -= 3;
            return p[-1] * 100 + *(p + 1)
            + (int)(end - p); }
        int backwards(unsigned n) { int t[8] = {1, 2, 3, 4, 5}, *p = t + 4; p = p - n; return *p; }
        int rows(void) { int g[3][4]; int (*r)[4] = g; for (int i = 0; i < 12; i++) g[i / 4][i % 4] = i; r++;
            return (*r)[2]
            + r[1][0] + *(*(g + 2) + 3) + 1[*g]; }
        int twice_(int *p) { *p *= 2; return *p; } int given(int v) { int *q = &v, **r = &q; twice_(*r); return v; }
        int array_parameter(int t[3]) { return t[2] + sizeof t; } int passed(void) { int t[] = {1, 2, 3}; return
            array_parameter(t); }
        int swapped(void) { int a = 1, b = 2, *p = &a, *q = &b, *t = p; p = q; q = t; *p = 7; return a * 10 + b; }
        int as_number(void) { int v = 3; unsigned long n = (unsigned long)&v; int *p = (int *)n; return *p; }
        """,
        {
            "walk(10)": 1419,
            "backwards(3)": 2,
            "rows()": 26,
            "given(8)": 16,
            "passed()": 11,
            "swapped()": 17,
            "as_number()": 3,
        },
    ),
)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_case(case: Case) -> None:
    check(case)


def test_the_host_agrees(tmp_path: Path) -> None:
    host_agrees(CASES, tmp_path)


@pytest.mark.parametrize(
    ("model", "wanted"), [("LP64", (16, 24, 8)), ("ILP32", (12, 16, 4)), ("LLP64", (16, 24, 8)), ("IP16", (9, 12, 2))]
)
def test_layouts_follow_the_data_model(model: str, wanted: tuple[int, int, int]) -> None:
    text = """struct slot { char tag; int mass; void *next; }; struct ring { struct slot *at; char full; long long n; };
    int slot(void) { return sizeof(struct slot); } int ring(void) { return sizeof(struct ring); }
    int pointer(void) { return sizeof(void *); }"""
    unit = lower_text(text, model)
    values = []
    for function in unit.functions:
        (block,) = function.blocks
        assert isinstance(block.terminator, Return) and block.terminator.value is not None
        values.append(fold(block.terminator.value))
    sizes = {"LP64": (16, 24, 8), "ILP32": (12, 16, 4), "LLP64": (16, 24, 8), "IP16": (5, 11, 2)}[model]
    assert tuple(values) == sizes


@pytest.mark.parametrize("model", list(MODELS))
def test_an_enumeration_says_which_it_is(model: str) -> None:
    text = "enum auger { IDLE, FEED }; enum auger now; int step(void) { return now == FEED; }"
    function = lower_function_text(text, "step", model)
    (now,) = function.variables
    assert isinstance(now.type, IntType) and now.type.enum is not None and now.type.enum.startswith("enum auger")
