"""Witnesses: the start values, calls and outside values that make an obligation fail, as data that anyone can run
again.

A ``Witness`` is complete: with the program's units and nothing else it gives one run, the same in the exact
interpreter and in a C program that includes the original file. What it leads to is its ``Ending``.

Values are integers, pointers to (an element of) an object by name, or null. Objects are those that the witness makes
itself (a caller's structure, a caller's buffer) or the program's own, by identity (see ``meaning.types.Variable``).
"""

from dataclasses import dataclass
from typing import Literal, TypeAlias

from stepring.paths.types import Fault
from stepring.places import Origin


@dataclass(frozen=True, slots=True)
class Reference:
    """A pointer to element ``at`` of the object called ``to``; ``path`` leads to a member array in it (``.slots``)."""

    to: str
    at: int = 0
    path: str = ""


Value: TypeAlias = int | Reference | None


@dataclass(frozen=True, slots=True)
class Made:
    """An object that a caller would own: ``elements`` objects of ``type`` in a row, all zero before the start values.

    ``type`` is an integer type's name (``unsigned char``) or a structure's identity (``struct feed_queue``; a
    typedef's name for one without tag).
    """

    name: str
    type: str
    elements: int


@dataclass(frozen=True, slots=True)
class StartValue:
    """What a place holds before the first call: ``object`` by name or identity, ``path`` as C spells it (``.head``,
    ``[3].length``, empty for a scalar)."""

    object: str
    path: str
    value: Value


@dataclass(frozen=True, slots=True)
class OutsideValue:
    """What came from outside during a call: the result of the function ``name``, or of a read of a device register
    (``name`` is its address, ``0xc6``)."""

    name: str
    value: Value


@dataclass(frozen=True, slots=True)
class WitnessCall:
    """One call of the program's function (by identity), the outside values in the order in which they are asked for."""

    function: str
    arguments: tuple[Value, ...]
    outside: tuple[OutsideValue, ...] = ()


@dataclass(frozen=True, slots=True)
class Ending:
    """What the last call leads to.

    ``undefined``: C gives no meaning to what happens at ``where`` (``fault``). ``result``: the call returns ``found``
    where ``expected`` is due. ``value``: afterwards ``place`` (object and path, as C spells it) holds ``found`` where
    ``expected`` is due. ``endless``: the call does not come back. ``expected`` is a number or words ("0 to 15").
    ``where`` is the place that the finding is about.
    """

    kind: Literal["undefined", "result", "value", "endless"]
    where: Origin
    fault: Fault | None = None
    place: str = ""
    found: str = ""
    expected: str = ""


@dataclass(frozen=True, slots=True)
class Witness:
    """Everything that one failing run needs.

    ``model`` names the data model; ``start`` comes after ``made`` and after the program's own initialisation.
    ``watched`` are the places whose values are worth showing after each step, as (shown name, object, path).
    ``assumed`` are clauses that the run rests on and that the code does not settle ("the caller's buffer holds 8
    bytes").
    """

    model: str
    made: tuple[Made, ...]
    start: tuple[StartValue, ...]
    calls: tuple[WitnessCall, ...]
    ending: Ending
    watched: tuple[tuple[str, str, str], ...] = ()
    assumed: tuple[str, ...] = ()
