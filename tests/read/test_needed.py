"""The closure: what the project's own code needs of a unit, and nothing else."""

from pathlib import Path

from stepring.read.carve import carve
from stepring.read.kept import Kept
from stepring.read.needed import Ownership, file_scope, needed_chunks, own_chunks

UNIT = """\
# 1 "/barge/auger.c"
# 1 "/usr/include/lib.h" 1 3
typedef unsigned char u8;
typedef u8 level_t;
typedef long unused_t;
struct hidden { unused_t x; };
struct hopper;
struct hopper { level_t level; enum gate { SHUT, OPEN } gate; };
extern int probe(struct hopper *h);
extern int never(void);
enum { LIMIT = 8, OTHER };
static inline int helper(void) { return OTHER; }
static inline int lonely(void) { return 1; }
#pragma pack(1)
# 2 "/barge/auger.c" 2
# 1 "/barge/auger.h" 1
extern int shared;
int declared_only(void);
static inline int in_header(void) { return shared; }
# 3 "/barge/auger.c" 2
static struct hopper main_hopper;
int run(void)
{
  return probe(&main_hopper) + helper() < LIMIT;
}
#pragma vector=4
"""


def names(text: str, root: str, foreign: bool = False) -> set[str]:
    pieces = carve(text, "/barge/auger.c", Kept(1 << 20))
    own = own_chunks(pieces, Ownership(Path(root)), foreign)
    chunks = needed_chunks(pieces, file_scope(pieces), own)
    places = [(chunk.file, chunk.line) for chunk in chunks]
    assert len(places) == len(set(places))
    return {name for chunk in chunks for name in (*chunk.names, *chunk.typedefs, *chunk.tags) or (chunk.text.strip(),)}


def test_what_own_definitions_mention_is_kept_and_nothing_else() -> None:
    assert names(UNIT, "/barge") == {
        "u8", "level_t", "hopper", "gate", "SHUT", "OPEN", "probe", "LIMIT", "OTHER", "helper", "shared", "in_header",
        "main_hopper", "run", "#pragma pack(1)", "#pragma vector=4",
    }  # fmt: skip


def test_a_folder_whose_name_only_begins_alike_is_not_the_root() -> None:
    assert names(UNIT, "/bar") == {"#pragma pack(1)"}


def test_preprocessed_text_from_elsewhere_owns_what_is_no_system_header() -> None:
    assert "run" in names(UNIT, "/somewhere/else", foreign=True)
    assert "lonely" not in names(UNIT, "/somewhere/else", foreign=True)


def test_members_do_not_pull_in_functions_of_their_name() -> None:
    text = "struct s { int a; };\nint read(int);\nint f(struct s *p, struct s q) { return p->read + q.read; }\n"
    assert "read" not in names(f'# 1 "/barge/a.c"\n{text}', "/barge")


def test_every_declaration_of_a_name_is_kept() -> None:
    header = '# 1 "/usr/x.h" 1\nint f(int);\nint f(int) __attribute__((pure));\n'
    text = header + '# 1 "/barge/a.c" 2\nint g(void) { return f(1); }\n'
    pieces = carve(text, "/barge/a.c", Kept(1 << 20))
    own = own_chunks(pieces, Ownership(Path("/barge")), False)
    assert [chunk.line for chunk in needed_chunks(pieces, file_scope(pieces), own)] == [1, 2, 1]
