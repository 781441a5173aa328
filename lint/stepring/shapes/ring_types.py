"""Rings with the evidence that the rules need beyond what a report shows."""

from dataclasses import dataclass
from typing import Literal, TypeAlias

from stepring.paths.witness import Witness
from stepring.places import Origin
from stepring.shapes.types import Access, OrbitStep, Step

OpenReason: TypeAlias = Literal[
    "call to unknown code",
    "pointer not resolved",
    "bound reached",
    "time limit",
    "query limit",
    "code not read",
    "stored into elsewhere",
    "start value not known",
    "argument not bounded",
    "capacity not known",
    "no witness replayed",
    "not modelled",
]
"""Why an obligation stays open, in the words that the ledger counts by."""

Doubt: TypeAlias = Literal[
    "past end",
    "below zero",
    "out of range",
    "slots",
    "overflow",
    "room",
    "data",
    "occupancy",
    "order",
    "drift",
    "no progress",
]
"""What a run of a ring's operations showed: an access past the end or below slot 0; an index or count left out of its
range; slots skipped or repeated; a counter's overflow that breaks the sequence; stored without room; loaded without
data; an occupancy (or room) told wrongly; elements lost, repeated or reordered; count and indices in disagreement; a
call that never returns."""


@dataclass(frozen=True, slots=True)
class Proof:
    """What the solver found about one obligation of a ring, for all runs.

    ``about``: ``access`` (every subscript at ``where`` is inside), ``range`` (the index or count ``index``, as shown,
    is in range whenever a function returns or calls out), ``advance`` (the next slot follows). ``holds`` False means
    open:
    ``reason`` in the ledger's words, ``detail`` in a clause. ``kept`` are the relations that every operation keeps, as
    C expressions, on which a proof rests; ``assumed`` the clauses that the code does not settle.
    """

    about: Literal["access", "range", "advance"]
    where: Origin
    function: str
    index: str
    holds: bool
    kept: tuple[str, ...] = ()
    assumed: tuple[str, ...] = ()
    reason: OpenReason | None = None
    detail: str = ""


@dataclass(frozen=True, slots=True)
class Disagreement:
    """A run of the ring's operations that goes wrong, replayed: ``what`` is one clause with the values that show it,
    ``steps`` the run, ``witness`` what is needed to run it again."""

    doubt: Doubt
    where: Origin
    function: str
    what: str
    witness: Witness
    steps: tuple[OrbitStep, ...]


@dataclass(frozen=True, slots=True)
class CheckedAccess(Access):
    """An access whose subscripts were searched.

    ``bad`` is a subscript outside the array that certainly occurs (``steps`` lead to it), ``below`` says that it came
    from below slot 0; ``maybe`` describes one that could not be excluded, ``doubt`` why. ``settled``: every subscript
    is known to be inside. ``cells`` are the identities of the indices that the subscript is made of; ``reduced_where``
    is the place of the remainder or mask on the access; ``scaled``: the index is multiplied on the way.
    """

    bad: int | None = None
    below: bool = False
    maybe: str = ""
    maybe_below: bool = False
    doubt: str = ""
    settled: bool = False
    cells: tuple[str, ...] = ()
    reduced_where: Origin | None = None
    scaled: bool = False


@dataclass(frozen=True, slots=True)
class CheckedStep(Step):
    """A step whose pairs were found by running it.

    ``by`` is what one advance adds, None if that is no constant; ``operator`` the wrap's. ``odd`` are the pairs that
    certainly occur and are not what the capacity asks for, as (before, after, expected); ``steps`` lead to the first.
    ``touches`` counts the accesses that the function makes with the index.
    """

    by: int | None = None
    operator: str = ""
    odd: tuple[tuple[int, int, int], ...] = ()
    settled: bool = False
    touches: int = 1
    steps: tuple[OrbitStep, ...] = ()
