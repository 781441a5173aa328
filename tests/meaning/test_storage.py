"""Scopes and lives: statics, shadowing, block-scope declarations, names that several units share."""

from pathlib import Path

import pytest
from tests.meaning.features import Case, check, host_agrees, joined
from tests.support import lower_text

from stepring.meaning.types import Variable
from stepring.paths.interpreter import fresh, program, run

CASES = (
    Case(
        "statics",
        """
        int counted(void) { static int n = 5; return n++; } int other_(void) { static int n; n += 10; return n; }
        int in_block(int v) { if (v) { static unsigned char n = 254; return ++n; } else { static int n = 7;
            return --n; } }
        int table(int i) { static const short t[] = {3, 4, 5}; static const short *at = t + 1; return at[i]; }
        static int later; int use_later(void) { return later; } static int later = 44;
        """,
        {"counted()": 5, "counted( )": 6, "other_()": 10, "other_( )": 20, "in_block(1)": 255, "in_block(2)": 0}
        | {"in_block(0)": 6, "in_block( 0)": 5, "table(1)": 5, "use_later()": 44},
    ),
    Case(
        "scopes",
        """
        int x_ = 1; int shadow(int v) { int r = x_; int x_ = v; { int x_ = 3; r = r * 10 + x_; } for (int x_ = 4;
            x_ < 5; x_++)
            r = r * 10 + x_; r = r * 10 + x_; { extern int x_; r = r * 10 + x_; } return r; }
        int own_initialiser(void) { int n = sizeof n; return n; }
        int tags(void) { struct t { int a; } outer = {1}; { struct t { char a, b, c; } inner = {2};
            return sizeof inner * 10
            + sizeof outer + inner.a; } }
        typedef int unit_t; int names(unit_t unit_t_) { int unit_t = 4; return unit_t + unit_t_; }
        int names_in_block(void) { typedef char small; { typedef long small; return sizeof(small); } }
        int block_function(void) { int helper_(int); return helper_(4); } int helper_(int n) { return n * 3; }
        int parameter_shadow(int (*counted_)(void), int v) { return v; } int with_enum(void) { enum { A_ = 3 };
            { enum { A_ = 4 };
            return A_; } }
        """,
        {"shadow(2)": 13421, "own_initialiser()": 4, "tags()": 36, "names(3)": 7, "names_in_block()": 8}
        | {"block_function()": 12, "with_enum()": 4},
    ),
    Case(
        "calls",
        """
        int even_(unsigned n); int odd_(unsigned n) { return n == 0 ? 0 : even_(n - 1);
            } int even_(unsigned n) { return n == 0
            ? 1 : odd_(n - 1); }
        static unsigned char narrow(unsigned char v) { return v + 1;
            } int converted_(void) { return narrow(511) + narrow(-1); }
        int apply(int (*f)(int), int v) { return f(v); } static int plus(int v) { return v + 5;
            } int applied(void) { return
            apply(plus, 3) + apply(&plus, 4) + (*plus)(1) + (***plus)(1); }
        struct job { int (*run)(int); int arg; } jobs[2] = {{plus, 3}, {0, 0}}; int job(int i) { return jobs[i].run
            ? jobs[i].run(jobs[i].arg) : -1; } int no_job(void) { return jobs[1].run(1); }
        long fact(int n) { return n < 2 ? 1 : n * fact(n - 1); } void nothing_(int *p) { *p = 4; if (*p) return;
            *p = 5; }
        int of_void(void) { int v; nothing_(&v); return v; } static inline int in_line(int v) { return v * v; }
        int use_inline(void) { return in_line(in_line(3)); }
        """,
        {
            "odd_(7)": 1,
            "converted_()": 0,
            "applied()": 29,
            "job(0)": 8,
            "job(1)": -1,
            "no_job()": None,
            "fact(20)": 2432902008176640000,
        }
        | {"of_void()": 4, "use_inline()": 81},
    ),
)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_case(case: Case) -> None:
    check(case)


def test_the_host_agrees(tmp_path: Path) -> None:
    host_agrees(CASES, tmp_path)


def test_identities_tell_equal_names_apart() -> None:
    unit = lower_text(
        "static int n; int shared; void step(int n_) { static int n; { static int n; } int v; { int v; v = 1; } }"
        "void other(void) { n = shared; }"
    )
    found: list[Variable] = [item.variable for item in unit.objects]
    found += [variable for function in unit.functions for variable in function.variables]
    by_identity = {variable.identity: variable for variable in found}
    assert sorted((v.name, v.storage) for v in by_identity.values()) == [
        *(("n", "static"), ("n", "static-local"), ("n", "static-local"), ("n_", "parameter"), ("shared", "global")),
        *(("v", "automatic"), ("v", "automatic")),
    ]
    assert "shared" in by_identity and "feeder.c:n" in by_identity


def test_two_statics_of_one_function_on_one_line_are_two_objects() -> None:
    check(
        Case(
            "one line",
            "int step(int v) { if (v) { static int n = 1; return n++; } else { static int n = 50; return n++; } }",
            {"step(1)": 1, "step(0)": 50, "step( 1)": 2, "step( 0)": 51},
        )
    )


def test_units_share_globals_and_keep_statics_to_themselves() -> None:
    hopper = lower_text(
        "int level = 3; static int own = 1; void fill(int v) { level += v; own++; }"
        "int own_of_hopper(void) { return own; }",
        name="hopper.c",
    )
    auger = lower_text(
        "extern int level; void fill(int); static int own = 10;int feed(void) { fill(2); own += level; return own; }",
        name="auger.c",
    )
    made = program([auger, hopper])
    memory = fresh(made)
    assert run(made, "feed", memory=memory).value == 15
    assert run(made, "own_of_hopper", memory=memory).value == 2
    assert memory.read("auger.c:own") == 15
    with pytest.raises(KeyError, match=r"auger\.c:own, hopper\.c:own"):
        memory.read("own")


def test_a_definition_elsewhere_gives_an_array_its_length() -> None:
    text = "extern short slots[]; int last(void) { return slots[3]; } int past(void) { return slots[4]; }"
    user = lower_text(text, name="a.c")
    owner = lower_text("short slots[4] = {1, 2, 3, 44};", name="b.c")
    made = program([user, owner])
    assert run(made, "last").value == 44
    assert run(made, "past").fault == "bounds"


def test_a_tentative_definition_and_its_initialiser_are_one_object() -> None:
    made = joined(Case("tentative", "int n; int n = 6; extern int n; int n; int step(void) { return n; }", {}))
    assert run(made, "step").value == 6
