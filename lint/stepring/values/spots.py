"""Names for the objects that a function touches, so that a store to one is known not to change, or to maybe change,
another.

A *cell* (``values.types``) names what one summary of the program speaks of: a variable, or a member of every
structure of a type. Inside one run of a function that is too coarse: after ``a->head = 0`` nothing is known of
``b->head``. A *spot* is an access path that starts at a variable and goes through members, elements and pointers,
as in ``a -> .head``. It is *definite* while the pointers and index variables in it are not changed; a change of one
of them ends the names that depend on it. A spot that is not definite stands for the remaining objects of its cell.

Which spots may be one object follows the rules of 6.5p7: members are the same member of the same structure type,
and an access through a pointer to an integer may reach integers of the same width whose address was taken. An
access through a pointer to a character may reach every object whose bytes were exposed by a cast to such a pointer.

A pointer that is set once, to an address that stays the same (``struct ring *r = &rx;``), is replaced by what it
points to.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TypeAlias

from stepring.meaning.types import (
    CType,
)
from stepring.values.intervals import number_type, union, whole, within
from stepring.values.types import Cell, FieldCell, Interval, VariableCell

Bucket: TypeAlias = tuple[object, ...]
Steps: TypeAlias = tuple[tuple[str, str, CType], ...]
"""A way into a structure: (structure, member, its type) for each step; ``("", "[]", type)`` for an array's elements."""


@dataclass(frozen=True, slots=True)
class Exposure:
    """What the whole program does with addresses.

    ``variables``: identities of variables whose address, or a part's, is taken. ``cells``: cells whose own address
    is taken; of a member, the member of whichever object too. ``bytes_of``: structures that are also reached through
    pointers to characters. ``unions``: structures that overlap with others in a union. ``members``: the integer and
    pointer members of each structure, by path, as far as the code names them.
    """

    variables: frozenset[str] = frozenset()
    cells: frozenset[Cell] = frozenset()
    bytes_of: frozenset[str] = frozenset()
    unions: frozenset[str] = frozenset()
    members: Mapping[str, Sequence[Steps]] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Access:
    """A place, taken apart.

    ``root`` is a variable's identity (with its frame's prefix) or ``?``; ``path`` the steps from it: ``.member``,
    ``[3]``, ``[i@12]``, ``[]``, ``->``. ``cell`` is the summary cell (None for what a pointer to a scalar points
    to), ``view`` the innermost structure and the steps in it, ``local`` whether the root is automatic and no
    pointer is in the path.
    """

    root: str
    path: tuple[str, ...]
    definite: bool
    depends: tuple["Spot", ...]
    cell: Cell | None
    view: tuple[str, ...]
    type: CType
    local: bool
    exposed: bool
    reached: bool
    tracked: bool
    volatile: bool


@dataclass(eq=False, slots=True)
class Spot:
    """One definite object, or (``definite`` False) the rest of a cell's objects. Compared by identity; made by
    ``Places`` only.

    ``tracked`` is False for what must always be taken to have any value that its summary allows. ``private`` says
    that no pointer and no other function can reach it.
    """

    root: str
    path: tuple[str, ...]
    cell: Cell | None
    type: CType
    definite: bool
    tracked: bool
    private: bool
    reached: bool
    pointee: bool
    depends: tuple["Spot", ...]
    buckets: tuple[Bucket, ...]
    default: Interval
    remainder: "Spot | None" = None
    dependents: list["Spot"] = field(default_factory=list)
    _aliases: tuple["Spot", ...] = ()
    _version: int = -1

    def __repr__(self) -> str:
        return f"<{self.root}{''.join(self.path)}{'' if self.definite else ' …'}>"


def pointee_cell(width: object) -> Cell:
    """The cell under which a program's summary keeps what is stored through pointers to integers of a width."""
    return VariableCell("*", (str(width),))


