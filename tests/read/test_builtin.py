"""The built-in preprocessor: what ISO C asks for, the same as a compiler where one is there, and nothing fatal."""

import re
import shutil
import time
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pycparser import c_parser

from stepring.gather.gather import gather
from stepring.gather.types import Unit
from stepring.read.builtin import STAND_IN, predefined_for, preprocess_builtin
from stepring.read.compiler import preprocess_with_compiler, surroundings_of
from stepring.read.conditions import NoValue, value_of
from stepring.read.macros import tokens_of
from stepring.read.preprocess import preprocess
from stepring.read.types import Preprocessed

GCC = shutil.which("gcc") or ""
needs_gcc = pytest.mark.skipif(not GCC, reason="no gcc on PATH")
TOKEN = re.compile(
    r'(?:u8|[LuU])?"(?:[^"\\\n]|\\.)*"|[LuU]?\'(?:[^\'\\\n]|\\.)*\'|[A-Za-z_]\w*|\.?\d(?:[eEpP][+\-]|[\w.])*'
    r"|<<=|>>=|\.\.\.|->|--|-=|<<|<=|>>|>=|\|\||\|=|&&|&=|==|!=|\^=|\*=|/=|\+\+|\+=|%=|\S"
)


def several(text: str) -> list[str]:
    """The words of a text."""
    return text.split()


def run(folder: Path, text: str | bytes, model: str = "ILP32", **files: str) -> Preprocessed:
    for name, content in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(content)
    source = folder / "feeder.c"
    source.write_bytes(text if isinstance(text, bytes) else text.encode())
    return preprocess_builtin(Unit(source, folder, "source"), predefined_for(model))


def tokens(text: str, *, directives: bool = False) -> list[tuple[str, str, int]]:
    """Each token of a preprocessed text with its file and line."""
    found: list[tuple[str, str, int]] = []
    file, number = "", 0
    for line in text.split("\n"):
        marker = re.match(r'# (\d+) "(.*?)"', line)
        if marker:
            number, file = int(marker[1]), marker[2]
            continue
        if directives or not line.startswith(("#define", "#undef", "#pragma")):
            found.extend((token, file, number) for token in TOKEN.findall(line))
        number += 1
    return found


def words(result: Preprocessed) -> str:
    return " ".join(token for token, file, _ in tokens(result.text) if not file.startswith(str(STAND_IN)))


def kinds(result: Preprocessed) -> list[str]:
    return [notice.kind for notice in result.notices]


# -- macros ----------------------------------------------------------------------------------------------------------

# ISO C N1570 6.10.3.5, EXAMPLES 3, 5 and 7, in their published form: what they have to become.
STANDARD_EXAMPLES = {
    "example 3": (
        """#define x 3
#define f(a) f(x * (a))
#undef x
#define x 2
#define g f
#define z z[0]
#define h g(~
#define m(a) a(w)
#define w 0,1
#define t(a) a
#define p() int
#define q(x) x
#define r(x,y) x ## y
#define str(x) # x
f(y+1) + f(f(z)) % t(t(g)(0) + t)(1);
g(x+(3,4)-w) | h 5) & m
(f)^m(m);
p() i[q()] = { q(1), r(2,3), r(4,), r(,5), r(,) };
char c[2][6] = { str(hello), str() };
""",
        "f(2 * (y+1)) + f(2 * (f(2 * (z[0])))) % f(2 * (0)) + t(1);"
        "f(2 * (2+(3,4)-0,1)) | f(2 * (~ 5)) & f(2 * (0,1))^m(0,1);"
        "int i[] = { 1, 23, 4, 5, };"
        'char c[2][6] = { "hello", "" };',
    ),
    "example 5": (
        """#define t(x,y,z) x ## y ## z
int j[] = { t(1,2,3), t(,4,5), t(6,,7), t(8,9,),
t(10,,), t(,11,), t(,,12), t(,,) };
""",
        "int j[] = { 123, 45, 67, 89, 10, 11, 12, };",
    ),
    "example 7": (
        """#define debug(...) fprintf(stderr, __VA_ARGS__)
#define showlist(...) puts(#__VA_ARGS__)
#define report(test, ...) ((test)?puts(#test): printf(__VA_ARGS__))
debug("Flag");
debug("X = %d\\n", x);
showlist(The first, second, and third items.);
report(x>y, "x is %d but y is %d", x, y);
""",
        'fprintf(stderr, "Flag");'
        'fprintf(stderr, "X = %d\\n", x);'
        'puts("The first, second, and third items.");'
        '((x>y)?puts("x>y"): printf("x is %d but y is %d", x, y));',
    ),
}


