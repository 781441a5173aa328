"""Dialect: what reaches the parser is ISO C with the reserved spellings, and every place leads back."""

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pycparser import CParser, c_ast, c_generator

from stepring.read.assembler import lift_assembler
from stepring.read.dialect import clean, clean_whole_unit

PREFIX = "typedef int u8, T, __builtin_va_list, __stepring_typeof_1, __stepring_typeof_2, __stepring_typeof_3;\n"


def normal(text: str) -> str:
    """A text as the parser understood it."""
    tree = CParser().parse(PREFIX + text, "")
    names = PREFIX.count(",") + 1
    return c_generator.CGenerator().visit(c_ast.FileAST(tree.ext[names:]))


def body(text: str) -> str:
    return "int f(int a, int b, int *p, char *s) { int r; " + text + " }"


SAME_AS = [
    (
        "switch (a) { case 1 ... 5: ; case (2) ... 3 + 1: ; }",
        "switch (a) { case __stepring_range(1, 5): ; case __stepring_range((2), 3 + 1): ; }",
    ),
    (
        "switch (a) { case 'a' ... 'z': case b ? 1 : 2: ; }",
        "switch (a) { case __stepring_range('a', 'z'): case b ? 1 : 2: ; }",
    ),
    ("int t[] = { [0 ... 3] = 1, [7] = 2 };", "int t[] = { [__stepring_range(0, 3)] = 1, [7] = 2 };"),
    ("r = a ?: b;", "r = a ? __stepring_same : b;"),
    ("r = a ? : (b ?: 1);", "r = a ? __stepring_same : (b ? __stepring_same : 1);"),
    (
        "void *t[] = { &&one, &&two }; one: two: goto *t[a];",
        "void *t[] = { __stepring_label(one), __stepring_label(two) }; one: two: __stepring_goto(t[a]);",
    ),
    ("l: if (a && b) return (long) (void *) &&l;", "l: if (a && b) return (long) (void *) __stepring_label(l);"),
    ("if ((a) && b) return &&l; l: ;", "if ((a) && b) return __stepring_label(l); l: ;"),
    (
        'asm volatile ("mov %0, %1" : [o] "=r" (r), "+m" (*(int *) &a) : "r" (b), "i" (sizeof(T)) : "memory");',
        "__stepring_asm(r, *(int *) &a);",
    ),
    ('if (a) __asm__ ("nop"); else asm ("cli" ::: "memory");', "if (a) __stepring_asm(); else __stepring_asm();"),
    ('__asm__ __volatile__ ("x" : : "r" (a));', "__stepring_asm();"),
    ('register int q asm("r0") = 3;', "register int q = 3;"),
    (
        "r = __builtin_va_arg(s, int) + *__builtin_va_arg(s, char *);",
        "r = (*(int *) __stepring_va_arg(s)) + *(*(char **) __stepring_va_arg(s));",
    ),
    ("r = __builtin_va_arg(s, int (*)(int))(1);", "r = (*(int (**)(int)) __stepring_va_arg(s))(1);"),
    (
        "r = __builtin_types_compatible_p(int, unsigned char *);",
        "r = __stepring_same_type(sizeof(int), sizeof(unsigned char *));",
    ),
    ("r = __builtin_choose_expr(1, a, b);", "r = __stepring_choose(1, a, b);"),
    ("r = __builtin_offsetof(struct q, x.y[1]);", "r = offsetof(struct q, x.y[1]);"),
    ("r = __alignof__(int);", "r = _Alignof(int);"),
    ("__label__ out; out: ;", "; out: ;"),
    ("r = ({ int y = a; y; });", "r = ({ int y = a; y; });"),
    ("struct q v = { x: 1, y: { z: 2 } };", "struct q v = { .x = 1, .y = { .z = 2 } };"),
    ("r = ((struct q) { x: 1 }).x; l: r = 1;", "r = ((struct q) { .x = 1 }).x; l: r = 1;"),
    (
        "switch (a) { case 1: r = 1; __attribute__((fallthrough)); default: r = 2; [[fallthrough]]; }",
        "switch (a) { case 1: r = 1; ; default: r = 2; ; }",
    ),
    ("auto y = 3; r = y;", "__stepring_typeof_1 y = 3; r = y;"),
    (
        "__auto_type y = a + 1; __typeof__(y) z; typeof(int *) w;",
        "__stepring_typeof_1 y = a + 1; __stepring_typeof_2 z; __stepring_typeof_3 w;",
    ),
    (
        'bool x = true; static_assert(1, "x"); alignas(8) char c;',
        '_Bool x = true; _Static_assert(1, "x"); _Alignas(8) char c;',
    ),
    (
        r"s = " + "\"a\\%b\"; r = '\\e' + 'abcdef' + 10LU + 3i + 1.5q;",
        "s = \"a%b\"; r = '\\e' + 'cdef' + 10LU + 3 + 1.5;",
    ),
    (
        "const __restrict int *q; __volatile__ int v; __extension__ __signed__ char c; _Float64 d; __int128 w;",
        "const restrict int *q; volatile int v; signed char c; double d; __int128 w;",
    ),
    ("struct { int x : 3, y : 2; } q; r = a ? b : 1;", "struct { int x : 3, y : 2; } q; r = a ? b : 1;"),
    (
        "int data = a, code, bit = data * code, near; data *= 2; struct { int far; } huge; huge.far = near & bit;",
        "int data = a, code, bit = data * code, near; data *= 2; struct { int far; } huge; huge.far = near & bit;",
    ),
]


