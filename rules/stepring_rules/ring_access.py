"""What RB01 and RB02 share: the verdict on every access to a ring's storage, bad ones grouped by their cause."""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from stepring.rule import Obligation, Related
from stepring.shapes.ring_types import CheckedAccess, CheckedStep, OpenReason, Proof
from stepring.shapes.types import Index, Program, Ring
from stepring_rules.ring_common import (
    Shared,
    about,
    cause,
    checked,
    declared,
    is_scaled,
    mask_cause,
    shared_capacities,
    short,
    story,
    unseen_as,
)


@dataclass(frozen=True, slots=True)
class Words:
    """How a rule puts its three verdicts."""

    rule: str
    below: bool
    holds: str
    why: str
    advice: str


def judged(program: Program, words: Words) -> Iterator[Obligation]:
    """One obligation for each access of each ring, bad ones with one cause together."""
    shared = shared_capacities(program)
    for ring in program.rings:
        proofs = {(proof.where, proof.function): proof for proof in ring.proofs if proof.about == "access"}
        if ring.capacity is None:
            yield from _proved(ring, proofs.values(), words)
            continue
        causes = {index.identity: set(_causes(ring, index, words, shared)) for index in ring.indices}
        groups: dict[tuple[object, ...], list[CheckedAccess]] = {}
        for access in checked(ring):
            proof = proofs.get((access.where, access.function))
            partly = bool(ring.unseen) or not access.settled or access.kind == "address"
            if proof is not None and proof.holds and partly and access.bad is None:
                yield from _proved(ring, (proof,), words)
            elif ring.explored and access.settled and access.kind == "address":
                yield _handed_on(ring, access, words, proof)
            elif access.settled and ring.unseen:
                yield _unseen(ring, access, words)
            elif access.settled:
                holds = _holds(ring, access, words)
                yield about(words.rule, ring, "pass", access.where, holds, function=access.function)
            elif access.bad is not None:
                if access.below == words.below and not _explained(access, ring, causes, words):
                    groups.setdefault(_group(ring, access), []).append(access)
            elif access.cells and not _explained(access, ring, causes, words) and access.maybe_below == words.below:
                yield about(
                    words.rule,
                    ring,
                    "open",
                    access.where,
                    f"It is not settled that every subscript of {ring.storage} here is 0 to {ring.capacity - 1}.",
                    reason=f"{access.doubt}; the subscript may be {access.maybe}" if access.maybe else access.doubt,
                    open_as=_open_as(access, proof),
                    function=access.function,
                )
        for group in groups.values():
            yield _finding(ring, group, words)


def _open_as(access: CheckedAccess, proof: Proof | None) -> OpenReason:
    """The ledger's reason: the solver's if it was asked, which knows best."""
    if proof is not None and proof.reason is not None:
        return proof.reason
    return "argument not bounded" if access.maybe else "bound reached"


def _proved(ring: Ring, proofs: Iterable[Proof], words: Words) -> Iterator[Obligation]:
    """The solver's verdicts on accesses. What it left open is said once, at the end that an index runs into."""
    slots = f"{ring.capacity} slots" if ring.capacity is not None else "as many slots as its capacity says"
    for proof in proofs:
        if proof.holds:
            kept = f" Every operation keeps {' and '.join(proof.kept)}." if proof.kept else ""
            yield about(
                words.rule,
                ring,
                "pass",
                proof.where,
                f"{words.holds} {ring.storage} has {slots}.{kept}",
                function=proof.function,
                assumed=proof.assumed,
            )
        elif not words.below:
            yield about(
                words.rule,
                ring,
                "open",
                proof.where,
                f"It is not settled that every subscript of {ring.storage} here is inside.",
                reason=proof.detail or proof.reason or "",
                open_as=proof.reason,
                function=proof.function,
                assumed=proof.assumed,
            )


def _holds(ring: Ring, access: CheckedAccess, words: Words) -> str:
    range_ = f"{access.range.low} to {access.range.high}" if access.range is not None else "none"
    return f"{words.holds} {ring.storage} is accessed at {range_}; it has {ring.capacity} slots."


