"""What runs of a ring's operations showed, turned into findings: each under the rule that explains it best.

The exploration of a ring gives ``Disagreement``s: short sequences of calls, each run again from the start, after which
the ring is not what a ring is. What makes them may be a wrap that RB01 to RB07 explain already from the code alone;
then the run is the evidence of that finding, and no second one is made. Else the disagreement speaks for itself.
"""

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace

from stepring.rule import Level, Obligation, Related, WitnessStep
from stepring.shapes.ring_types import Disagreement, Doubt
from stepring.shapes.types import Program, Ring
from stepring_rules.ring_common import about, declared

SHOWN_BY: Mapping[str, tuple[Doubt, ...]] = {
    "RB01": ("past end", "out of range"),
    "RB02": ("below zero", "past end", "out of range"),
    "RB03": ("slots", "order", "data", "occupancy", "room"),
    "RB04": ("overflow", "slots", "order", "data", "occupancy", "past end"),
    "RB05": ("slots", "order", "data", "occupancy", "room"),
    "RB06": ("past end", "out of range", "slots", "order", "data", "occupancy", "room"),
    "RB07": ("slots", "overflow", "order", "room", "data", "occupancy", "past end"),
}
"""What a run can show of the defect that each rule explains from the code, the most telling first."""


@dataclass(frozen=True, slots=True)
class Words:
    """What a rule says of a disagreement beyond what happened."""

    rule: str
    doubts: tuple[Doubt, ...]
    why: str
    advice: str
    level: Level = "error"


def witnessed(program: Program, found: Iterable[Obligation]) -> Iterator[Obligation]:
    """Failures with the run that shows them as their evidence.

    An error without such a run is not reported as one: nobody could replay it, so it stays open.
    """
    rings = {ring.identity: ring for ring in program.rings}
    for item in found:
        if item.kind != "fail" or item.evidence is not None or item.shape not in rings:
            yield item
            continue
        shown = _shown(rings[item.shape], item)
        if shown is not None:
            yield replace(item, evidence=shown.witness, witness=story(shown))
        elif item.level == "error" and rings[item.shape].unrun is not None:
            unrun = rings[item.shape].unrun or "no run of the ring's operations was found that shows it"
            yield replace(
                item,
                kind="open",
                level=None,
                reason=f"{unrun}; by the index's own code alone it would happen",
                open_as="no witness replayed",
            )
        else:
            yield item


def _shown(ring: Ring, item: Obligation) -> Disagreement | None:
    doubts = SHOWN_BY.get(item.rule, ())
    fitting = [one for one in ring.disagreements if one.doubt in doubts]
    if not fitting:
        return None

    def order(one: Disagreement) -> tuple[object, ...]:
        here = (one.where.file, one.where.line) == (item.where.file, item.where.line)
        return (not here, one.function != item.function, doubts.index(one.doubt), len(one.witness.calls), one.where)

    return min(fitting, key=order)


def unexplained(program: Program, static: Iterable[Obligation], words: Words) -> Iterator[Obligation]:
    """The disagreements of the rule's kinds in rings of which ``static`` (failures found from the code) says nothing.

    ``static`` may hold any verdicts; errors and warnings among them count.
    """
    static = tuple(static)
    explained = {
        item.shape for item in static if item.level in ("error", "warning") or item.open_as == "no witness replayed"
    }
    # A note says of a ring that it uses fewer slots than there are: that it leaves them out is the same fact.
    smaller = {item.shape for item in static if item.kind == "fail" and item.rule == "RB06"}
    for ring in program.rings:
        if ring.identity in explained:
            continue
        # What one line does wrong shows in several ways; the first is of the shortest run.
        said: set[tuple[str, int, str]] = set()
        for one in ring.disagreements:
            mark = (one.where.file, one.where.line, one.function)
            if one.doubt == "slots" and ring.identity in smaller:
                continue
            if mark not in said and one.doubt in words.doubts:
                yield finding(ring, one, words)
            said.add(mark)


def finding(ring: Ring, one: Disagreement, words: Words) -> Obligation:
    """A disagreement as a failure."""
    related = (declared(ring),) if ring.capacity is not None else (Related(ring.where, f"{ring.storage} is this ring"),)
    made: Obligation = about(
        words.rule,
        ring,
        "fail",
        one.where,
        one.what if one.what.endswith(".") else one.what + ".",
        words.level,
        why=words.why,
        advice=words.advice,
        function=one.function,
        related=related,
        witness=story(one),
        evidence=one.witness,
        assumed=one.witness.assumed,
    )
    return made


def story(one: Disagreement) -> tuple[WitnessStep, ...]:
    """The steps of a disagreement."""
    return tuple(WitnessStep(step.where, step.text, step.values) for step in one.steps)
