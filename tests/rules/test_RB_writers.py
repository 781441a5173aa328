"""A ring's verdicts rest on having seen every store into its indices: what was not seen makes them open, never pass."""

from collections import Counter
from pathlib import Path

import pytest

from stepring.pipeline import Options, inspect
from stepring.rule import Obligation

HEADER = """
struct pellets { unsigned char weight[6]; unsigned char head; unsigned char tail; };
extern struct pellets pellets;
void pellets_put(struct pellets *p, unsigned char grams);
int pellets_get(struct pellets *p);
"""
RING = """
#include "pellets.h"
struct pellets pellets;
void pellets_put(struct pellets *p, unsigned char grams) {
    unsigned char next = p->head + 1;
    if (next >= 6) next = 0;
    if (next != p->tail) { p->weight[p->head] = grams; p->head = next; }
}
int pellets_get(struct pellets *p) {
    int grams;
    if (p->head == p->tail) return -1;
    grams = p->weight[p->tail];
    p->tail = p->tail + 1;
    if (p->tail >= 6) p->tail = 0;
    return grams;
}
"""
OWN = """
static unsigned char weight[6];
static unsigned char head;
void weight_put(unsigned char grams) {
    weight[head] = grams;
    head = head + 1;
    if (head >= 6) head = 0;
}
"""
CALLER = '#include "pellets.h"\nint feeder_step(void) { pellets_put(&pellets, 3); return pellets_get(&pellets); }\n'
RESTS = ("RB01", "RB02", "RB03")


def judged(folder: Path, files: dict[str, str], named: str | None = None) -> list[Obligation]:
    """What the rules that rest on stores say of a folder, or of one file of it."""
    for name, text in files.items():
        (folder / name).write_text(text)
    outcome = inspect([folder / named if named else folder], Options(use_compiler=False))
    assert not [notice.text for notice in outcome.notices if notice.kind == "internal"]
    return [item for item in outcome.obligations if item.rule in RESTS]


def kinds(obligations: list[Obligation]) -> set[str]:
    return set(Counter(item.kind for item in obligations))


def test_a_whole_program_passes(tmp_path: Path) -> None:
    found = judged(tmp_path, {"pellets.h": HEADER, "pellets.c": RING, "feeder.c": CALLER})
    assert {item.rule for item in found} == set(RESTS)
    assert kinds(found) == {"pass"}


@pytest.mark.parametrize(
    "body",
    [
        "void skip(unsigned char slot) { pellets.head = slot; }",
        "unsigned char ask(void); void skip(void) { pellets.head = ask(); }",
        "void fill(unsigned char *); void skip(void) { fill(&pellets.tail); }",
        "static unsigned char *kept; void skip(void) { kept = &pellets.tail; }",
        "void skip(const struct pellets *other) { pellets = *other; }",
        "void *memcpy(void *, const void *, unsigned); void skip(const void *from) "
        "{ memcpy(&pellets, from, sizeof pellets); }",
        "struct barge { int id; struct pellets pellets; }; struct barge barge; "
        "void skip(const struct barge *other) { barge = *other; }",
    ],
)
def test_another_unit_stores_into_an_index(tmp_path: Path, body: str) -> None:
    other = f'#include "pellets.h"\n{body}\n'
    found = judged(tmp_path, {"pellets.h": HEADER, "pellets.c": RING, "skip.c": other})
    assert found
    assert "pass" not in kinds(found)
    assert any("skip" in item.reason for item in found if item.kind == "open") or "fail" in kinds(found)


def test_a_constant_stored_elsewhere_spoils_its_own_index_only(tmp_path: Path) -> None:
    other = '#include "pellets.h"\nvoid skip(void) { pellets.head = 9; }\n'
    found = judged(tmp_path, {"pellets.h": HEADER, "pellets.c": RING, "skip.c": other})
    lines = RING.splitlines()
    with_head = [item for item in found if "p->head] =" in lines[item.where.line - 1]]
    with_tail = [item for item in found if "p->weight[p->tail]" in lines[item.where.line - 1]]
    assert kinds(with_head) == {"open"}
    assert kinds(with_tail) == {"pass"}  # whatever head is, every function keeps tail < 6


