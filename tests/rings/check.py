"""Compares what the inspection says of each ring program with what running it showed, and prints the table.

``python -m tests.rings.check COUNT [FIRST]`` makes, runs and inspects that many programs. A ``pass`` is wrong where the
run breaks it, a ``fail`` where the run never misbehaves; what misbehaves without a finding is a miss, counted by slip.
"""

import argparse
import sys
import tempfile
import time
from collections import Counter
from collections.abc import Iterable, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from pathlib import Path

from tests.rings.programs import Made, make
from tests.rings.truth import Event, Truth, program_folder, run_all

from stepring.pipeline import Options, inspect
from stepring.rule import Obligation

MODEL = "LP64"
"""The host's data model: the truth comes from the host."""

BOUNDS = {"RB01": "past", "RB02": "below"}
IDEAL = {
    "RB08": frozenset({"room"}),
    "RB09": frozenset({"data"}),
    "RB10": frozenset({"count", "room told", "empty", "full"}),
    "RB11": frozenset({"room", "refused", "data", "withheld", "value"}),
    "RB12": frozenset({"sample", "total"}),
}


@dataclass(frozen=True, slots=True)
class Compared:
    """One program's comparison. ``wrong_passes``, ``wrong_errors``, ``wrong_warnings`` and ``unshown`` (an error on a
    bad access where the run showed none) hold a line each; ``opens`` are (rule, reason)."""

    number: int
    slip: str
    verdict: str
    found: bool
    noted: bool
    events: frozenset[str]
    wrong_passes: tuple[str, ...]
    doubtful_passes: tuple[str, ...]
    wrong_errors: tuple[str, ...]
    wrong_warnings: tuple[str, ...]
    unshown: tuple[str, ...]
    notices: tuple[str, ...]
    kinds: Counter[str]
    opens: tuple[tuple[str, str], ...]
    errors: int
    proved_by_run: int
    seconds: float
    rings: int
    rules: tuple[str, ...] = ()
    # For each line with a bad access and no finding: what is said of it instead.
    silent: tuple[str, ...] = ()


def compare(made: Made, truth: Truth, folder: Path) -> Compared:
    """Inspect one program alone and compare."""
    begun = time.perf_counter()
    outcome = inspect([folder], Options(data_model=MODEL))
    seconds = time.perf_counter() - begun
    ring = [item for item in outcome.obligations if item.rule.startswith("RB")]
    failed = [item for item in outcome.obligations if item.kind == "fail" and item.level != "note"]
    errors = [item for item in failed if item.level == "error"]
    warnings = [item for item in failed if item.level == "warning"]
    return Compared(
        made.number,
        made.plan.slip,
        truth.verdict,
        bool(failed),
        any(item.kind == "fail" and item.level == "note" for item in outcome.obligations),
        truth.kinds(),
        tuple(_wrong_passes(made, truth, ring)),
        tuple(_doubtful_passes(made, truth, ring)),
        tuple(map(_shown, errors)) if truth.verdict != "broken" else (),
        tuple(map(_shown, warnings)) if truth.verdict == "clean" else (),
        tuple(_shown(item) for item in errors if truth.verdict == "broken" and not _was_shown(item, truth)),
        tuple(notice.text for notice in outcome.notices),
        Counter(item.kind for item in ring),
        tuple((item.rule, item.open_as or item.reason or "no reason") for item in ring if item.kind == "open"),
        len(errors),
        sum(item.evidence is not None for item in errors),
        seconds,
        len(outcome.program.rings),
        tuple(sorted({item.rule for item in failed})),
        tuple(_silent(truth, ring, len(outcome.program.rings))) if not failed else (),
    )


def _silent(truth: Truth, ring: Sequence[Obligation], rings: int) -> Iterable[str]:
    """What is said of the lines where accesses go wrong in a program without findings."""
    for line in sorted(truth.lines(*BOUNDS.values(), "outside")):
        here = [item for item in ring if item.where.line == line and item.rule in BOUNDS]
        opens = sorted({f"open: {item.open_as or item.reason}" for item in here if item.kind == "open"})
        if opens:
            yield opens[0]
        elif here:
            yield "passes"
        else:
            yield "no obligation there" if rings else "no ring found"


