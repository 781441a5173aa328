"""GNU C as people write it, read by the reader and then lowered: it means what the host's compiler says it means."""

import shutil
from pathlib import Path

import pytest
from tests.meaning.features import Case
from tests.paths.host import call_all

from stepring.gather.types import Unit
from stepring.meaning.models import MODELS
from stepring.meaning.types import TypedUnit
from stepring.meaning.unit import Meanings, lower_unit
from stepring.paths.interpreter import fresh, program, run
from stepring.read.reader import Reader
from stepring.read.types import Preprocessed

CASES = (
    Case(
        "typeof",
        """
        int typed(int v) { __typeof__(v) a = v; __typeof__(&a) p = &a; __typeof__(long) b = *p; typeof(a + 1L) c = b;
            return sizeof(c) * 100 + *p + (int)c; }
        struct bin { unsigned char slots[4]; } bin_; int member(void) { __typeof__(bin_.slots[0]) v = 300;
            __typeof__(bin_.slots) all = {1, 2}; return v * 100 + sizeof all + all[1]; }
        int automatic(unsigned char v) { __auto_type a = v; __auto_type b = v + 1; a += 255; return sizeof a * 1000
            + sizeof b * 100 + a; }
        int larger(int a, int b) { return ({ __typeof__(a) a_ = (a); __typeof__(b) b_ = (b); a_ > b_ ? a_ : b_; }); }
        int outermost(int v) { __typeof__(v) *q; { long v = 1; __typeof__(v) w = v; return sizeof *q * 10 + sizeof w;
            } }
        """,
        {"typed(4)": 808, "member()": 4406, "automatic(3)": 1402, "larger(3, 9)": 9, "outermost(1)": 48},
    ),
    Case(
        "ranges and short conditions",
        """
        int class_(int c) { switch (c) { case '0' ... '9': return 1; case -5 ... -1: return 2; default: return 0; } }
        int ranged[8] = { [1 ... 3] = 7, [5] = 2 }; int in_range(int i) { return ranged[i]; }
        int first_set(int a, int b) { return a ?: b ?: -1; }
        """,
        {"class_(53)": 1, "class_(-3)": 2, "class_(0)": 0, "in_range(3)": 7, "in_range(4)": 0, "in_range(5)": 2}
        | {"first_set(0, 4)": 4, "first_set(3, 4)": 3, "first_set(0, 0)": -1},
    ),
    Case(
        "atomic built-ins",
        """
        static unsigned char slot = 250; static unsigned fed[2] = {7, 9};
        int loaded(void) { return __atomic_load_n(&slot, 2); }
        int stored(int v) { __atomic_store_n(&slot, v, 3); return slot; }
        int through(unsigned v) { unsigned old, *where = &fed[1]; __atomic_load(where, &old, 2);
            __atomic_store(where, &v, 3); return old * 100 + fed[1]; }
        int added(int by) { unsigned char a = 250; int old = __atomic_fetch_add(&a, by, 5);
            int now = __atomic_sub_fetch(&a, 1, 5); return old * 1000 + now; }
        int masked(void) { unsigned a = 12; unsigned old = __atomic_fetch_and(&a, 6, 5);
            return __atomic_or_fetch(&a, 1, 5) * 100 + old; }
        int swapped(int v) { int a = 3, i = 0, two[2] = {4, 5}; a = __atomic_exchange_n(&two[i++], v, 5);
            return a * 100 + two[0] * 10 + i; }
        """,
        {"loaded()": 250, "stored(260)": 4, "through(8)": 908, "added(10)": 250003, "masked()": 512, "swapped(6)": 461},
    ),
    Case(
        "attributes, builtins and keywords",
        """
        static __inline__ int __attribute__((always_inline)) fast(int v) { return __builtin_expect(!!(v > 2), 1) ? v
            : -v; }
        int hinted(int v) { return fast(v) + __builtin_popcount(v) + __builtin_bswap16(0x0100); }
        __extension__ typedef long long wide_t; int extension_(void) { return __extension__ (sizeof(wide_t)); }
        int offset_(void) { struct laid { char a; int b[3]; }; return __builtin_offsetof(struct laid, b[2]); }
        int chosen(int v) { return __builtin_choose_expr(sizeof v == 4, v + 1, v + 2); }
        int guarded(int v) { __asm__ volatile ("" ::: "memory"); v++; return v; }
        #pragma pack(push, 1)
        #pragma pack(pop)
        int const_ptr(const char *restrict p) { return p[0]; } int called(void) { return const_ptr("b"); }
        void die(void) __attribute__((noreturn)); int checked(int v) { if (v < 0) die(); return v; }
        void die(void) { __builtin_trap(); }
        """,
        {
            "hinted(5)": 8,
            "hinted(1)": 1,
            "extension_()": 8,
            "offset_()": 12,
            "chosen(1)": 2,
            "guarded(3)": 4,
            "called()": 98,
        }
        | {"checked(3)": 3},
    ),
    Case(
        "packed structures",
        """
        struct __attribute__((packed)) frame { unsigned char kind; unsigned mass; unsigned short crc; };
        typedef struct { char a; struct { char b; int c; } in; } __attribute__((packed)) outer_t;
        struct loose { char a; int b; }; struct { int n : 3; unsigned m : 31; char z; } __attribute__((packed)) bits_;
        unsigned char raw_[7] = {1, 2, 0, 0, 0, 9, 1}; int frame_(int i) { struct frame f;
            __builtin_memcpy(&f, raw_, 7); return
            i == 0 ? (int)sizeof f : i == 1 ? (int)f.mass : i == 2 ? f.crc : i == 3 ? (int)sizeof(outer_t) : i == 4
            ? (int)sizeof(struct loose) : (int)sizeof bits_; }
        int packed_bits(void) { bits_.n = -1; bits_.m = 0x40000001; bits_.z = 5;
            return (bits_.m == 0x40000001) * 10 + bits_.z; }
        """,
        {
            "frame_(0)": 7,
            "frame_(1)": 2,
            "frame_(2)": 265,
            "frame_(3)": 9,
            "frame_(4)": 8,
            "frame_(5)": 6,
            "packed_bits()": 15,
        },
    ),
    Case(
        "structures found from their members",
        """
        struct link { struct link *next; }; struct job { int mass; struct link link; }; struct job a_ = {3}, b_ = {4};
        int from_member(void) { a_.link.next = &b_.link; struct link *l = a_.link.next;
            struct job *j = ({ const __typeof__(
            ((struct job *)0)->link) *m_ = l; (struct job *)((char *)m_ - __builtin_offsetof(struct job, link)); });
            return j->mass; }
        """,
        {"from_member()": 4},
    ),
    Case(
        "nested initialisers and zero-length arrays",
        """
        struct head { int n; char rest[0]; }; union u { int a; struct { char x, y; }; }; struct e { union u v[2];
            int z; };
        struct e table[] = { { .v[1].y = 5, .z = 6 }, { { { 1 }, { 2 } }, 3 } };
            int at(int i) { return i < 2 ? table[0].v[i].y
            : i == 2 ? table[0].z : i == 3 ? table[1].v[1].a : (int)sizeof(struct head);
                } int empty_(void) { struct e e = {}; return
            e.z; }
        """,
        {"at(0)": 0, "at(1)": 5, "at(2)": 6, "at(3)": 2, "at(4)": 4, "empty_()": 0},
    ),
)


