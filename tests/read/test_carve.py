"""Carving: file scope in pieces, each with its place; bad text costs only the declaration it stands in."""

import re
import time

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pycparser import CParser, c_ast

from stepring.read.carve import Chunk, Piece, carve, marker_file
from stepring.read.dialect import clean_whole_unit
from stepring.read.kept import Kept
from stepring.read.names import declared_names


def chunks_of(text: str) -> list[Chunk]:
    return [chunk for piece in carve(text, "/barge/a.c", Kept(1 << 20)) for chunk in piece.chunks]


def notices_of(text: str) -> list[str]:
    return [notice.kind for piece in carve(text, "/barge/a.c", Kept(1 << 20)) for notice in piece.notices]


def test_each_declaration_is_one_chunk_at_its_place() -> None:
    text = "int a;\n\n  static int\nb = 3; struct hopper { int w; };\nvoid f(void)\n{\n  if (a) { b = 1; }\n}\n"
    found = [(c.kind, c.names + c.tags, c.line, c.column, c.end_line) for c in chunks_of(text)]
    assert found == [
        ("other", ("a",), 1, 1, 1),
        ("other", ("b",), 3, 3, 4),
        ("other", ("hopper",), 4, 8, 4),
        ("function", ("f",), 5, 1, 8),
    ]


def test_line_markers_give_file_and_line() -> None:
    text = (
        '# 1 "/barge/a.c"\n# 1 "/barge/a.h" 1\nint x;\n\nint y;\n# 7 "/barge/a.c" 2\nint z;\n'
        '#line 40 "/barge/b.c"\nint w;\n'
    )
    assert [(c.names[0], c.file, c.line) for c in chunks_of(text)] == [
        ("x", "/barge/a.h", 1),
        ("y", "/barge/a.h", 3),
        ("z", "/barge/a.c", 7),
        ("w", "/barge/b.c", 40),
    ]


@pytest.mark.parametrize(
    ("spelled", "name"),
    [
        ("/barge/../barge/a.c", "/barge/a.c"),
        (r"C:\\feed\\auger.c", "C:/feed/auger.c"),
        (r"C:\feed\auger.c", "C:/feed/auger.c"),
        (r"/barge/a \"b\".c", '/barge/a "b".c'),
        (r"/barge/\303\251.c", "/barge/é.c"),
        ("<built-in>", "<built-in>"),
    ],
)
def test_file_names_in_markers(spelled: str, name: str) -> None:
    assert marker_file(spelled) == name


@pytest.mark.parametrize(
    ("text", "kinds"),
    [
        ("int f(a, b) int a; char *b; { return a; } int x;", ["function", "other"]),
        ("g() { return 1; }", ["function"]),
        ("struct s { int a; } f(void) { } struct s t = { 1 };", ["function", "other"]),
        ("struct s *f(struct s *p) { return p; }", ["function"]),
        ("int a[] = { 1, 2 }, *p = (int []){ 3 };", ["other"]),
        ("enum feed { IDLE, RUN } state = IDLE;", ["other"]),
        ("int (*get(int x))(int) { return 0; }", ["function"]),
        ("extern unsigned char t[sizeof((unsigned char[]){ 1, 2 })];", ["other"]),
        ("void isr(void) interrupt 4 using 1 { }", ["function"]),
        ("struct __attribute__((packed)) s { int a; } __attribute__((aligned(4)));", ["other"]),
        ("enum e : unsigned char { A, B };", ["other"]),
        (";;int a;;void f(void) { }; int b;", ["other", "function", "other"]),
        ('char c = \'{\', *s = "}{", *q = "\\"{";', ["other"]),
        ("int f(int x) { return x == 1; }", ["function"]),
        ('void f(void) __attribute__((alias("x=y"))); int g(void) { return 0; }', ["other", "function"]),
        ('extern "C" { int f(void) { return 1; } }', ["function"]),
        (
            "union u { struct { int a; } b; int c; }; union u f(void) { union u v = { { 1 } }; return v; }",
            ["other", "function"],
        ),
    ],
)
def test_bodies_initialisers_and_aggregates_are_told_apart(text: str, kinds: list[str]) -> None:
    assert [chunk.kind for chunk in chunks_of(text)] == kinds
    assert not notices_of(text)