@pytest.mark.parametrize(("source", "expected"), SAME_AS)
def test_statements(source: str, expected: str) -> None:
    assert normal(clean(body(source), force=True).text) == normal(body(expected))
    if "\\%" not in source:
        assert normal(clean(body(source)).text) == normal(body(expected))


TOP_LEVEL = [
    (
        "struct __attribute__((packed, aligned(4))) p { u8 a __attribute__((aligned)); } __attribute__((__packed__));",
        "struct p { u8 a; };",
        {"packed", "aligned"},
    ),
    (
        '__attribute__((noreturn)) void die(void) __attribute__((cold, section(".x")));',
        "void die(void);",
        {"noreturn", "cold", "section"},
    ),
    ('[[nodiscard, deprecated("use [x]")]] int k(void);', "int k(void);", {"nodiscard", "deprecated"}),
    ("int *__attribute__((may_alias)) q, (__attribute__((x)) *w)(int);", "int *q, (*w)(int);", {"may_alias", "x"}),
    ("__declspec(dllexport) int k(void);", "int k(void);", {"dllexport"}),
    ('extern int ff(int) __asm__("_ff");', "extern int ff(int);", set()),
    ('asm(".globl x");', "", set()),
    ("enum e : unsigned char { A, B };", "enum e { A, B };", set()),
    ("typedef unsigned w __attribute__((mode(HI)));", "typedef unsigned short w;", {"mode"}),
    ("sfr P0 = 0x80;", "volatile unsigned char P0;", {"at"}),
    ("sbit LED = P0^1;", "volatile _Bool LED;", {"at"}),
    ("static bit flag;", "static _Bool flag;", set()),
    ("unsigned char xdata buf[10], idata *data p;", "unsigned char buf[10], *p;", set()),
    ("code unsigned char tab[] = { 1 };", "unsigned char tab[] = { 1 };", {"flash"}),
    ("unsigned idata x _at_ 0x30;", "unsigned x;", {"at"}),
    ("void t0(void) interrupt 1 using 2 { }", "void t0(void) { }", {"interrupt"}),
    ("void r(int a) reentrant { }", "void r(int a) { }", set()),
    ("__sfr __at(0x80) P0; __sbit __at (0x90) P1;", "volatile unsigned char P0; _Bool P1;", {"at"}),
    ("void isr(void) __interrupt(1) __using(1) { }", "void isr(void) { }", {"interrupt"}),
    ("__xdata unsigned char b[4]; int __flash *q;", "unsigned char b[4]; int *q;", {"flash"}),
    ("volatile unsigned char PORTA @ 0x05;", "volatile unsigned char PORTA;", {"at"}),
    ("volatile bit RA0 @ ((unsigned)&PORTA*8)+0;", "volatile _Bool RA0;", {"at"}),
    (
        "void interrupt isr(void) { } void interrupt low_priority lo(void) { }",
        "void isr(void) { } void lo(void) { }",
        {"interrupt"},
    ),
    ("far rom const char *s; int near v; persistent int keep;", "const char *s; int v; int keep;", {"flash", "noinit"}),
    ("interrupt [TIM0_OVF] void timer0(void) { }", "void timer0(void) { }", {"interrupt"}),
    ('__root __no_init int z @ ".noinit";', "int z;", {"used", "noinit", "at"}),
    (
        "__irq void q(void) { } __weak void w(void) { } __packed struct s { int a; };",
        "void q(void) { } void w(void) { } struct s { int a; };",
        {"interrupt", "weak", "packed"},
    ),
    (
        "@interrupt void ci(void) { } @near int ni; @tiny unsigned char tc;",
        "void ci(void) { } int ni; unsigned char tc;",
        {"interrupt"},
    ),
    ("ISR(TIMER0_vect) { a(); }", "void TIMER0_vect(void) { a(); }", {"interrupt"}),
    ("ISR(USART_RX_vect, ISR_NOBLOCK) { }", "void USART_RX_vect(void) { }", {"interrupt"}),
    ("int __cdecl f(int __far *p);", "int f(int *p);", set()),
    ("_Thread_local int a; __thread int b;", "_Thread_local int a; _Thread_local int b;", set()),
    ("int struct_code(struct code *c, struct data d);", "int struct_code(struct code *c, struct data d);", set()),
    (
        "struct q { int data; int *code; int near[2]; int far : 1; };",
        "struct q { int data; int *code; int near[2]; int far : 1; };",
        set(),
    ),
    (
        "int interrupt(int using) { return using; } int small(void);",
        "int interrupt(int using) { return using; } int small(void);",
        set(),
    ),
    ("struct a { char __size[56]; long int __align; };", "struct a { char __size[56]; long int __align; };", set()),
]


