"""The reader: a unit in, declarations out; what is shared is read once; what is missing is guessed; nothing raises."""

import pickle
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pycparser import c_ast, c_generator

from stepring.gather.types import Unit
from stepring.places import NOTICE_KINDS
from stepring.read.reader import Reader
from stepring.read.types import Preprocessed, ReadUnit

ROOT = Path("/barge")


def read(
    text: str, complete: bool = True, reader: Reader | None = None, name: str = "a.c", **predefined: str
) -> ReadUnit:
    unit = Unit(ROOT / name, ROOT, "database")
    text = text if text.startswith("# ") else f'# 1 "/barge/{name}"\n{text}'
    return (reader or Reader(ROOT)).read(Preprocessed(unit, text, predefined, complete))


def shown(unit: ReadUnit) -> str:
    generator = c_generator.CGenerator()
    texts = [generator.visit(node) for declaration in unit.declarations for node in declaration.nodes]
    return " ".join(" ".join(texts).split())


def test_declarations_in_source_order_with_their_facts() -> None:
    unit = read(
        "#define CAPACITY 8\nenum feed { IDLE, RUN };\nstatic enum feed state;\n"
        "void __attribute__((interrupt)) tick(void)\n{\n  state = RUN;\n}\n#pragma vector=3\nint unused(int);\n"
    )
    assert [(d.kind, d.names, d.own, d.start.line) for d in unit.declarations] == [
        ("other", ("feed", "IDLE", "RUN"), True, 2),
        ("other", ("state",), True, 3),
        ("function", ("tick",), True, 4),
        ("other", (), True, 8),
    ]
    assert unit.declarations[2].attributes == {"interrupt"}
    assert isinstance(unit.declarations[3].nodes[0], c_ast.Pragma)
    assert unit.macros["CAPACITY"].body == "8"
    assert unit.macros["CAPACITY"].line == 1
    [place] = unit.functions
    assert (place.name, place.file, place.line, place.read) == ("tick", "/barge/a.c", 4, True)


def test_shared_declarations_are_the_same_object() -> None:
    reader = Reader(ROOT)
    header = (
        '# 1 "/barge/a.h" 1\nstruct ring { int head; };\nstatic inline int used(struct ring *r) { return r->head; }\n'
    )
    units = [
        read(
            f'# 1 "/barge/{n}"\n{header}# 2 "/barge/{n}" 2\nint {n[0]}(struct ring *r) {{ return used(r); }}\n',
            True,
            reader,
            n,
        )
        for n in ("p.c", "q.c")
    ]
    first, second = ({d.key: d for d in unit.declarations if d.start.file.endswith(".h")} for unit in units)
    assert len(first) == 2
    assert all(first[key] is second[key] for key in first)


def test_a_declaration_is_read_anew_where_its_names_mean_something_else() -> None:
    reader = Reader(ROOT)
    header = '# 1 "/barge/a.h" 1\nstatic inline int twice(int x) { return (T) * x; }\n'
    types = read(f'# 1 "/barge/p.c"\ntypedef int T;\n{header}', True, reader, "p.c")
    value = read(f'# 1 "/barge/q.c"\nint T;\n{header}', True, reader, "q.c")
    assert "(T) (*x)" in shown(types)
    assert "T * x" in shown(value)


def test_a_skipped_function_is_named_with_place_and_reason() -> None:
    unit = read("int bad(int a)\n{\n  return a +* ;\n}\nint good(void) { return 1; }\n")
    assert [(f.name, f.line, f.read) for f in unit.functions] == [("bad", 1, False), ("good", 5, True)]
    [notice] = unit.notices
    assert notice.kind == "skipped-declaration"
    assert (notice.file, notice.line) == ("/barge/a.c", 3)
    assert "bad" in notice.text


def test_machine_modes_follow_the_data_model() -> None:
    text = "typedef int word __attribute__((mode(SI)));\nword w;\n"
    assert "typedef long word" in shown(read(text, __SIZEOF_INT__="2"))
    assert "typedef int word" in shown(read(text, __SIZEOF_INT__="4"))