@pytest.mark.parametrize("name", STANDARD_EXAMPLES)
def test_the_examples_of_the_standard(tmp_path: Path, name: str) -> None:
    text, expected = STANDARD_EXAMPLES[name]
    result = run(tmp_path, text)
    assert words(result) == " ".join(TOKEN.findall(expected))
    assert result.notices == ()


MACRO_TEXTS = [
    "#define MINUS -1\nint a = -MINUS; int b = 1 -MINUS; int c = x-MINUS;\n",
    "#define P +\nint a = 1 P+ 2;\n",
    "#define A B\n#define B A\nint A, B;\n",
    "#define F(x) G(x)\n#define G(x) F(x)\nint y = F(1);\n",
    "#define OBJ f\n#define f(x) [x]\nOBJ (1) OBJ f OBJ\n(2)\n",
    "#define CALL(f, ...) f(__VA_ARGS__)\n#define ADD(a, b) ((a)+(b))\nint x = CALL(ADD, 1, 2);\n",
    '#define LOG(format, ...) printf(format, ##__VA_ARGS__)\nvoid g(void) { LOG("a"); LOG("b", 1); }\n',
    "#define NAMED(args...) f(args)\nNAMED(1, 2) NAMED()\n",
    "#define CAT(a, b) CAT_(a, b)\n#define CAT_(a, b) a ## b\nint CAT(feed, CAT(_, 1)), CAT(L, 'x'), CAT(1, .5);\n",
    "#define S(x) #x\nchar *a = S( a  \"b\\n\"  'c' d ); char *b = S(F(1)); char *c = S();\n",
    "#define LIST X(1)\n#define X(n) f_ ## n,\nenum { LIST };\n#undef X\n#define X(n) #n,\nchar *t[] = { LIST };\n",
    "#define EMPTY\n#define F(x) x\nint a EMPTY = F EMPTY (1);\nint b = F(EMPTY);\n",
    "#define F(x, y) x y\nint z = F((1, 2), f(3, 4));\n",
    "#define LINE __LINE__\nint a = LINE;\nint b = __LINE__, c =\n LINE;\n",
    "#define F(x) x\nint a = F(\n 1 +\n 2\n); int line = __LINE__;\n",
    "int a = __COUNTER__, b = __COUNTER__;\n",
    "#define f(x) x f\nint a = f(1)(2)(3);\n",
    '#define STR "a" "b"\nchar *s = STR"c"; char t = L\'x\';\n',
    "#define E 1\nint a = 0xE+E; float b = 1.E+E; int c = 1E;\n",
    "#define a b\nint a1, _a, a_, xa, a\n;\n",
    "int x = 1; // note\\\nstill the note\nint y = 2; /* a */ /* b\n c */ int z;\n",
    "#define A 1 /* one\n two */ + 2\nint a = A;\nint b;\n",
    "#define A \\\n 1 \\\n + 2\nint a = A;\nint b\\\nc;\n",
    'char *s = "/* no comment */ // none"; char c = \'"\'; /* " */ int x;\n',
    "#define F(x) x\n#define G F\nint a = G(G)(1);\n",
    "#define NIL(x) x\n#define G_0(arg) NIL(G_1)(arg)\n#define G_1(arg) NIL(arg)\nint a = G_0(42);\n",
    "#if 0\nit's \"not closed\n#else\nint x;\n#endif\n",
    '#pragma pack(1)\n_Pragma("once") int x;\n',
    "#define EACH(m) m(a) m(b)\n#define DECLARE(n) int n;\nEACH(DECLARE)\n",
    "#define defer(x) x\n#define A() 123\nint a = defer(A)();\n",
    "#define SIX 6\n#define F(a) a ## SIX a # a\n#define G(a) a##SIX SIX\nint x = G(7);\n",
]