class Places:
    """All spots of one analysis, and which of them may be one object.

    ``steady`` says of a volatile cell that only the analysed code stores into it, ``foreign`` of any cell that
    another context may store into it at any moment. What a pointer to a scalar points to is tracked only with
    ``track_pointees``: the pointer may lead to a device register, which the types do not say.
    """

    def __init__(
        self,
        summaries: Mapping[Cell, Interval],
        exposure: Exposure | None,
        steady: Callable[[Cell], bool],
        foreign: Callable[[Cell], bool],
        track_pointees: bool = False,
    ) -> None:
        self.summaries = summaries
        self.exposure = exposure
        self._steady = steady
        self._foreign = foreign
        self._track_pointees = track_pointees
        self._spots: dict[tuple[object, ...], Spot] = {}
        self._named: dict[tuple[str, tuple[str, ...]], Spot] = {}
        self._buckets: dict[Bucket, list[Spot]] = {}
        self._by_root: dict[str, list[Spot]] = {}
        self._by_cell: dict[Cell, list[Spot]] = {}
        self._version = 0

    def all(self) -> list[Spot]:
        """Every spot that was named so far."""
        return list(self._spots.values())

    def rooted(self, root: str) -> list[Spot]:
        """The spots whose access path starts at a variable."""
        return self._by_root.get(root, [])

    def of_cell(self, cell: Cell) -> list[Spot]:
        """The spots of a cell, and those that the cell's member of a structure is known under."""
        found = dict.fromkeys(self._by_cell.get(cell, ()))
        if isinstance(cell, FieldCell):
            found.update(dict.fromkeys(self._buckets.get(("member", cell.struct, *cell.path), ())))
        return list(found)

    def named(self, root: str, path: tuple[str, ...]) -> Spot | None:
        """The definite spot with that access path, if some place has named it."""
        return self._named.get((root, path))

    def spot(self, access: Access) -> Spot:
        """The spot of a place; the same one for every place with the same access path."""
        number = number_type(access.type)
        width = number.width if number is not None else 0
        # What a pointer to a scalar points to has no cell whose type could tell it from another of its width.
        kind = number if access.cell is None else width
        definite = access.definite and not (access.path and _variable_index(access.path[-1]))
        key: tuple[object, ...]
        if definite:
            key = (access.root, access.path, access.cell, kind)
        elif access.reached:
            key = ("?", access.cell, kind)
        else:
            key = ("…", access.root, access.cell, kind)
        found = self._spots.get(key)
        if found is not None:
            return found
        return self._add(key, access, definite, width)

    def _add(self, key: tuple[object, ...], access: Access, definite: bool, width: int) -> Spot:
        pointee = access.reached and access.cell is None
        cell = access.cell
        volatile = access.volatile and not (cell is not None and self._steady(cell))
        buckets = self._buckets_of(access, width, pointee)
        spot = Spot(
            root=access.root if definite or not access.reached else "?",
            path=access.path if definite else tuple("[]" if step.startswith("[") else step for step in access.path),
            cell=cell,
            type=access.type,
            definite=definite,
            tracked=access.tracked
            and not volatile
            and width > 0
            and not (cell is not None and self._foreign(cell))
            and (self._track_pointees or not pointee),
            private=access.local and not access.exposed,
            reached=access.reached,
            pointee=pointee,
            depends=access.depends if definite else (),
            buckets=buckets,
            default=self._default(access, buckets),
        )
        self._spots[key] = spot
        self._by_root.setdefault(spot.root, []).append(spot)
        if cell is not None:
            self._by_cell.setdefault(cell, []).append(spot)
        if definite:
            self._named.setdefault((access.root, access.path), spot)
            for other in access.depends:
                other.dependents.append(spot)
            if access.depends or any(step.startswith("[") for step in access.path):
                spot.remainder = self.spot(_indefinite(access))
        for bucket in spot.buckets:
            self._buckets.setdefault(bucket, []).append(spot)
        self._version += 1
        return spot

    def _default(self, access: Access, buckets: tuple[Bucket, ...]) -> Interval:
        """What a spot holds of which the state says nothing: what its cell's summary allows, and what stores through
        pointers may have put there: those to the structure that it is a member of, those to a scalar."""
        anything = whole(access.type)
        if access.cell is None or not access.tracked or (access.local and not access.reached):
            return anything
        value = self.summaries.get(access.cell)
        if value is None:
            return anything
        for bucket in buckets:
            if bucket[0] == "member":
                shared = FieldCell(access.view[0], access.view[1:])
                also = self.summaries.get(shared) if shared != access.cell else value
                if also is None:
                    return anything
                value = union(value, also)
            elif bucket[0] in ("scalar", "bytes"):
                width = bucket[1] if bucket[0] == "scalar" else 8
                stored = self.summaries.get(pointee_cell(width))
                if stored is not None:
                    value = union(value, stored if within(stored, anything.low, anything.high) == stored else anything)
                    if bucket[0] == "bytes" and anything.high > 255:
                        return anything
        return within(value, anything.low, anything.high) or anything

    def _buckets_of(self, access: Access, width: int, pointee: bool) -> tuple[Bucket, ...]:
        buckets: list[Bucket] = []
        open_to_pointers = access.reached or access.exposed
        if access.view and open_to_pointers:
            buckets.append(("member", *access.view))
        if any(step.startswith("[") for step in access.path) and access.cell is not None:
            buckets.append(("cell", access.cell))
        if pointee:
            buckets.append(("scalar", width))
            if width == 8:
                buckets.append(("bytes",))
        elif width and open_to_pointers:
            known = self.exposure
            member = FieldCell(access.view[0], access.view[1:]) if access.view else None
            taken = known is None or access.cell in known.cells or member in known.cells
            if taken or (access.local and access.exposed):
                buckets += [("scalar", width), ("bytes",)]
            elif known is not None and access.view and access.view[0] in known.bytes_of:
                buckets.append(("bytes",))
        return tuple(buckets)

    def aliases(self, spot: Spot) -> tuple[Spot, ...]:
        """The other spots that may be the same object."""
        if spot._version == self._version:
            return spot._aliases
        found: dict[int, Spot] = {}
        for bucket in spot.buckets:
            for other in self._buckets[bucket]:
                if other is not spot and id(other) not in found and _may_alias(spot, other, bucket[0]):
                    found[id(other)] = other
        spot._aliases = tuple(found.values())
        spot._version = self._version
        return spot._aliases


