"""Logs of outcomes that no sane tree gives: names and texts of any characters, places that do not exist.

Whatever the stages before hand over, the log is valid, consistent, UTF-8 and the same each time; and the readable
reports come out as text that a terminal cannot be steered with.
"""

import json
import os
import tempfile
from dataclasses import replace
from pathlib import Path

from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st
from log_checks import assert_sound
from report_samples import no_findings
from rich.console import Console

from stepring.places import NOTICE_KINDS, Notice, Origin
from stepring.report.inventory import inventory_lines, print_inventory
from stepring.report.lines import report_lines
from stepring.report.notices import notice_sentences
from stepring.report.printed import print_report
from stepring.report.sarif import sarif_log
from stepring.report.serialise import to_bytes
from stepring.report.types import Coverage, Outcome
from stepring.rule import Kind, Obligation, Related, Rule, WitnessStep
from stepring.shapes.types import Index, Machine, Program, Ring, State, Step, Transition

KINDS: tuple[Kind, ...] = ("fail", "open", "pass", "review")

_ODD = st.sampled_from(
    list("{}[]()\\%#&<>\"'`$*?:;@!^~| \t\n\r\f\0\x1b\x7f\x85\u00a0\u2028\u202e\ufeff\udc80\udcff\ud800鮭é0a")
)
texts = st.text(alphabet=st.one_of(_ODD, st.characters()), max_size=12)
names = st.one_of(texts, st.sampled_from(["AUGER_IDLE", "AUGER_JAM", "head", "struct hopper.weight", "struct .", "."]))
file_names = st.text(alphabet=st.one_of(_ODD, st.sampled_from("/.ab")), min_size=1, max_size=10)
contents = st.one_of(
    st.binary(max_size=60), st.sampled_from([b"", b"\n", b"a\r\nb", b"\xef\xbb\xbfint x;\n", b"x" * 5000])
)
numbers = st.integers(-1, 7)


@st.composite
def origins(draw: st.DrawFn, files: list[str]) -> Origin:
    return Origin(draw(st.sampled_from(files)), draw(numbers), draw(numbers), draw(st.integers(-1, 5200)), draw(texts))