@needs_gcc
@pytest.mark.parametrize("text", MACRO_TEXTS)
def test_macros_become_the_same_as_with_a_compiler(tmp_path: Path, text: str) -> None:
    """Token for token, each on the same line."""
    result = run(tmp_path, text)
    one = Unit(tmp_path / "feeder.c", tmp_path, "source", (GCC,))
    expected = preprocess_with_compiler(one)
    assert isinstance(expected, Preprocessed)
    ours = [token for token in tokens(result.text) if token[1] == str(one.source)]
    theirs = [token for token in tokens(expected.text) if token[1] == str(one.source)]
    assert [token for token, _, _ in ours] == [token for token, _, _ in theirs]
    first_lines = {line for _, _, line in ours}
    assert first_lines <= set(range(1, text.count("\n") + 1))


NAMES = st.sampled_from(["A", "B", "C", "F", "G", "x", "y"])
PIECES = st.lists(st.sampled_from(several("A B C F G x y ( ) , + - 1 2 ## # F(x) G(1,2) F(A) F(G(B,C))")), max_size=8)


@needs_gcc
@settings(max_examples=60, deadline=None)
@given(
    st.lists(st.tuples(NAMES, PIECES), max_size=4),
    st.lists(st.tuples(st.sampled_from(["F(a)", "G(a,b)"]), PIECES), max_size=3),
    st.lists(st.sampled_from(several("A B C F G x ( ) , F(A) G(A,B) F(F(1)) G(x,F(C)) + ; -A -B")), max_size=12),
)
def test_random_macros_become_the_same_as_with_a_compiler(
    tmp_path_factory: pytest.TempPathFactory,
    objects: list[tuple[str, list[str]]],
    functions: list[tuple[str, list[str]]],
    body: list[str],
) -> None:
    folder = tmp_path_factory.mktemp("macros")
    lines = [f"#define {name} {' '.join(piece for piece in pieces if '#' not in piece)}" for name, pieces in objects]
    defined = {name for name, _ in objects}
    for name, pieces in functions:
        if name[0] not in defined:
            defined.add(name[0])
            plain = [piece for piece in pieces if "#" not in piece]
            lines.append(f"#define {name} {' '.join(plain)} a")
    text = "\n".join(dict.fromkeys(lines)) + "\n" + " ".join(body) + "\n"
    result = run(folder, text)
    one = Unit(folder / "feeder.c", folder, "source", (GCC,))
    expected = preprocess_with_compiler(one)
    if not isinstance(expected, Preprocessed) or not expected.complete or not result.complete or result.notices:
        return
    theirs = [token for token, file, _ in tokens(expected.text) if file == str(one.source)]
    assert words(result) == " ".join(theirs)