@pytest.mark.parametrize(("source", "expected", "attributes"), TOP_LEVEL)
def test_declarations(source: str, expected: str, attributes: set[str]) -> None:
    cleaned = clean(source)
    assert normal(cleaned.text) == normal(expected)
    assert cleaned.attributes == attributes


@pytest.mark.parametrize("word", ["data", "code", "bit", "bool", "__weak", "sfr"])
def test_a_declared_name_is_no_keyword(word: str) -> None:
    text = f"{word} x;"
    assert clean(text, {word}).text == text


@pytest.mark.parametrize(("int_bytes", "expected"), [(2, "typedef long t;"), (4, "typedef int t;")])
def test_machine_modes_give_the_width(int_bytes: int, expected: str) -> None:
    cleaned = clean("typedef int t __attribute__((__mode__(__SI__)));", int_bytes=int_bytes)
    assert normal(cleaned.text) == normal(expected)


ASSEMBLER = [
    ("void f(void)\n{\n#asm\n mov a, #'x ; don't {\n#endasm\n}\n", "void f(void)\n{ __stepring_asm(); }"),
    ('void f(void)\n{\n#asm("sei")\n}\n', "void f(void)\n{ __stepring_asm(); }"),
    ("void f(void) { _asm\n mov a, b ; it's {\n _endasm; }", "void f(void) { __stepring_asm(); }"),
    ("void f(void) { __asm nop __endasm; }", "void f(void) { __stepring_asm(); }"),
    ("void f(void) { __asm { mov r0, r1; nop } g(); }", "void f(void) { __stepring_asm(); g(); }"),
    ("void f(void) { asm nop; g(); }", "void f(void) { __stepring_asm(); g(); }"),
    ("__asm void f(int a)\n{\n push {r0, r1}\n bx lr\n}\n", "void f(int a) { __stepring_asm(); }"),
    ("asm void\nf(void)\n{\n rte\n}\n", "void f(void) { __stepring_asm(); }"),
    ('void f(void) { __asm__ volatile ("nop"); asm("sei"); }', "void f(void) { __stepring_asm(); __stepring_asm(); }"),
]