@pytest.mark.parametrize(
    ("text", "names", "tags", "typedefs", "variable"),
    [
        ("int a, *b, c[3], (*d)(int), e = 1;", "a b c d e", "", "", True),
        ("extern int a, b;", "a b", "", "", False),
        ("int f(int x), g(void);", "f g", "", "", False),
        ("typedef struct ring { int head; } ring_t, *ring_p;", "", "ring", "ring_t ring_p", False),
        ("typedef void (*handler)(int event, void *p);", "", "", "handler", False),
        ("typedef int (callback)(void);", "", "", "callback", False),
        ("typedef foo_t *(maker)(void);", "", "", "maker", False),
        ("enum { A = (1, 2), B, C = sizeof(int[2]) };", "", "A B C", "", False),
        ("struct a { enum b { X, Y } c; struct d { int e; } f; } v;", "v", "a b d X Y", "", True),
        ('__attribute__((section(".x"))) static int q __attribute__((used)) = 1;', "q", "", "", True),
        ("__typeof__(int *) p;", "p", "", "", True),
        ("_Alignas(8) int a;", "a", "", "", True),
        ("unsigned char PORT @ 0x05;", "PORT", "", "", True),
        ("unsigned int data_x _at_ 0x30;", "data_x", "", "", True),
        ("void (f)(int);", "f", "", "", True),
        ("static THREAD(feeder(struct pt *p));", "feeder", "", "", True),
        ("struct s;", "", "", "", False),
    ],
)
def test_declared_names(text: str, names: str, tags: str, typedefs: str, variable: bool) -> None:
    found = declared_names(text, False)
    assert list(found.names) == names.split()
    assert set(found.tags) == set(tags.split())
    assert list(found.typedefs) == typedefs.split()
    assert found.object is variable


def test_macros_are_collected_with_their_places() -> None:
    text = "#define A 1\n#define F(x, ...) g(x, __VA_ARGS__)\n#undef A\nint f(void)\n{\n#define A 2\n  return A;\n}\n"
    [piece] = carve(text, "/barge/a.c", Kept(1 << 20))
    assert [(change.line, change.macro and change.macro.body) for change in piece.changes["A"]] == [
        (1, "1"),
        (3, None),
        (6, "2"),
    ]
    macro = piece.changes["F"][0].macro
    assert macro is not None
    assert macro.parameters == ("x", "...")
    assert macro.body == "g(x, __VA_ARGS__)"
    assert "#define" not in piece.chunks[0].text


def test_headers_are_carved_once() -> None:
    header = '# 1 "/barge/a.h" 1\nint shared(int);\n'
    pieces: Kept[str, Piece] = Kept(1 << 20)
    first = carve(f'# 1 "/barge/a.c"\n{header}# 2 "/barge/a.c" 2\nint a;\n', "/barge/a.c", pieces)
    second = carve(f'# 1 "/barge/b.c"\n{header}# 2 "/barge/b.c" 2\nint b;\n', "/barge/b.c", pieces)
    shared = [chunk for piece in first for chunk in piece.chunks if chunk.names == ("shared",)]
    assert shared == [chunk for piece in second for chunk in piece.chunks if chunk.names == ("shared",)]


def test_a_declaration_goes_on_through_an_included_file() -> None:
    text = (
        '# 1 "/barge/a.c"\nint t[] = {\n# 1 "/barge/t.inc" 1\n1,\n2\n# 3 "/barge/a.c" 2\n};\nint after;\n'
        '# 1 "/barge/b.h" 1\nint other;\n# 5 "/barge/a.c" 2\nint last;\n'
    )
    found = chunks_of(text)
    assert [(c.names[0], c.file, c.line) for c in found] == [
        ("t", "/barge/a.c", 1),
        ("after", "/barge/a.c", 4),
        ("other", "/barge/b.h", 1),
        ("last", "/barge/a.c", 5),
    ]
    assert '#line 1 "/barge/t.inc"' in found[0].text


