"""Initialisers: what every scalar holds, for objects with static storage and for automatic ones alike."""

from pathlib import Path

import pytest
from tests.meaning.features import Case, check, host_agrees, joined

from stepring.paths.interpreter import fresh

CASES = (
    Case(
        "arrays",
        """
        int plain[5] = {1, 2, 3}; int open_[] = {4, 5, [4] = 9, 10}; int ranged[6] = {[__stepring_range(1, 3)] = 7, 8};
        int back[4] = {[3] = 1, [1] = 5, 6}; unsigned char narrowed[3] = {255, (unsigned char)300, 0x41};
        int arrays(int i) { return i < 5 ? plain[i] : i < 11 ? open_[i - 5] : i < 17 ? ranged[i - 11] : back[i - 17]; }
        int sizes(void) { return sizeof open_ / sizeof open_[0] * 10 + sizeof narrowed; }
        int local(int i, int v) { int t[6] = {v, v + 1, [4] = v * 2, 3}; int u[] = {[2] = v};
            return t[i] * 10 + sizeof u; }
        int zeros(int i) { int t[4] = {0}; struct { int a[3]; } s = {{0}}; return t[i] + s.a[i % 3]; }
        int element(int i) { for (int n = 0; n < 2; n++) { int t[2] = {n}; if (n == i) return t[0] * 10 + t[1];
            t[1] = 9; }
            return -1; }
        """,
        {
            "arrays(0)": 1,
            "arrays(2)": 3,
            "arrays(4)": 0,
            "arrays(5)": 4,
            "arrays(7)": 0,
            "arrays(9)": 9,
            "arrays(10)": 10,
        }
        | {"arrays(11)": 0, "arrays(12)": 7, "arrays(14)": 7, "arrays(15)": 8, "arrays(16)": 0, "arrays(17)": 0}
        | {"arrays(18)": 5, "arrays(19)": 6, "arrays(20)": 1, "sizes()": 63, "local(0, 4)": 52, "local(1, 4)": 62}
        | {"local(2, 4)": 12, "local(4, 4)": 92, "local(5, 4)": 42, "zeros(2)": 0, "element(1)": 10},
    ),
    Case(
        "structures",
        """
        struct slot { int id; struct { short low, high; } range; int *where; unsigned char tag[4]; };
        int target = 33;
        struct slot whole = {1, {2, 3}, &target, {4, 5}};
        struct slot elided = {1, 2, 3, &target, 4, 5};
        struct slot named = {.range = {.high = 8}, .tag[2] = 6, .id = 2, {9, 10}};
        struct slot deep = {.range.low = 5, .range.high = 6, .tag = {[1] = 7}};
        struct slot table[] = {{1}, [2] = {.id = 3, .range.low = 30}, {4, .tag = "ab"}};
        int in(struct slot *s) { return ((s->id * 100 + s->range.low) * 100 + s->range.high) * 100 + s->tag[0] * 10 +
            s->tag[1]; }
        int of_whole(void) { return in(&whole) + *whole.where * 0; } int of_elided(void) { return in(&elided); }
        int of_named(void) { return in(&named) * 10 + named.tag[2]; } int of_deep(void) { return in(&deep); }
        int of_table(int i) { return table[i].id * 1000 + table[i].range.low * 10 + table[i].tag[1] % 10; }
        int table_length(void) { return sizeof table / sizeof *table; }
        int automatic(int v) { struct slot s = {v, {.high = v + 1}, &v, {[3] = 2}};
            return in(&s) + *s.where + s.tag[3]; }
        int copied(int v) { struct slot s = table[2], t = {.range = s.range, .id = v}; return in(&t); }
        """,
        {"of_whole()": 1020345, "of_elided()": 1020345, "of_named()": 20910006, "of_deep()": 50607}
        | {"of_table(0)": 1000, "of_table(1)": 0, "of_table(2)": 3300, "of_table(3)": 4008, "table_length()": 4}
        | {"automatic(7)": 7000809, "copied(5)": 5300000},
    ),
    Case(
        "unions and unnamed members",
        """
        union word { unsigned whole; unsigned char part[4]; };
            union word first = {0x01020304}, second = {.part = {9, 8}};
        struct event { int kind; union { int code; struct { short a, b; }; }; struct { int extra; };
            struct { int more; }; };
        struct event by_order = {1, {2}, {3}, {4}}; struct event by_name = {.b = 5, .kind = 1, .more = 6, .extra = 7};
        struct event flat = {1, 2, 3, 4};
        int words(int i) { return i ? second.part[i - 1] : first.part[0]; }
        int events(int i) { struct event *e = i == 0 ? &by_order : i == 1 ? &by_name : &flat;
            return ((e->kind * 10 + e->code / 65536 + e->a + e->b) * 10 + e->extra) * 10 + e->more; }
        int local_event(int v) { struct event e = {.more = v, .a = v + 1}; e.extra = v + 2;
            return events(0) * 0 + e.a * 100
            + e.extra * 10 + e.more + e.kind; }
        """,
        {"words(0)": 4, "words(1)": 9, "words(2)": 8, "words(3)": 0, "events(0)": 1234, "events(1)": 2076}
        | {"events(2)": 1234, "local_event(2)": 342},
    ),
    Case(
        "tables of tables",
        """
        int grid[2][3] = {{1, 2, 3}, {4}}; int flat_grid[2][3] = {1, 2, 3, 4}; int partly[3][2] = {[1] = {5, 6}, 7};
        int designated[2][3] = {[1][1] = 8, 9}; int open_grid[][2] = {1, 2, 3};
        int at(int t, int i, int j) { return t == 0 ? grid[i][j] : t == 1 ? flat_grid[i][j] : t == 2 ? partly[i][j]
            : t == 3 ? designated[i][j] : open_grid[i][j]; }
        int rows(void) { return sizeof open_grid / sizeof open_grid[0]; }
        """,
        {"at(0, 0, 2)": 3, "at(0, 1, 0)": 4, "at(0, 1, 1)": 0, "at(1, 1, 0)": 4, "at(2, 0, 0)": 0, "at(2, 1, 1)": 6}
        | {"at(2, 2, 0)": 7, "at(2, 2, 1)": 0, "at(3, 1, 1)": 8, "at(3, 1, 2)": 9, "at(4, 1, 0)": 3, "at(4, 1, 1)": 0}
        | {"rows()": 2},
    ),
    Case(
        "strings",
        r"""
        char text[] = "feed"; char exact[4] = "feed"; char padded[8] = {"go"}; const char *pointed = "au" "ger\n";
        char table_of[2][5] = {"ab", {'x', 'y'}}; struct { char name[6]; int n; } labelled = {"slow", 3};
        const char *names[] = {"idle", [2] = "purge"}; char octal[] = "\101\x42\0c"; char utf[] = "\u00e9é";
        int letter(int i) { return text[i];
            } int lengths(void) { return sizeof text * 100 + sizeof "abc" * 10 + sizeof octal; }
        int others(int i) { switch (i) { case 0: return exact[3]; case 1: return padded[1] + padded[7]; case 2:
            return pointed[5]; case 3: return table_of[0][1] + table_of[1][1];
                case 4: return labelled.name[3] + labelled.n;
            case 5: return names[1] == 0; case 6: return names[2][4]; case 7: return octal[1] + octal[2]; case 8:
            return sizeof utf; case 9: return (unsigned char)utf[0] + (unsigned char)utf[3];
                default: return "lit"[1]; } }
        int local_text(int i) { char t[] = "bin", u[6] = "ox"; u[4]++; return t[i] * 2 + u[i] + u[4]; }
        int written(void) { char t[] = "pump"; t[0] = 'd'; return t[0]; }
        """,
        {"letter(0)": 102, "letter(4)": 0, "lengths()": 545, "others(0)": 100, "others(1)": 111, "others(2)": 10}
        | {"others(3)": 219, "others(4)": 122, "others(5)": 1, "others(6)": 101, "others(7)": 66, "others(8)": 5}
        | {"others(9)": 0xC3 + 0xA9, "others(10)": 105, "local_text(0)": 308, "local_text(2)": 221, "written()": 100},
    ),
    Case(
        "compound literals",
        """
        struct point { int x, y; }; static int add(struct point p) { return p.x * 10 + p.y; }
        int literal(int v) { return add((struct point){v, .y = 4}); }
        int addressed(int v) { struct point *p = &(struct point){v}; p->y++; return add(*p); }
        int array_(int i) { return (int[]){5, 6, 7}[i] + (int)sizeof((char[]){1, 2, 3}); }
        int scalar(int v) { int *p = &(int){v}; *p += 2; return *p; }
        int assigned(int v) { struct point p; p = (struct point){.y = v}; return add(p); }
        """,
        {"literal(3)": 34, "addressed(3)": 31, "array_(1)": 9, "scalar(5)": 7, "assigned(6)": 6},
    ),
    Case(
        "pointers and functions",
        """
        int stock[4] = {1, 2, 3, 4}; int *second_ = stock + 1, *last = &stock[3], *none, **chain = &last;
        struct node { int v; struct node *next; } tail_ = {7, 0}, head_ = {5, &tail_};
        static int twice(int v) { return 2 * v; } static int thrice(int v) { return 3 * v; }
        int (*const actions[])(int) = {twice, &thrice, [3] = twice};
        int pointers(void) { return *second_ * 100 + **chain * 10 + (none == 0); }
        int list(void) { int s = 0; for (struct node *n = &head_; n; n = n->next) s = s * 10 + n->v; return s; }
        int act(int i, int v) { return actions[i] ? actions[i](v) : -1; } int act2(int v) { return (*actions[1])(v); }
        long distance_(void) { return last - second_; } int inside(void) { return last > second_ && second_ >= stock; }
        """,
        {
            "pointers()": 241,
            "list()": 57,
            "act(0, 4)": 8,
            "act(1, 4)": 12,
            "act(2, 4)": -1,
            "act(3, 5)": 10,
            "act2(3)": 9,
        }
        | {"distance_()": 2, "inside()": 1},
    ),
    Case(
        "values that are converted",
        """
        _Bool yes = 7; unsigned char low = 0x1ff & 0xff; float half = 1; double sum_ = 1 / 2 + 0.5; short minus = 65535;
        enum level { LOW = 2, HIGH = LOW * 3 + 1 }; int computed = HIGH << 1 | sizeof(short); long long wide = -1;
        unsigned long unsigned_ = -1; int from_real = 2.9; char last_char = '\\377';
        int converted(int i) { switch (i) { case 0: return yes; case 1: return low; case 2: return half * 4; case 3:
            return sum_ * 4; case 4: return minus; case 5: return computed; case 6: return wide < 0; case 7:
            return unsigned_ > 0; case 8: return from_real; default: return last_char; } }
        int local_converted(int v) { _Bool b = v; unsigned char c = v; float f = v; return b * 1000 + c + (f > 2); }
        """,
        {
            "converted(0)": 1,
            "converted(1)": 255,
            "converted(2)": 4,
            "converted(3)": 2,
            "converted(4)": -1,
            "converted(5)": 14,
        }
        | {"converted(6)": 1, "converted(7)": 1, "converted(8)": 2, "converted(9)": -1, "local_converted(300)": 1045},
    ),
)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_case(case: Case) -> None:
    check(case)


def test_the_host_agrees(tmp_path: Path) -> None:
    host_agrees(CASES, tmp_path)


def test_values_are_read_by_their_paths() -> None:
    memory = fresh(joined(CASES[1]))
    assert memory.read("named.range.high") == 10
    assert memory.read("table[3].tag[1]") == ord("b")
    assert memory.read("whole.where[0]") == 33
    with pytest.raises(KeyError, match="no member"):
        memory.read("named.weight")


def test_a_scalar_left_out_is_zero_but_an_automatic_without_initialiser_is_not_set() -> None:
    check(
        Case(
            "unset",
            "static int zero; int read_static(void) { static int s; return zero + s; }"
            "int read_automatic(void) { int v; return v; } int read_part(void) { int t[2]; t[0] = 1; return t[1]; }"
            "int whole(void) { struct { int a, b; } s = {1}; return s.b; }",
            {"read_static()": 0, "read_automatic()": None, "read_part()": None, "whole()": 0},
        )
    )