def _shown(item: Obligation) -> str:
    return f"{item.rule} line {item.where.line} {item.function}: {item.what}"


def _was_shown(item: Obligation, truth: Truth) -> bool:
    """Whether the run showed what an error on an access says."""
    if item.rule not in BOUNDS:
        return True
    places = {item.where.line, *(other.where.line for other in item.related)}
    return bool(places & truth.lines("past", "below", "outside"))


def _wrong_passes(made: Made, truth: Truth, ring: Sequence[Obligation]) -> Iterable[str]:
    kinds: dict[tuple[str, int], set[str]] = {}
    for item in ring:
        kinds.setdefault((item.rule, item.where.line), set()).add(item.kind)

    def passed(rule: str, line: int) -> bool:
        return kinds.get((rule, line)) == {"pass"}

    for rule, kind in BOUNDS.items():
        for line in sorted(truth.lines(kind)):
            # 255 may be called past the end or below zero; one finding on the access is enough
            if passed(rule, line) and not any("fail" in kinds.get((other, line), ()) for other in BOUNDS):
                yield f"{rule} passes on line {line}, where an access goes {kind}"
    for line in sorted(truth.lines("outside")):
        if passed("RB01", line) and passed("RB02", line):
            yield f"RB01 and RB02 pass on line {line}, where an access goes outside"
    if any(item.rule == "RB04" and item.kind == "fail" for item in ring):
        return  # the sequence breaks at the counter's overflow, and that is said
    for event in truth.events:
        if event.kind != "slots" or not _misstep(event, made.plan.direction):
            continue
        functions = made.functions.get(event.operation, frozenset())
        lines = {line for line, index, name in made.moves if index == event.place and name in functions}
        for line in sorted(lines):
            if passed("RB03", line):
                yield (
                    f"RB03 passes on line {line}, where {event.operation} moves the {event.place} from slot "
                    f"{event.numbers[0]} to {event.numbers[1]} instead of {event.numbers[2]}"
                )


def _misstep(event: Event, direction: int) -> bool:
    """Whether an advance went to a wrong slot; one that is made, or left out, at the wrong time is none."""
    before, after, _ = event.numbers
    if event.operation in ("put", "get"):
        return after not in (before, (before + direction) % event.slots)
    return True


def _doubtful_passes(made: Made, truth: Truth, ring: Sequence[Obligation]) -> Iterable[str]:
    """Passes on agreement with the ideal where the run disagrees in the very function."""
    for rule, wanted in IDEAL.items():
        for event in truth.events:
            if event.kind not in wanted:
                continue
            functions = made.functions.get(event.operation, frozenset())
            if any(item.rule == rule and item.kind == "pass" and item.function in functions for item in ring):
                yield f"{rule} passes on {event.operation}, where the run shows: {event.kind} {event.numbers}"


# ------------------------------------------------------------------------------------------------------ many programs


def compare_all(numbers: Sequence[int], folder: Path, jobs: int = 2) -> list[Compared]:
    """Make, run, inspect and compare."""
    made = [make(number) for number in numbers]
    truths = run_all(made, folder, jobs)
    work = [(number, truths[number], str(program_folder(folder, at, number))) for at, number in enumerate(numbers)]
    with ProcessPoolExecutor(jobs) as pool:
        return list(pool.map(_one, work, chunksize=4))


def _one(work: tuple[int, Truth, str]) -> Compared:
    number, truth, folder = work
    return compare(make(number), truth, Path(folder))