def lowered(text: str) -> TypedUnit:
    """A text read as one file of a project, then lowered."""
    root = Path("/barge")
    unit = Unit(root / "gnu.c", root, "database")
    read = Reader(root).read(Preprocessed(unit, f'# 1 "/barge/gnu.c"\n{text}', {}, True))
    return lower_unit(read, MODELS["LP64"], Meanings())


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_case(case: Case, tmp_path: Path) -> None:
    unit = lowered(case.text)
    assert not unit.notices, unit.notices
    made = program([unit])
    memory = fresh(made)
    for call, wanted in case.calls.items():
        name, _, rest = call.partition("(")
        arguments = [int(item) for item in rest.rstrip(")").split(",") if item.strip()]
        outcome = run(made, name, arguments, memory=memory)
        assert (outcome.kind, outcome.value) == ("returned", wanted), (call, outcome)
    if shutil.which("gcc") is not None:
        results = call_all(tmp_path, case.text, [("0", call) for call in case.calls])
        assert [result and result[1] for result in results] == list(case.calls.values())


def test_a_jump_to_a_label_whose_address_was_taken_can_go_to_each_of_them() -> None:
    unit = lowered(
        "int step(int n) { static void *const to[] = { &&idle, &&feed, &&done }; goto *to[n]; idle: return 1;"
        " feed: return 2; done: return 3; }"
    )
    outcome = run([unit], "step", (1,))
    assert outcome.kind == "stopped"
    (function,) = unit.functions
    values = [getattr(block.terminator, "value", None) for block in function.blocks]
    assert {getattr(value, "value", None) for value in values} >= {1, 2, 3}


def test_a_variable_set_by_assembly_is_not_known() -> None:
    unit = lowered('int step(void) { int v = 1; __asm__ volatile ("mov %0, 2" : "=r"(v)); return v; }')
    outcome = run([unit], "step")
    assert (outcome.kind, "assembly" in outcome.reason) == ("stopped", True)


def test_a_variable_argument_is_not_known() -> None:
    unit = lowered(
        "typedef __builtin_va_list va_list;"
        "int step(int n, ...) { va_list ap; __builtin_va_start(ap, n); int v = __builtin_va_arg(ap, int);"
        " __builtin_va_end(ap); return v; }"
    )
    assert run([unit], "step", (1,)).kind == "stopped"