def _unseen(ring: Ring, access: CheckedAccess, words: Words) -> Obligation:
    return about(
        words.rule,
        ring,
        "open",
        access.where,
        f"By the code that was run every subscript of {ring.storage} here is 0 to {(ring.capacity or 0) - 1}, but its "
        "indices may be stored into elsewhere.",
        reason="; ".join(ring.unseen),
        open_as=unseen_as(ring),
        function=access.function,
    )


def _handed_on(ring: Ring, access: CheckedAccess, words: Words, proof: Proof | None) -> Obligation:
    """An address inside the storage that something else goes on from: how far was for the solver to say."""
    return about(
        words.rule,
        ring,
        "open",
        access.where,
        f"The address of an element of {ring.storage} is taken here; it is inside, but how far what gets it goes "
        "on from there is not settled.",
        reason=(proof.detail if proof is not None else "") or "the solver did not follow the address",
        open_as=(proof.reason if proof is not None else None) or "not modelled",
        function=access.function,
    )


def _explained(access: CheckedAccess, ring: Ring, causes: dict[str, set[str]], words: Words) -> bool:
    """Whether another rule explains why the subscript is outside."""
    capacity = ring.capacity or 0
    if access.modulus is not None and access.reduction != "none" and not words.below:
        if access.modulus != capacity and access.modulus not in (capacity - 1,):
            return True
        if access.reduction == "mask" and mask_cause(access.modulus, capacity) is not None:
            return True
    return any(causes.get(cell) for cell in access.cells)


def _causes(ring: Ring, index: Index, words: Words, shared: Shared) -> Iterator[str]:
    """The rules that say of an index's step what makes it leave the array at the end that this rule looks at."""
    for step in index.steps:
        if not isinstance(step, CheckedStep) or is_scaled(ring, index):
            continue
        found = cause(ring, index, step, shared)
        if words.below:
            if found == "RB07" and index.low < 0:
                yield found
        elif found == "RB06" and step.limit is not None and step.limit > (ring.capacity or 0):
            yield found


def _group(ring: Ring, access: CheckedAccess) -> tuple[object, ...]:
    """Accesses with one cause: the index itself leaves the array, or one function computes one bad subscript."""
    walking = _walking(ring, access)
    if walking is not None:
        return ("index", walking.identity)
    return ("function", access.function, access.cells, access.bad)


def _walking(ring: Ring, access: CheckedAccess) -> Index | None:
    """The index whose own values leave the array, where the access uses it as it is."""
    for index in ring.indices:
        if index.identity in access.cells and access.reduction == "none" and access.bad is not None:
            if any(after == access.bad for step in index.steps for _, after in step.pairs):
                return index
    return None


def _finding(ring: Ring, group: list[CheckedAccess], words: Words) -> Obligation:
    first = min(group, key=lambda access: (access.kind != "store", len(access.steps), access.where))
    capacity = ring.capacity or 0
    what = f"{ring.storage} has {capacity} slots, 0 to {capacity - 1}, and is accessed at {_subscript(first)}"
    calls = len(first.steps) - 1
    name = short(first.index) or "the subscript"
    walking = _walking(ring, first)
    if walking is not None:
        what += f": {short(walking.name)} reaches {first.bad} after {calls} step{'s' if calls != 1 else ''}."
    elif calls > 0 and first.cells:
        what += f" when {name} is {_last(first)}."
    elif first.cells:
        what += f" at the start, before {name} was ever moved."
    else:
        what += "."
    related = [declared(ring)]
    related += [Related(other.where, "the same subscript is used here") for other in group if other is not first]
    return about(
        words.rule,
        ring,
        "fail",
        first.where,
        what,
        "error",
        why=words.why,
        advice=words.advice,
        function=first.function,
        related=tuple(related),
        witness=story(first),
    )


def _subscript(access: CheckedAccess) -> str:
    if access.below and access.bad is not None and access.bad >= 0:
        return f"{access.bad}, an unsigned number that went below 0"
    return str(access.bad)


def _last(access: CheckedAccess) -> str:
    return access.steps[-2].values[0][1]