# -- conditions ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("1", 1),
        ("0x10 + 010 + 0b11", 27),
        ("1ULL << 63", 1 << 63),
        ("1 << 63", -(1 << 63)),
        ("1 << 99999999999", 0),
        ("-1 >> 99999999999", -1),
        ("0xFFFFFFFFFFFFFFFF == -1", 1),
        ("-1 < 0u", 0),
        ("-1 < 0", 1),
        ("-7 / 2", -3),
        ("-7 % 2", -1),
        ("0 && 1 / 0", 0),
        ("1 || 1 / 0", 1),
        ("1 ? 2 : 1 / 0", 2),
        ("0 ? 1 / 0 : 3", 3),
        ("1 ? -1 : 0u", (1 << 64) - 1),
        ("2 + 3 * 4 - 1", 13),
        ("1 - 2 - 3", -4),
        ("!0 + ~0", 0),
        ("- - 1", 1),
        ("(1, 2)", 2),
        ("'A' == 65 && '\\n' == 10 && '\\0' == 0 && '\\x41' == 65 && '\\101' == 65", 1),
        ("'ab'", 24930),
        ("UNKNOWN", 0),
        ("UNKNOWN(1, (2), 3) + 1", 1),
        ("1 == 1 == 1", 1),
        ("3 & 2 | 4 ^ 4", 2),
        ("1 < 2 < 3", 1),
    ],
)
def test_values_of_conditions(text: str, value: int) -> None:
    assert value_of([token.value for token in tokens_of(text) if not token.value.isspace()]) == value


@pytest.mark.parametrize("text", ["", "1 +", "(1", "1)", "1 / 0", "1 % 0", '"a"', "1 ? 2", "09", "1.5", "1 2", "''"])
def test_conditions_without_a_value(text: str) -> None:
    with pytest.raises(NoValue):
        value_of([token.value for token in tokens_of(text) if not token.value.isspace()])


expressions = st.recursive(
    st.sampled_from(several("0 1 2 7 63 64 255 65536 2147483648 9223372036854775807 1u 5u 18446744073709551615u")),
    lambda inner: (
        st.tuples(inner, st.sampled_from(several("+ - * & | ^ < > <= >= == != && ||")), inner).map(
            lambda parts: "(" + " ".join(parts) + ")"
        )
        | st.tuples(st.sampled_from(several("! ~ -")), inner).map(lambda parts: f"({parts[0]} {parts[1]})")
        | st.tuples(inner, inner, inner).map(lambda parts: f"({parts[0]} ? {parts[1]} : {parts[2]})")
        | st.tuples(inner, st.sampled_from(["<< 1", ">> 3", "<< 63", "/ 3", "% 7", "/ 5u"])).map(
            lambda parts: f"({parts[0]} {parts[1]})"
        )
    ),
    max_leaves=12,
)


@needs_gcc
def test_random_conditions_have_the_value_that_a_compiler_gives(tmp_path: Path) -> None:
    drawn: list[str] = []

    @settings(max_examples=300, database=None)
    @given(expressions)
    def draw(text: str) -> None:
        drawn.append(text)

    draw()
    source = tmp_path / "feeder.c"
    source.write_text("".join(f"#if {text}\nint yes{n};\n#else\nint no{n};\n#endif\n" for n, text in enumerate(drawn)))
    one = Unit(source, tmp_path, "source", (GCC,))
    expected = preprocess_with_compiler(one)
    assert isinstance(expected, Preprocessed)
    theirs = [token for token, file, _ in tokens(expected.text) if file == str(source)]
    assert words(preprocess_builtin(one, predefined_for("LP64"))).split() == theirs
    assert len(drawn) >= 100


def test_conditionals(tmp_path: Path) -> None:
    text = """#if 0
a
#elif 1
b
#elif 1
c
#else
d
#endif
#ifdef NONE
e
#elif defined NONE || !defined(NONE) && UNKNOWN == 0
f
# else
g
#endif
#ifndef NONE
#if 0
h
#if 1
i
#else
j
#endif
#else
k
#endif
#else
l
#endif
#if __has_include("feed.h") && !__has_include(<gone.h>)
m
#endif
"""
    assert words(run(tmp_path, text, **{"feed.h": ""})) == "b f k m"


def test_conditionals_that_do_not_match(tmp_path: Path) -> None:
    result = run(tmp_path, "#endif\n#else\nint a;\n#if 1\nint b;\n#if 1\n#if 0\nint c;\n")
    assert words(result) == "int a ; int b ;"
    assert kinds(result) == ["preprocessor", "preprocessor", "unterminated"]
    assert result.notices[2].line == 4
    assert not result.complete


