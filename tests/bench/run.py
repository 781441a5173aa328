"""What an inspection costs, against plainly parsing the same units: ``python tests/bench/run.py DATABASE…``.

For each compile database, in one run: (a) the whole inspection with one job and no cache, from the command's inputs to
the log's bytes; (b) parsing the same units, preprocessed and turned into ISO C by the same code, one by one with
pycparser and nothing else; (c) the inspection without runs and proofs (``--no-proofs``). The ratio (a)/(b) below 1
means that an inspection costs less than parsing every unit; (a)/(c) is what evidence costs. Then the share of each
stage in (a), and how the time grows: all units against the mean of two halves (every second unit), of which they
should take at most twice the time.

All times are CPU seconds of the process and of the programs it runs (compilers as preprocessors), because other work on
the machine lengthens the clock's. Each measurement has a process of its own, so that none finds what another kept.
"""

import argparse
import json
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

STAGES = ("gather", "preprocess", "read", "meaning", "machines", "rings", "runs", "proofs", "rules", "report", "other")


def cpu() -> float:
    """CPU seconds of this process and of its children that have ended."""
    children = resource.getrusage(resource.RUSAGE_CHILDREN)
    return time.process_time() + children.ru_utime + children.ru_stime


class Clock:
    """CPU seconds by stage; a stage inside another counts for itself only."""

    def __init__(self) -> None:
        self.seconds = dict.fromkeys(STAGES, 0.0)
        self.open: list[str] = ["other"]
        self.since = cpu()

    def _settle(self) -> None:
        now = cpu()
        self.seconds[self.open[-1]] += now - self.since
        self.since = now

    @contextmanager
    def stage(self, name: str) -> Iterator[None]:
        self._settle()
        self.open.append(name)
        try:
            yield
        finally:
            self._settle()
            self.open.pop()

    def watch(self, holder: Any, attribute: str, stage: str) -> None:
        """Count what a function of a module or class takes for a stage."""
        inner: Callable[..., Any] = getattr(holder, attribute)

        def watched(*given: Any, **named: Any) -> Any:
            with self.stage(stage):
                return inner(*given, **named)

        setattr(holder, attribute, watched)

    def total(self) -> float:
        self._settle()
        return sum(self.seconds.values())


def inspect(database: Path, proofs: bool = True) -> dict[str, Any]:
    """(a): the whole inspection, with its stages."""
    from stepring import pipeline
    from stepring.read.reader import Reader
    from stepring.report.sarif import sarif_log
    from stepring.report.serialise import to_bytes
    from stepring.shapes import ring_evidence

    clock = Clock()
    clock.watch(pipeline, "gather", "gather")
    clock.watch(pipeline, "preprocess", "preprocess")
    clock.watch(Reader, "read", "read")
    clock.watch(pipeline, "lower_unit", "meaning")
    clock.watch(pipeline, "state_facts", "machines")
    clock.watch(pipeline, "find_machines", "machines")
    clock.watch(pipeline, "ring_functions", "rings")
    clock.watch(pipeline, "merge_rings", "rings")
    clock.watch(ring_evidence, "with_runs", "runs")
    clock.watch(ring_evidence, "aside", "proofs")
    clock.watch(pipeline, "judge", "rules")
    outcome = pipeline.inspect([], pipeline.Options(compile_commands=database, jobs=1, proofs=proofs))
    with clock.stage("report"):
        size = len(to_bytes(sarif_log(outcome, ("fail",), 0)))
    return {
        "seconds": clock.total(),
        "stages": clock.seconds,
        "units": outcome.coverage.units_total,
        "functions": [outcome.coverage.functions_read, outcome.coverage.functions_total],
        "machines": len(outcome.program.machines),
        "rings": len(outcome.program.rings),
        "log": size,
    }


def inspect_without(database: Path) -> dict[str, Any]:
    """(c): the inspection without runs and proofs."""
    return inspect(database, proofs=False)