MISSING = [
    (
        "static uint8_t head, *tail; void push(uint8_t v) { buffer_t *b = get(); const reg_t r = (reg_t) v;"
        " head = (uint8_t) (head + 1) & 7; for (size_t i = 0; i < 3; i++) { b->x[i] = (reg_t *) v; } }",
        "buffer_t reg_t size_t uint8_t",
    ),
    (
        "EXPORT u8 g(foo_t x, bar_t *y, baz_t) { return x; } static INLINE int q(void) { return 1; }",
        "bar_t baz_t foo_t u8",
    ),
    ("unsigned BASE_T get(signed CHAR_T *p) { return (unsigned BASE_T) *p; }", "BASE_T CHAR_T"),
    ("Result *make(void) { return 0; } void (*cb)(event_t e, void *ctx);", "Result event_t"),
    ("struct PACKED hdr { u8 a; }; u8 f(struct hdr *p) { return p->a; }", "u8"),
    ("void f(int n) { int a, b; a * b; g(a * b, (a) - b); foo * p = &n; }", "foo"),
    (
        "BaseType_t FAST push(const msg_t *m) { LOCK m->x = 1; UNLOCK if (m) g(); return (BaseType_t) m; }",
        "BaseType_t msg_t",
    ),
    ('void f(int n) { TRACE() n = 1; EACH(i, n) { g(i); } printf("%" PRIu32 "\\n", n); }', ""),
    ("int f(op_t *p) { op_t q; return ACCESS(op_t, p).a + container_of(p, struct s, m)->b; }", "op_t"),
    ('static THREAD(feeder(struct pt *p)) { return 1; } int w SECTION(".x"); unsigned char buf[4] ALIGN(4);', "THREAD"),
    ("ISR(TIMER1_vect) { ticks++; } volatile u32 ticks;", "u32"),
    ('int f(void) { port_t v = PORT; asmv("mov %0" : "=r" (v)); return v; }', "port_t"),
    ("END_CASE static err_t g(void) { return 0; } END_CASE Suite *all(void) { return 0; }", "Suite err_t"),
    ("char *EXPORTED name(void) { return 0; } void SETUP(9) start(void) { Py_BEGIN_WAIT go(1); Py_END_WAIT }", ""),
    ("void f(void) { ON_EXIT(goto out;) g(); out: h(); }", ""),
    ("typedef size_t count_t; count_t f(char *p, size_t n) { return (char *) (uptr_t) n - p; }", "size_t uptr_t"),
]


@pytest.mark.parametrize(("text", "types"), MISSING)
def test_missing_headers_are_guessed(text: str, types: str) -> None:
    unit = read(text, complete=False)
    assert not unit.notices
    assert all(place.read for place in unit.functions)
    assert list(unit.inferred_types) == types.split()


@pytest.mark.parametrize("complete", [True, False])
def test_real_products_stay_products(complete: bool) -> None:
    unit = read("int a, b; int f(void) { int c = a * b; c = (a) * b; g(a * b); return c; }", complete)
    assert not unit.inferred_types
    assert shown(unit).count("a * b") == 3


def test_falls_are_marked_by_comment_word_and_attribute(tmp_path: Path) -> None:
    source = tmp_path / "falls.c"
    source.write_text(
        "void f(int a)\n{\n  switch (a) {\n  case 1: g(); /* falls through */\n  case 2: g();\n    // fall-thru\n"
        "  case 3: g(); __attribute__((fallthrough));\n  case 4: g(); FALLTHROUGH;\n  case 5: g(); /* no break */\n"
        '  case 6: h("falls through");\n  case 7: g(); /* the hopper\n     falls into the next state */\n'
        "  default: ;\n  }\n}\n"
    )
    text = f'# 1 "{source}"\n' + source.read_text().replace("FALLTHROUGH", "")
    unit = Reader(tmp_path).read(Preprocessed(Unit(source, tmp_path, "database"), text, {}, True))
    assert {line for _, line in unit.marked_falls} == {4, 6, 7, 8, 9, 12}
    assert {file for file, _ in unit.marked_falls} == {str(source)}


def test_macros_undefined_at_the_end_are_gone() -> None:
    unit = read("#define A 1\n#define B(x) x\n#undef A\n#define B(y, z) z\nint f(void) { return 1; }\n")
    assert "A" not in unit.macros
    assert unit.macros["B"].parameters == ("y", "z")
    assert len(unit.macros) == 1


def test_a_reader_travels_to_another_process() -> None:
    reader = pickle.loads(pickle.dumps(Reader(ROOT)))
    assert [f.name for f in read("int f(void) { return 1; }", reader=reader).functions] == ["f"]


def test_preprocessed_text_from_a_windows_machine(tmp_path: Path) -> None:
    text = '# 1 "C:\\\\feed\\\\auger.c"\n# 1 "C:\\\\tool\\\\include\\\\lib.h" 1 3\nint lib(void) { return 0; }\n'
    text += '# 2 "C:\\\\feed\\\\auger.c" 2\nint f(void) { return lib(); }\n'
    unit = Reader(tmp_path).read(Preprocessed(Unit(tmp_path / "auger.i", tmp_path, "preprocessed"), text, {}, True))
    assert [(f.name, f.file) for f in unit.functions] == [("f", "C:/feed/auger.c")]


PARTS = (
    "int|struct s|T|typedef|enum {A}|f|x|(|)|{|}|[|]|;|,|*|=|1|\"s\"|'c'|return|if|else|while|case|:|?|...|asm|@|#|\n"
    '|__attribute__((x))|typeof(x)|&&|goto|static|unsigned|#define M(a) a|#undef M|# 3 "/barge/b.c"|/*|*/|//|\\\n'
)
C_LIKE = st.lists(st.sampled_from(PARTS.split("|")), max_size=60).map(" ".join)


@settings(max_examples=300, deadline=None)
@given(text=C_LIKE, complete=st.booleans())
def test_no_text_raises(text: str, complete: bool) -> None:
    unit = read(text, complete)
    for notice in unit.notices:
        assert notice.kind in NOTICE_KINDS
        assert "\n" not in notice.text
    for declaration in unit.declarations:
        assert declaration.nodes
        unit.origin(declaration.start)