# -- places ----------------------------------------------------------------------------------------------------------


def test_untouched_text_keeps_its_columns(tmp_path: Path) -> None:
    lines = ["int a;   /* note */ int b;", "\tint c; // é", 'char *s = "é\\"/*"; int d;']
    result = run(tmp_path, "\n".join(lines) + "\n")
    text = result.text.splitlines()
    for line in ("int a;              int b;", "\tint c;", 'char *s = "é\\"/*"; int d;'):
        assert line in text


def test_markers_lead_back(tmp_path: Path) -> None:
    text = '#include "feed.h"\nint a;\n#if 0\n' + "\n" * 20 + '#endif\nint b;\n#line 100 "table.def"\nint c;\n'
    result = run(tmp_path, text, **{"feed.h": "\n\nint f;\n"})
    places = {token: (file, line) for token, file, line in tokens(result.text)}
    source = str(tmp_path / "feeder.c")
    assert places["f"] == (str(tmp_path / "feed.h"), 3)
    assert places["a"] == (source, 2)
    assert places["b"] == (source, 25)
    assert places["c"] == (str(tmp_path / "table.def"), 100)
    assert f'# 1 "{tmp_path}/feed.h" 1\n' in result.text
    assert f'# 2 "{source}" 2\n' in result.text


def test_definitions_stay_in_place(tmp_path: Path) -> None:
    text = "#define PRIME 3 /* first */\n#define F(a, \\\n b) a \\\n + b\nint x = PRIME;\n#undef PRIME\n"
    result = run(tmp_path, text)
    lines = [line for line in result.text.splitlines() if line]
    assert (
        re.sub(r" +", " ", "\n".join(lines[-4:])) == "#define PRIME 3\n#define F(a, b) a + b\nint x = 3;\n#undef PRIME"
    )
    assert tokens(result.text)[0] == ("int", str(tmp_path / "feeder.c"), 5)


# -- files -----------------------------------------------------------------------------------------------------------


def test_guards_and_once(tmp_path: Path) -> None:
    files = {
        "guarded.h": "/* note */\n#ifndef GUARDED_H\n#define GUARDED_H\nint g;\n#endif /* GUARDED_H */\n",
        "tested.h": "#if !defined(TESTED_H)\n#define TESTED_H\nint t;\n#endif\n",
        "once.h": "#pragma once\nint o;\n",
        "plain.h": "int p;\n",
        "half.h": "#ifndef HALF_H\n#define HALF_H\nint h;\n#endif\nint i;\n",
    }
    twice = "".join(f'#include "{name}"\n' for name in files) * 2
    assert words(run(tmp_path, twice, **files)) == "int g ; int t ; int o ; int p ; int h ; int i ; int p ; int i ;"


def test_a_header_by_macro_and_the_next_of_a_name(tmp_path: Path) -> None:
    files = {"first/feed.h": "int one;\n#include_next <feed.h>\n", "second/feed.h": "int two;\n"}
    run(tmp_path, "", **files)
    source = tmp_path / "feeder.c"
    source.write_text('#define NAME <feed.h>\n#include NAME\n#define QUOTED "first/feed.h"\n#include QUOTED\n')
    one = Unit(source, tmp_path, "database", (), (tmp_path / "first", tmp_path / "second"))
    result = preprocess_builtin(one, predefined_for("LP64"))
    # The second time the first folder's header is found beside the source, so the next one is again the first folder's.
    assert words(result).startswith("int one ; int two ; int one ;")