def table(found: Sequence[Compared]) -> str:
    """The figures, as text."""
    broken = [item for item in found if item.verdict == "broken"]
    missed = [item for item in broken if not item.found]
    kinds: Counter[str] = sum((item.kinds for item in found), Counter())
    total = sum(kinds.values())
    opens = Counter(pair for item in found for pair in item.opens)
    reasons: Counter[str] = Counter()
    for (_, reason), count in opens.items():
        reasons[reason] += count
    lines = [
        f"programs {len(found)}: clean {sum(i.verdict == 'clean' for i in found)}, "
        f"odd {sum(i.verdict == 'odd' for i in found)}, broken {len(broken)}",
        f"no ring found in {sum(item.rings == 0 for item in found)}; notices in {sum(bool(i.notices) for i in found)}",
        f"broken and found {len(broken) - len(missed)}, missed {len(missed)} "
        f"(of these with a note {sum(item.noted for item in missed)})",
        f"wrong passes {sum(len(item.wrong_passes) for item in found)} in "
        f"{sum(bool(item.wrong_passes) for item in found)} programs; doubtful passes on the ideal "
        f"{sum(bool(item.doubtful_passes) for item in found)} programs",
        f"wrong errors in {sum(bool(item.wrong_errors) for item in found)} programs, wrong warnings in "
        f"{sum(bool(item.wrong_warnings) for item in found)}, errors the run did not show in "
        f"{sum(bool(item.unshown) for item in found)}",
        f"errors {sum(item.errors for item in found)}, with evidence {sum(item.proved_by_run for item in found)}",
        f"RB obligations {total}: " + ", ".join(f"{kind} {count}" for kind, count in sorted(kinds.items())),
        f"open share {100 * kinds['open'] / max(1, total):.1f} %",
        *(f"    {count:5}  {reason}" for reason, count in reasons.most_common(20)),
        f"seconds per inspection: mean {sum(i.seconds for i in found) / len(found):.3f}, "
        f"longest {max(i.seconds for i in found):.2f}",
        "missed by slip (missed of broken):",
    ]
    slips = Counter(item.slip for item in broken)
    gone = Counter(item.slip for item in missed)
    lines += [f"    {gone[slip]:4} of {slips[slip]:4}  {slip}" for slip in sorted(slips, key=lambda s: -gone[s])]
    lines.append("missed by what the run shows:")
    shows = Counter(min_kind(item.events) for item in missed)
    all_shows = Counter(min_kind(item.events) for item in broken)
    lines += [f"    {shows[kind]:4} of {count:4}  {kind}" for kind, count in all_shows.most_common()]
    silent = Counter(text for item in missed for text in item.silent)
    lines.append("missed lines with a bad access, by what is said of them:")
    lines += [f"    {count:5}  {text}" for text, count in silent.most_common()]
    return "\n".join(lines)


def min_kind(kinds: frozenset[str]) -> str:
    """The gravest of the events."""
    order = (
        *("past", "below", "outside", "undefined", "endless", "value", "sample", "room", "data", "withheld", "refused"),
        *("count", "room told", "total", "empty", "full", "slots"),
    )
    return next((kind for kind in order if kind in kinds), "-")


def main() -> None:
    """The command line."""
    parser = argparse.ArgumentParser(description="Compare the inspection of ring programs with what they do.")
    parser.add_argument("count", type=int)
    parser.add_argument("first", type=int, nargs="?", default=0)
    parser.add_argument("--jobs", type=int, default=2)
    parser.add_argument("--keep", type=Path, help="a folder for the programs")
    chosen = parser.parse_args()
    numbers = range(chosen.first, chosen.first + chosen.count)
    with tempfile.TemporaryDirectory() as scratch:
        found = compare_all(numbers, chosen.keep or Path(scratch), chosen.jobs)
    sys.stdout.write(table(found) + "\n")
    for item in found:
        for label in ("wrong_passes", "doubtful_passes", "wrong_errors", "wrong_warnings", "unshown", "notices"):
            for text in getattr(item, label):
                sys.stdout.write(f"{item.number}\t{item.slip}\t{item.verdict}\t{label}\t{text}\n")
    for item in found:
        if item.verdict == "broken" and not item.found:
            sys.stdout.write(f"{item.number}\t{item.slip}\tmissed\t{sorted(item.events)}\n")


if __name__ == "__main__":
    main()