def test_parts_of_one_line_get_columns_of_their_own() -> None:
    text = (
        '# 1 "/barge/a.c"\nint f(void *p)\n{ return p ==\n# 2 "/barge/a.c" 3 4\n ((void *)0)\n# 2 "/barge/a.c"\n ; }\n'
    )
    [chunk] = chunks_of(text)
    assert "#" not in chunk.text
    assert chunk.text.count("\n") == 1


@pytest.mark.parametrize(
    ("bad", "kind"),
    [
        ("int bad( { ;", "unterminated"),
        ("int bad(void) { if (1) {\n  return 1;\n}", "unterminated"),
        ("int bad(void) { return 1; }}", "unterminated"),
        ('char *bad = "not closed;', None),
        ("int bad(void) { return 'x; }", None),
    ],
)
def test_bad_text_costs_only_itself(bad: str, kind: str | None) -> None:
    text = f"int before;\n{bad}\nint good(void)\n{{\n  return before;\n}}\nint last(int x) {{ return x; }}\n"
    assert {"before", "good", "last"} <= {chunk.names[0] for chunk in chunks_of(text) if chunk.names}
    if kind is not None:
        assert kind in notices_of(text)


def test_notices_name_the_line() -> None:
    pieces = carve("int a;\n\nint bad(void) {\n  x\n\nint good(void)\n{ return 1; }\n", "/barge/a.c", Kept(1 << 20))
    [notice] = [notice for piece in pieces for notice in piece.notices]
    assert (notice.file, notice.line) == ("/barge/a.c", 3)


def test_hostile_sizes_take_linear_time() -> None:
    start = time.process_time()
    deep = "int f(void) { return " + "(" * 10_000 + "1" + ")" * 10_000 + "; }\n" + "{" * 10_000
    long = "int t[] = {" + "1, " * 3_000_000 + "};\n"
    open_braces = "int f(void) {\n" * 10_000
    quotes = "'" * 100_000 + "\n" + '"' * 100_001
    comments = "/*" * 200_000
    for text in (deep, long, open_braces, quotes, comments, "\\\n" * 200_000, "#" * 200_000, "struct " * 100_000 + "{"):
        chunks_of(text)
    assert time.process_time() - start < 20


@given(st.text(alphabet="{}();=\"'#\\\n /*ab1,[]", max_size=200))
def test_any_text_is_carved(text: str) -> None:
    for chunk in chunks_of(text):
        assert chunk.text.strip()
        assert chunk.line >= 1


SAMPLE = """
typedef unsigned char u8;
struct ring { u8 *buf; unsigned head, tail, size; };
static __inline__ int used(const struct ring *r) { return (int)((r->head - r->tail) & (r->size - 1)); }
int put(struct ring *r, u8 c) __attribute__((nonnull));
int put(struct ring *r, u8 c) {
  if (used(r) == (int)r->size - 1) return 0;
  r->buf[r->head] = c; r->head = (r->head + 1) & (r->size - 1);
  return 1;
}
enum { IDLE, RUN, STOP } state = IDLE, *at = &state;
int old(a) int a; { return a; }
"""


def test_carving_finds_what_the_parser_finds() -> None:
    tree = CParser().parse(clean_whole_unit(SAMPLE), "")
    functions = [node.decl.name for node in tree.ext if isinstance(node, c_ast.FuncDef)]
    assert [chunk.names[0] for chunk in chunks_of(SAMPLE) if chunk.kind == "function"] == functions
    objects = {n.name for n in tree.ext[1:] if isinstance(n, c_ast.Decl | c_ast.Typedef) and n.name}
    carved = {name for chunk in chunks_of(SAMPLE) for name in chunk.names + chunk.typedefs}
    assert {name for name in objects if not re.match("__stepring|__builtin", name)} <= carved