def test_forced_headers_and_defines(tmp_path: Path) -> None:
    run(tmp_path, "", **{"config.h": "int c;\n#define RATE 9\n", "macros.h": "int m;\n#define MORE 8\n"})
    source = tmp_path / "feeder.c"
    source.write_text("int x = RATE + MORE + SIZE + F(2);\n")
    one = Unit(
        source,
        tmp_path,
        "database",
        defines=("SIZE=7", "F(x)=x"),
        included=(tmp_path / "config.h",),
        macro_files=(tmp_path / "macros.h",),
    )
    result = preprocess_builtin(one, predefined_for("LP64"))
    assert words(result) == "int c ; int x = 9 + 8 + 7 + 2 ;"
    assert "#define SIZE 7\n" in result.text
    assert "#define MORE 8\n" in result.text


def test_a_missing_header_is_tolerated_and_said_once(tmp_path: Path) -> None:
    result = run(tmp_path, '#include "gone.h"\n#include <gone.h>\n#include "gone.h"\nint x;\n')
    assert words(result) == "int x ;"
    assert [(notice.kind, notice.level, notice.line) for notice in result.notices] == [("missing-header", "note", 1)]
    assert not result.complete


def test_letter_case_and_backslashes(tmp_path: Path) -> None:
    result = run(tmp_path, '#include "INC\\Feed.H"\n', **{"inc/feed.h": "int feed;\n"})
    assert words(result) == "int feed ;"
    assert result.complete


@pytest.mark.parametrize(
    "files",
    [
        {"a.h": '#include "a.h"\n'},
        {"a.h": '#include "a.h"\n#include "a.h"\n#include "a.h"\n'},
        {"a.h": '#include "b.h"\n#include "b.h"\n', "b.h": '#include "a.h"\n#include "a.h"\n'},
        {"a.h": '#include "feeder.c"\n#include "feeder.c"\n'},
    ],
)
def test_include_cycles_end(tmp_path: Path, files: dict[str, str]) -> None:
    start = time.process_time()
    result = run(tmp_path, '#include "a.h"\nint x;\n', **files)
    assert time.process_time() - start < 10
    assert words(result).endswith("int x ;")
    assert kinds(result) == ["preprocessor"]
    assert "200 levels" in result.notices[0].text


# -- bad input -------------------------------------------------------------------------------------------------------

MEGABYTE = 1 << 20


@pytest.mark.parametrize(
    ("text", "kind"),
    [
        ("int x;\n/* not closed\nint y;\n", "unterminated"),
        ('char *s = "not closed;\nint y;\n', "unterminated"),
        ("#define F(x) x\nint x = F(1;\nint y;\n", "unterminated"),
        ("#define F(x) x\nint x = " + "F(" * MEGABYTE + ";\n", "unterminated"),
        ('#define F(x) x\nint x = F("' + '\\"' * MEGABYTE + ";\n", "unterminated"),
        ("#define D(x) x x\nint x = " + "D(" * 60 + "x" + ")" * 60 + ";\n", "preprocessor"),
        ("".join(f"#define A{n} A{n + 1} A{n + 1}\n" for n in range(60)) + "int A0;\n", "preprocessor"),
        ("".join(f"#define A{n} A{n + 1}\n" for n in range(5000)) + "int A0;\n", "preprocessor"),
        ("#define F(x) x\nint x = " + "F(" * 5000 + "1" + ")" * 5000 + ";\n", "preprocessor"),
        ("#if " + "(" * 50_000 + "1" + ")" * 50_000 + "\nint x;\n#endif\n", "preprocessor"),
        ("#if " + "9" * 100_000 + "\nint x;\n#endif\n", "preprocessor"),
        ("#define\n#define 3\n#define F(\n#define G(a b) a\n#include\n#include <\n#wrong\nint x;\n", "preprocessor"),
        ("#error no hopper\nint x;\n", "preprocessor"),
        ("int x;\0\n", "not-text"),
        ("#if 1\n" * 10_000 + "int x;\n", "unterminated"),
    ],
)
def test_bad_input_gives_a_sentence(tmp_path: Path, text: str, kind: str) -> None:
    start = time.process_time()
    result = run(tmp_path, text)
    assert time.process_time() - start < 30
    assert kind in kinds(result)
    assert not result.complete
    assert all(notice.line is not None for notice in result.notices if notice.kind in ("unterminated", "preprocessor"))


