"""RB03: a wrap that skips or repeats slots.

Each advance is run from every value that the index takes; the slot it leads to must be the one that follows (or, in a
ring that is walked downwards, the one before). A move by a length has no next slot: what it transfers is compared by
RB11, where it leaves the index by RB01. CWE-193.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Rule, WitnessStep
from stepring.shapes.types import Program
from stepring_rules import ring_code
from stepring_rules.ring_common import Turn, about, checked, declared, mask_cause, once, short, turns, unseen_as
from stepring_rules.ring_runs import Words as Runs
from stepring_rules.ring_runs import unexplained, witnessed

_RUNS = Runs(
    "RB03",
    ("slots",),
    "Slots that are left out keep old values, and what is stored in repeated ones is lost.",
    "Let every advance go to the next slot, and from the last one to slot 0.",
)


def skips_slots(program: Program) -> Iterator[Obligation]:
    """One obligation for each step of each index that wraps, and what runs of the operations show besides."""
    yield from witnessed(program, from_code(program))
    yield from unexplained(program, ring_code.explained(program), _RUNS)


def from_code(program: Program) -> Iterator[Obligation]:
    """The same, decided from the code alone."""
    return once(item for turn in turns(program) for item in _check(turn))


def _check(turn: Turn) -> Iterator[Obligation]:
    step, index, ring, capacity = turn.step, turn.index, turn.ring, turn.capacity
    name = short(index.name)
    where = step.wrap_where or step.where
    if step.wrap == "free-running":
        yield from _reduced(turn)
    if step.wrap == "none" or (step.wrap == "free-running" and turn.cause != "RB03"):
        return
    if turn.cause == "RB03":
        what, values = _what(turn)
        yield about(
            "RB03",
            ring,
            "fail",
            where,
            what,
            "warning",
            why="Slots that are left out keep old values, and what is stored in repeated ones is lost; where another "
            "function visits every slot, the two no longer agree.",
            advice=f"Let every advance go to the next slot, and from slot {capacity - 1} to slot 0.",
            function=step.function,
            related=(declared(ring),),
            witness=(WitnessStep(step.where, f"{name} is moved on", values),),
        )
    elif turn.cause is None and step.settled and step.pairs and step.by in (1, -1) and _follow(turn):
        if ring.unseen:
            yield about(
                "RB03",
                ring,
                "open",
                where,
                f"By the code that was run every advance of {name} leads to the next of the {capacity} slots of "
                f"{ring.storage}, but its indices may be stored into elsewhere.",
                reason="; ".join(ring.unseen),
                open_as=unseen_as(ring),
                function=step.function,
            )
            return
        yield about(
            "RB03",
            ring,
            "pass",
            where,
            f"Every advance of {name} leads to the next of the {capacity} slots of {ring.storage}.",
            function=step.function,
        )
    elif turn.cause is None and not step.odd and step.by is not None:
        yield _unsettled(turn)


def _follow(turn: Turn) -> bool:
    """Whether every pair, one that may not occur included, leads to the next slot, or round the end to the other."""
    by = turn.step.by or 0
    return all(
        after == before + by
        if 0 <= before + by < turn.capacity
        else after == (before + by) % turn.capacity and 0 <= before < turn.capacity
        for before, after in turn.step.pairs
    )


def _unsettled(turn: Turn) -> Obligation:
    """An advance that was not run from every value: by the solver's word, if it gave one."""
    step, ring, name = turn.step, turn.ring, short(turn.index.name)
    where = step.wrap_where or step.where
    proof = next(
        (
            one
            for one in ring.proofs
            if one.about == "advance" and (one.where, one.function) == (step.where, step.function)
        ),
        None,
    )
    if proof is not None and proof.holds:
        what = f"Every advance of {name} leads to the next of the {turn.capacity} slots of {ring.storage}."
        passed: Obligation = about("RB03", ring, "pass", where, what, function=step.function, assumed=proof.assumed)
        return passed
    left: Obligation = about(
        "RB03",
        ring,
        "open",
        where,
        f"It is not settled that every advance of {name} leads to the next of the {turn.capacity} slots of "
        f"{ring.storage}.",
        reason=(proof.detail if proof is not None else "") or "it could not be run from every value that it takes",
        open_as=(proof.reason if proof is not None else None) or "bound reached",
        function=step.function,
    )
    return left


def _what(turn: Turn) -> tuple[str, tuple[tuple[str, str], ...]]:
    step, index, ring, capacity = turn.step, turn.index, turn.ring, turn.capacity
    name = short(index.name)
    if not step.odd:
        before, after = step.pairs[0] if step.pairs else (0, step.by or 0)
        return (
            f"{name} is moved by {step.by} slots at a time: {step.function} leaves out slots of {ring.storage}.",
            ((f"{name} before", str(before)), (f"{name} after", str(after))),
        )
    before, after, expected = step.odd[0]
    if before == after:
        what = f"{name} stays at slot {before} of {ring.storage} for ever"
    else:
        what = f"{name} goes from slot {before} to slot {after} of {ring.storage}, where slot {expected} comes next"
    return (
        f"{what}; the storage has {capacity} slots.",
        ((f"{name} before", str(before)), (f"{name} after", str(after)), ("expected", str(expected))),
    )


def _reduced(turn: Turn) -> Iterator[Obligation]:
    """A mask on the access that has holes."""
    ring, index, capacity = turn.ring, turn.index, turn.capacity
    for access in checked(ring):
        if index.identity not in access.cells or access.reduction != "mask" or access.modulus is None:
            continue
        if mask_cause(access.modulus, capacity) == "RB03":
            yield about(
                "RB03",
                ring,
                "fail",
                access.where,
                f"The mask {access.modulus - 1} has holes: {short(index.name)} & {access.modulus - 1} leaves out slots "
                f"of {ring.storage}, which has {capacity}.",
                "warning",
                why="Slots that are left out keep old values, and what is stored in repeated ones is lost.",
                advice=f"Mask with {capacity - 1} if {capacity} is a power of two, else take the remainder.",
                function=access.function,
                related=(declared(ring),),
            )


RULE = Rule(
    "RB03",
    "WrapSkipsOrRepeatsSlots",
    "A wrap skips or repeats slots of the ring.",
    "warning",
    skips_slots,
    (193,),
)