@pytest.mark.parametrize(
    "body",
    [
        "void *memset(void *, int, unsigned); void clear(void) { memset(&pellets, 0, sizeof pellets); }",
        "int level(void) { return pellets.head - pellets.tail; }",
        "struct hatch { int head; }; struct hatch hatch; void shut(int at) { hatch.head = at; }",
        "void local(void) { struct pellets mine; mine.head = 77; mine.tail = mine.head; }",
    ],
)
def test_what_stores_nothing_new_changes_nothing(tmp_path: Path, body: str) -> None:
    other = f'#include "pellets.h"\n{body}\n'
    found = judged(tmp_path, {"pellets.h": HEADER, "pellets.c": RING, "other.c": other})
    assert kinds(found) == {"pass"}


def test_one_named_file_of_a_shared_ring(tmp_path: Path) -> None:
    found = judged(tmp_path, {"pellets.h": HEADER, "pellets.c": RING}, "pellets.c")
    assert kinds(found) == {"open"}
    assert all("only some files" in item.reason for item in found)


def test_one_named_file_of_its_own_ring(tmp_path: Path) -> None:
    assert kinds(judged(tmp_path, {"weight.c": OWN}, "weight.c")) == {"pass"}


def test_a_function_that_was_not_read(tmp_path: Path) -> None:
    lost = "\nvoid weight_odd(void) { head = = 3 $ ; }\n"
    found = judged(tmp_path, {"weight.c": OWN + lost})
    assert kinds(found) == {"open"}
    assert all("weight_odd was not read" in item.reason for item in found)


def test_findings_stay(tmp_path: Path) -> None:
    wrong = RING.replace(">= 6", "> 6")
    whole = judged(tmp_path, {"pellets.h": HEADER, "pellets.c": wrong})
    one = judged(tmp_path, {"pellets.h": HEADER, "pellets.c": wrong}, "pellets.c")
    fails = [[(item.rule, item.where, item.what) for item in some if item.kind == "fail"] for some in (whole, one)]
    assert fails[0]
    assert fails[0] == fails[1]


def test_two_jobs_say_the_same(tmp_path: Path) -> None:
    other = '#include "pellets.h"\nvoid skip(unsigned char slot) { pellets.head = slot; }\n'
    one = judged(tmp_path, {"pellets.h": HEADER, "pellets.c": RING, "skip.c": other})
    two = [item for item in inspect([tmp_path], Options(use_compiler=False, jobs=2)).obligations if item.rule in RESTS]
    assert one == two


def test_a_static_function_with_a_caller_that_is_not_run(tmp_path: Path) -> None:
    """The kept caller keeps the slot inside; one that is too large to be kept may not."""
    many = "".join(f"if (slot == {number}) other += {number};\n" for number in range(220))
    text = """
static unsigned char weight[6];
static unsigned char head;
static void put(unsigned char next, unsigned char grams) { weight[head] = grams; head = next; }
void weight_put(unsigned char grams) {
    unsigned char next = head + 1;
    if (next >= 6) next = 0;
    put(next, grams);
}
void weight_add(unsigned char grams) {
    weight[head] = grams;
    head = head + 1;
    if (head >= 6) head = 0;
}
"""
    assert "pass" in kinds(judged(tmp_path, {"weight.c": text}))
    large = f"int other;\nvoid weigh_all(unsigned char slot) {{\n{many} put(slot, 1); }}\n"
    found = judged(tmp_path, {"weight.c": text + large})
    assert "pass" not in kinds(found)
    assert any("weigh_all calls put too" in item.reason for item in found)