@pytest.mark.parametrize(
    "text",
    [
        "int x = 1" + " + 1" * (10 * MEGABYTE // 4) + ";\n",
        "int x = " + '"' * (10 * MEGABYTE) + ";\n",
        "#if 1\n" * 10_000 + "int x;\n" + "#endif\n" * 10_000,
        "#if 0\n" * 10_000 + "int x;\n" + "#endif\n" * 10_000,
        " " * (10 * MEGABYTE) + "x\n",
        "\n" * MEGABYTE + "int x;\n",
        "/*" * MEGABYTE + "*/ int x;\n",
        "int x\\\n" * 100_000 + ";\n",
        "",
    ],
)
def test_large_and_deep_input_is_read_in_time(tmp_path: Path, text: str) -> None:
    start = time.process_time()
    run(tmp_path, text)
    assert time.process_time() - start < 30


def test_the_time_limit_keeps_what_is_there(tmp_path: Path) -> None:
    bomb = "".join(f"#define A{n} A{n + 1} A{n + 1}\n" for n in range(16)) + "#define A16 x\n"
    text = "int first;\n" + bomb + "".join(f"#define B{n} A0\nint B{n};\n" for n in range(10_000))
    source = tmp_path / "feeder.c"
    source.write_text(text)
    result = preprocess_builtin(Unit(source, tmp_path, "source"), predefined_for("LP64"), time_limit=1.0)
    assert "int first ;" in words(result)
    assert not result.complete
    assert "too long" in result.notices[-1].text or "is over" in result.notices[-1].text


def test_old_encodings(tmp_path: Path) -> None:
    result = run(tmp_path, 'char *a = "\xe9"; int after;\n'.encode("latin-1"))
    assert 'char *a = "é"; int after;' in result.text
    assert run(tmp_path, b"\xef\xbb\xbf#define A 1\r\nint a = A;\r\n").text.endswith("#define A 1\nint a = 1;\n")


def test_a_source_that_is_gone(tmp_path: Path) -> None:
    result = preprocess(Unit(tmp_path / "gone.c", tmp_path, "source"), data_model="LP64")
    assert not result.complete
    assert kinds(result) == ["missing-header"]


STRANGE_PIECES = """#if #ifdef #else #elif #endif #define #undef #include #line # \\ " ' ( ) , A B F F(x) /* */ // 1
    1.5e+ defined ## ... __VA_ARGS__ "a.h" <a.h> __LINE__ \u00e9 ; { } ?: << u8 L"""


@settings(max_examples=200, deadline=None)
@given(
    st.lists(st.sampled_from([*several(STRANGE_PIECES), "\n", "\n", " "]), max_size=40),
)
def test_nothing_raises(tmp_path_factory: pytest.TempPathFactory, pieces: list[str]) -> None:
    result = run(tmp_path_factory.getbasetemp(), " ".join(pieces).replace(" \n ", "\n"))
    assert isinstance(result.text, str)


# -- the stand-in library --------------------------------------------------------------------------------------------


HEADERS = sorted(path.relative_to(STAND_IN).as_posix() for path in STAND_IN.rglob("*.h"))


@pytest.mark.parametrize("model", ["LP64", "LLP64", "ILP32", "IP16"])
@pytest.mark.parametrize("header", HEADERS)
def test_a_stand_in_header_stands_alone(tmp_path: Path, header: str, model: str) -> None:
    result = run(tmp_path, f"#include <{header}>\n#include <{header}>\nint x;\n", model)
    assert result.notices == ()
    assert words(result) == "int x ;"


@needs_gcc
@pytest.mark.parametrize("header", HEADERS)
def test_a_stand_in_header_is_c(tmp_path: Path, header: str) -> None:
    """A compiler takes it, read twice, with nothing but the stand-in library."""
    import subprocess

    source = tmp_path / "feeder.c"
    source.write_text(f"#include <{header}>\n#include <{header}>\nint x;\n")
    command = [GCC, "-std=gnu11", "-ffreestanding", "-fno-builtin", "-nostdinc", "-fsyntax-only", "-w"]
    done = subprocess.run([*command, "-I", str(STAND_IN), str(source)], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


def test_an_interrupt_function_keeps_its_vector_and_its_attribute(tmp_path: Path) -> None:
    result = run(tmp_path, "#include <avr/interrupt.h>\nISR(TIMER1_COMPA_vect) { PORTB |= _BV(PB5); }\n", "IP16")
    assert "void TIMER1_COMPA_vect ( void ) __attribute__ ( ( signal" in words(result)
    assert words(result).endswith("void TIMER1_COMPA_vect ( void ) { PORTB |= ( 1 << ( 5 ) ) ; }")


@pytest.mark.parametrize(
    ("model", "sizes"),
    [("LP64", "4 8 8 8"), ("LLP64", "4 4 8 8"), ("ILP32", "4 4 4 8"), ("IP16", "2 4 2 4")],
)
def test_data_models(tmp_path: Path, model: str, sizes: str) -> None:
    macros = predefined_for(model)
    names = ("INT", "LONG", "POINTER", "DOUBLE")
    assert " ".join(macros[f"__SIZEOF_{name}__"] for name in names) == sizes
    text = """#include <limits.h>
#include <stdint.h>
#if INT_MAX == 32767 && UINT_MAX != 65535u || INT_MAX != 32767 && UINT_MAX != 4294967295u
wrong
#endif
#if LONG_MAX != INTPTR_MAX && __SIZEOF_LONG__ == __SIZEOF_POINTER__ || SIZE_MAX != UINTPTR_MAX
wrong
#endif
#if INT16_MAX != 32767 || UINT16_MAX != 65535u || INT32_MIN != -2147483647 - 1 || UINT64_MAX != 18446744073709551615u
wrong
#endif
#if UINT32_C(4294967295) != 4294967295 || LONG_MIN >= 0 || ULONG_MAX <= 0 || USHRT_MAX != 65535
wrong
#endif
"""
    result = run(tmp_path, text, model)
    assert words(result) == ""
    assert result.complete


def test_plain_c_can_be_parsed(tmp_path: Path) -> None:
    """Text without dialect goes to pycparser as it is, markers included."""
    text = """#include <stdint.h>
#include <stdbool.h>
#define SLOTS 8
static uint8_t slots[SLOTS];
bool put(uint8_t value) { slots[value % SLOTS] = value; return true; }
"""
    result = run(tmp_path, text)
    plain = re.sub(r"^#(?:define|undef).*", "", result.text, flags=re.MULTILINE)
    tree = c_parser.CParser().parse(plain)
    function = tree.ext[-1]
    assert (function.decl.name, function.decl.coord.line) == ("put", 5)


@needs_gcc
def test_a_whole_unit_becomes_the_same_as_with_its_compiler(tmp_path: Path) -> None:
    """All of the system's library headers, token for token: the largest macros there are on this machine."""
    names = several("stdio stdlib string stdint inttypes limits errno ctype math time signal setjmp stdarg locale")
    source = tmp_path / "feeder.c"
    source.write_text("".join(f"#include <{name}.h>\n" for name in names) + "uint32_t most = UINT32_MAX;\n")
    unit = gather([source], compilers=[GCC]).units[0]
    expected, around = preprocess_with_compiler(unit), surroundings_of(unit)
    assert isinstance(expected, Preprocessed) and around is not None
    result = preprocess_builtin(unit, around.predefined, system_folders=around.folders)
    theirs = [token for token, _, _ in tokens(expected.text)]
    assert len(theirs) > 1000
    assert [token for token, _, _ in tokens(result.text)] == theirs
    assert result.complete