def _indefinite(access: Access) -> Access:
    """The access to some object of the same cell."""
    path = tuple("[]" if step.startswith("[") else step for step in access.path)
    return Access(
        access.root, path, False, (), access.cell, access.view, access.type, access.local, access.exposed,
        access.reached, access.tracked, access.volatile,
    )  # fmt: skip


def _variable_index(step: str) -> bool:
    """Whether a step is an element chosen by a variable or by an unknown index."""
    return step.startswith("[") and not step[1:-1].lstrip("-").isdigit()


def _may_alias(a: Spot, b: Spot, kind: object) -> bool:
    """Whether two spots of one bucket can be the same object."""
    if kind in ("scalar", "bytes") and not (a.pointee or b.pointee):
        return False
    if not a.reached and not b.reached and a.root != b.root:
        return False
    if a.root == b.root and a.root != "?":
        for place, (x, y) in enumerate(zip(a.path, b.path, strict=False)):
            if x == y:
                continue
            apart = not _variable_index(x) and not _variable_index(y) if x[0] == y[0] == "[" else x[0] == y[0] == "."
            if apart and "->" not in a.path[place:] and "->" not in b.path[place:]:
                return False
            break
        else:
            return len(a.path) == len(b.path)
        if not a.reached and not b.reached:
            return a.cell == b.cell
    return True