def parse(database: Path) -> dict[str, Any]:
    """(b): the same units, each parsed whole."""
    from pycparser.c_parser import CParser, ParseError

    from stepring.gather.gather import gather
    from stepring.pipeline import DEFAULT_MODEL
    from stepring.read.dialect import clean_whole_unit
    from stepring.read.preprocess import preprocess

    sys.setrecursionlimit(20_000)
    spent = {"preprocess": 0.0, "clean": 0.0, "parse": 0.0}
    size = refused = 0
    units = gather([], database=database).units
    for unit in units:
        start = cpu()
        text = preprocess(unit, data_model=unit.data_model or DEFAULT_MODEL).text
        preprocessed = cpu()
        cleaned = clean_whole_unit(text)
        ready = cpu()
        try:
            CParser().parse(cleaned, str(unit.source))
        except (ParseError, AssertionError, AttributeError, TypeError):
            refused += 1
        done = cpu()
        spent["preprocess"] += preprocessed - start
        spent["clean"] += ready - preprocessed
        spent["parse"] += done - ready
        size += len(cleaned)
    return {"seconds": spent["parse"], "spent": spent, "units": len(units), "refused": refused, "characters": size}


def measured(what: str, database: Path) -> dict[str, Any]:
    """One measurement in a process of its own."""
    command = [sys.executable, str(Path(__file__).resolve()), "--only", what, str(database)]
    ended = subprocess.run(command, capture_output=True, text=True, check=True)
    found: dict[str, Any] = json.loads(ended.stdout.splitlines()[-1])
    return found


def half_of(database: Path, folder: Path, first: int) -> Path:
    """A database of every second entry from the first (0) or second (1) on, with the folders of the original."""
    entries = json.loads(database.read_text(encoding="utf-8"))
    for entry in entries:
        entry["directory"] = str((database.parent / entry["directory"]).resolve())
    half = folder / "compile_commands.json"
    half.write_text(json.dumps(entries[first::2]), encoding="utf-8")
    return half


def compare(database: Path) -> None:
    """Measure one database and print it."""
    whole = measured("inspect", database)
    without = measured("without", database)
    plain = measured("parse", database)
    with tempfile.TemporaryDirectory() as folder:
        halves = [measured("inspect", half_of(database, Path(folder), first)) for first in (0, 1)]
    read, functions = whole["functions"]
    print(f"{database}")
    print(f"  units {whole['units']}, functions read {read} of {functions}, ", end="")
    print(f"machines {whole['machines']}, rings {whole['rings']}, log {whole['log'] / 1e6:.2f} MB")
    print(f"  (a) whole inspection      {whole['seconds']:8.2f} s CPU")
    print(f"  (b) plain parsing         {plain['seconds']:8.2f} s CPU  ", end="")
    print(f"({plain['characters'] / 1e6:.1f} MB in {plain['units']} units, {plain['refused']} not parsed)")
    print(f"  ratio (a)/(b)             {whole['seconds'] / plain['seconds']:8.2f}")
    print(f"  (c) without evidence      {without['seconds']:8.2f} s CPU")
    print(f"  ratio (a)/(c)             {whole['seconds'] / without['seconds']:8.2f}")
    spent = plain["spent"]
    together = sum(spent.values())
    print(f"  (b) with preprocessing    {together:8.2f} s CPU  (ratio {whole['seconds'] / together:.2f})")
    for stage, seconds in whole["stages"].items():
        print(f"      {stage:12} {seconds:8.2f} s  {seconds / whole['seconds']:6.1%}")
    growth = 2 * whole["seconds"] / sum(half["seconds"] for half in halves)
    more = 2 * whole["units"] / sum(half["units"] for half in halves)
    verdict = "no worse than the units" if growth <= more else "WORSE than the units"
    print(f"  growth: {more:.2f} times the units take {growth:.2f} times the time ({verdict})")


def main() -> None:
    reader = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    reader.add_argument("databases", nargs="+", type=Path, metavar="DATABASE")
    reader.add_argument("--only", choices=["inspect", "without", "parse"], help=argparse.SUPPRESS)
    given = reader.parse_args()
    if given.only is not None:
        print(
            json.dumps({"inspect": inspect, "without": inspect_without, "parse": parse}[given.only](given.databases[0]))
        )
        return
    for database in given.databases:
        if not database.is_file():
            sys.exit(f"{database} is no file; name compile databases (compile_commands.json).")
        compare(database.resolve())


if __name__ == "__main__":
    main()
