"""Rings with the evidence that the rules need beyond what a report shows."""

from dataclasses import dataclass

from stepring.places import Origin
from stepring.shapes.types import Access, OrbitStep, Step


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