@st.composite
def outcomes(draw: st.DrawFn, root: Path) -> Outcome:
    files = ["feed.c", "/elsewhere/x.h", "../above.c", *draw(st.lists(file_names, max_size=3))]
    for file in files:
        _write(root, file, draw(contents))
    place = origins(files)
    values = st.lists(st.tuples(names, texts), max_size=3).map(tuple)
    steps = st.lists(st.builds(WitnessStep, place, texts, values), max_size=15).map(tuple)
    states = st.lists(names, max_size=4).map(tuple)
    flags = st.booleans()
    machines = st.builds(
        Machine,
        identity=names,
        variable=names,
        kind=st.sampled_from(["variable", "member"]),
        where=place,
        form=names,
        states=st.lists(
            st.builds(State, names, st.integers(-(2**65), 2**65), place, flags, flags, flags, flags, flags), max_size=4
        ).map(tuple),
        dispatches=st.just(()),
        stores=st.just(()),
        transitions=st.lists(st.builds(Transition, names, names, names, texts, place), max_size=6).map(tuple),
        initial=states,
        complete=flags,
        why_incomplete=st.lists(texts, max_size=2).map(tuple),
        family=names,
    )
    indices = st.builds(
        Index, names, names, names, numbers, numbers, st.just("write"), st.just(()), st.none(), st.none(), place
    )
    advances = st.builds(Step, names, place, st.just("mask"), st.none(), st.none(), st.just(()))
    rings = st.builds(
        Ring,
        identity=names,
        storage=names,
        kind=st.sampled_from(["variable", "member"]),
        where=place,
        capacity=st.none() | numbers,
        element_size=st.none() | numbers,
        indices=st.lists(st.builds(replace, indices, steps=st.lists(advances, max_size=2).map(tuple)), max_size=3).map(
            tuple
        ),
        accesses=st.just(()),
        scheme=st.sampled_from(["count", "unknown"]),
        wrap=st.sampled_from(["mask", "none"]),
        notes=st.lists(texts, max_size=2).map(tuple),
    )
    program = Program(
        tuple(draw(st.lists(machines, max_size=2, unique_by=lambda one: one.identity))),
        tuple(draw(st.lists(rings, max_size=2, unique_by=lambda one: one.identity))),
    )
    shapes = st.none() | st.sampled_from([one.identity for one in (*program.machines, *program.rings)] or [None])
    obligations = st.builds(
        Obligation,
        rule=st.sampled_from(["SM01", "RB01", "XX99"]),
        kind=st.just("fail"),
        where=place,
        what=texts,
        level=st.sampled_from(["error", "warning", "note", None]),
        why=texts,
        advice=texts,
        reason=texts,
        function=st.none() | names,
        subject=st.none() | names,
        subject_kind=st.sampled_from(["variable", "member"]),
        shape=shapes,
        states=st.one_of(states, *(st.just(tuple(s.name for s in one.states)) for one in program.machines)),
        related=st.lists(st.builds(Related, place, texts), max_size=4).map(tuple),
        initial=values,
        witness=steps,
    )
    verdicts = st.sampled_from(KINDS).flatmap(
        lambda kind: obligations if kind == "fail" else obligations.map(lambda one: _verdict(one, kind))
    )
    notices = st.builds(
        Notice,
        st.sampled_from(sorted(NOTICE_KINDS)),
        st.sampled_from(["error", "warning", "note"]),
        texts,
        st.none() | st.sampled_from(files),
        st.none() | numbers,
        st.none() | numbers,
    )
    return Outcome(
        root=root,
        rules=(
            Rule("SM01", "NoDefault", draw(texts), "warning", no_findings, (478, 99999), "no_such_package"),
            Rule("RB01", "PastTheEnd", "An index reaches past the end.", "error", no_findings, (787,)),
        ),
        program=program,
        obligations=tuple(draw(st.lists(verdicts, max_size=6))),
        notices=tuple(draw(st.lists(notices, max_size=3))),
        coverage=Coverage(*(draw(st.integers(0, 9)) for _ in range(4))),
        models=tuple(draw(st.lists(names, max_size=2))),
    )


def _verdict(one: Obligation, kind: Kind) -> Obligation:
    return replace(one, kind=kind, level=None)


def _write(root: Path, file: str, data: bytes) -> None:
    """Create a file below the root if the system can; one that it cannot stays missing."""
    try:
        target = Path(os.path.normpath(root / file))
        if target.is_relative_to(root) and target != root:
            target.parent.mkdir(parents=True, exist_ok=True)
            target.write_bytes(data)
    except (OSError, ValueError):
        pass


@settings(
    max_examples=80,
    deadline=None,
    phases=[Phase.explicit, Phase.reuse, Phase.generate],
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
)
@given(st.data())
def test_any_outcome_gives_a_sound_log_and_readable_reports(data: st.DataObject) -> None:
    with tempfile.TemporaryDirectory() as folder:
        root = Path(folder) / "barge"
        root.mkdir()
        outcome = data.draw(outcomes(root))
        made = to_bytes(sarif_log(outcome, KINDS, 1))
        log = json.loads(made.decode("utf-8"))
        assert_sound(log, root)
        assert made == to_bytes(sarif_log(outcome, KINDS, 1))
        assert len(log["runs"][0]["results"]) == len(set(outcome.obligations))
        shown = [
            *report_lines(outcome, KINDS, root),
            *inventory_lines(outcome, root),
            *notice_sentences(outcome.notices, root),
            *_printed(outcome, root).split("\n"),
        ]
        assert all(line.isprintable() for line in shown)


def _printed(outcome: Outcome, root: Path) -> str:
    console = Console(width=80, highlight=False, markup=False, emoji=False, force_terminal=False)
    with console.capture() as captured:
        print_report(outcome, console, KINDS, root)
        print_inventory(outcome, console, root)
    return captured.get()