@pytest.mark.parametrize(("source", "expected"), ASSEMBLER)
def test_assembler_blocks(source: str, expected: str) -> None:
    lifted = lift_assembler(source)
    assert lifted.count("\n") == source.count("\n")
    assert normal(clean(lifted).text) == normal(expected)


def test_typeof_operands_stand_where_they_stood() -> None:
    text = "int f(int a)\n{\n  __typeof__ (a + 1) b; typeof (typeof (int *)) c;\n  __auto_type d = b;\n}\n"
    cleaned = clean(text)
    assert [(one.name, one.text.strip()) for one in cleaned.operands] == [
        ("__stepring_typeof_1", "a + 1"),
        ("__stepring_typeof_2", "__stepring_typeof_3"),
        ("__stepring_typeof_3", "int *"),
        ("__stepring_typeof_4", "b"),
    ]
    for operand in cleaned.operands:
        before = cleaned.offset_before(operand.offset)
        assert text[before:].startswith(operand.text.split()[0].replace("__stepring_typeof_3", "typeof"))


def test_falls_are_the_lines_of_the_attribute() -> None:
    text = (
        "void f(int a)\n{\nswitch (a) {\ncase 1:\n g();\n __attribute__((fallthrough));\n"
        "case 2: g(); [[fallthrough]];\ncase 3: ;\n}\n}"
    )
    assert clean(text).falls == (5, 6)


PARTS = (
    "__attribute__((unused))|case 1 ... 3:|a ?: b|__typeof__(x) y|typeof(int)|&&l|goto *p;|;|x|+|@ 0x20|static|=|é"
    "|asm('x' : '=r'(y));|__builtin_va_arg(ap, int)|{|}|(|)|[|]|[0 ... 1]|,|\n|__restrict|bit|data|interrupt 3|1.0q"
    "|'abcdef'|'\\%'|[[x]]|__auto_type z = 1|__alignof__(x)|__builtin_types_compatible_p(int, x)"
)


@given(st.lists(st.sampled_from(PARTS.split("|")), max_size=30).map(" ".join))
def test_line_ends_and_offsets_survive_anything(text: str) -> None:
    cleaned = clean(text, force=True)
    assert cleaned.text.count("\n") == text.count("\n")
    offsets = [cleaned.offset_before(offset) for offset in range(len(cleaned.text) + 1)]
    assert offsets == sorted(offsets)
    assert all(0 <= offset <= len(text) for offset in offsets)
    # an identifier that was left alone leads back to itself
    for match in re.finditer(r"\b[xyz]\b", cleaned.text):
        before = cleaned.offset_before(match.start())
        assert text[before : before + 1] == match.group()


def test_plain_c_is_left_alone() -> None:
    text = "int f(int x, ...) { return x && x ? 1 : 2; }"
    assert clean(text).text is text


def test_a_whole_unit_parses_at_once() -> None:
    text = (
        '#define X 1\n# 1 "a.c"\ntypedef __builtin_va_list va;\nint f(int a) { __typeof__(a) b = a ?: 1; return b; }\n'
    )
    tree = CParser().parse(clean_whole_unit(text), "")
    assert [node.decl.name for node in tree.ext if isinstance(node, c_ast.FuncDef)] == ["f"]
    function = tree.ext[-1]
    assert (function.coord.file, function.coord.line) == ("a.c", 2)
