"""From a candidate and its study to the ring that rules and reports read, with the evidence for the rules."""

from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from typing import Literal

from stepring.meaning.types import IntType
from stepring.places import Origin, Position
from stepring.shapes.ring_arith import Low, Range, Value
from stepring.shapes.ring_bound import bound_of, workers
from stepring.shapes.ring_catalogue import Candidate, Catalogue, Moves, is_solid
from stepring.shapes.ring_facts import Advance, Wrap
from stepring.shapes.ring_keys import Key, byte_size, key_text, short_text, struct_name
from stepring.shapes.ring_search import Access as Found
from stepring.shapes.ring_search import Study, Witness, out_of_range
from stepring.shapes.ring_sources import Use
from stepring.shapes.ring_types import CheckedAccess, CheckedStep
from stepring.shapes.types import Index, OrbitStep, Ring, Scheme, WrapForm
from stepring.values.types import Interval

Role = Literal["write", "read", "both", "count"]
MANY_STEPS = 10
"""A witness with more stores than this is shown by its first and last ones."""
WRAP_ORDER: dict[WrapForm, int] = {
    "modulo": 0,
    "mask": 1,
    "reset": 2,
    "choice": 3,
    "subtract": 4,
    "decrement": 5,
    "free-running": 6,
    "none": 7,
}


def build(
    merged: Catalogue, candidate: Candidate, studied: Study | None, origin: Callable[[Position], Origin]
) -> Ring:
    """The ring of a candidate; ``studied`` is None where its capacity is not constant or too large to run."""
    storage = candidate.storage
    uses = merged.uses[storage]
    indices = tuple(
        _index(merged, candidate, key, uses, studied, origin) for key in (*candidate.indices, *candidate.counts)
    )
    touch = merged.elements[storage]
    forms: Counter[WrapForm] = Counter(
        step.wrap for index in indices if index.role != "count" for step in index.steps if step.wrap != "none"
    )
    wrap: WrapForm = min(forms, key=lambda form: (-forms[form], WRAP_ORDER[form])) if forms else "none"
    item = merged.objects.get(storage[:2])
    layout = merged.structs.get(storage[1]) if storage[0] == "member" else None
    where = uses[0].touch.position
    if item is not None:
        where = item.position
    elif layout is not None and layout.position is not None:
        where = layout.position
    notes = []
    if candidate.capacity is None:
        notes.append("the capacity is set at run time")
    if candidate.elsewhere:
        notes.append("the storage is the caller's, who gets the slot")
    functions, helpers = workers(merged, candidate)
    return Ring(
        "/".join(storage),
        struct_name(storage[1]) if candidate.elsewhere else key_text(storage),
        "member" if storage[0] == "member" else "variable",
        origin(where),
        candidate.capacity,
        None if candidate.elsewhere else byte_size(touch.element, merged.structs),
        indices,
        () if candidate.elsewhere else tuple(_accesses(merged, candidate, uses, studied, origin)),
        _scheme(merged, candidate, indices),
        wrap,
        tuple(notes),
        bound=bound_of(merged, candidate),
        storage_key=() if candidate.elsewhere else storage,
        storage_form="elsewhere" if candidate.elsewhere else "pointer" if storage[-1] == "*" else "array",
        struct=next((key[1] for key in candidate.indices if key[0] == "member"), ""),
        functions=functions,
        helpers=helpers,
    )


# ---------------------------------------------------------------------------------------------------------- indices


def _index(
    merged: Catalogue,
    candidate: Candidate,
    key: Key,
    uses: Sequence[Use],
    studied: Study | None,
    origin: Callable[[Position], Origin],
) -> Index:
    type_ = merged.types.get(key, IntType("int", 32, True, 3))
    orbit = studied.orbits.get(key) if studied is not None else None
    values: tuple[int, ...] | None = None
    if orbit is not None and orbit.complete and all(isinstance(value, int) for value in orbit.possible):
        values = tuple(sorted(int(value) for value in orbit.possible))
    moves = merged.moves[key]
    item = merged.objects.get(key[:2]) if key[0] == "var" else None
    where = item.position if item is not None else min([*moves.advances, *moves.copies, uses[0].touch.position])
    initial = orbit.start if orbit is not None else None
    return Index(
        key_text(key),
        "/".join(key),
        type_.name,
        type_.low,
        type_.high,
        "count" if key in candidate.counts else _role(candidate, key, uses),
        tuple(_steps(merged, candidate, key, moves, uses, studied, origin)),
        values,
        initial,
        origin(where),
        key,
    )


def _role(candidate: Candidate, key: Key, uses: Sequence[Use]) -> Role:
    if candidate.writer is not None:
        return "write" if key == candidate.writer else "read"
    touches = [use.touch for use in uses if key in use.cells]
    stores = any(touch.kind == "store" or touch.copied == "to" for touch in touches)
    loads = any(touch.kind == "load" or touch.copied == "from" for touch in touches)
    return "both" if stores == loads else "write" if stores else "read"


def _steps(
    merged: Catalogue,
    candidate: Candidate,
    key: Key,
    moves: Moves,
    uses: Sequence[Use],
    studied: Study | None,
    origin: Callable[[Position], Origin],
) -> Iterator[CheckedStep]:
    capacity = candidate.capacity
    orbit = studied.orbits.get(key) if studied is not None else None
    for advance in sorted(moves.advances.values(), key=lambda item: item.position):
        wrap = _wrap_of(merged, key, advance, moves)
        free = wrap is None and any(key in use.cells and use.reduction != "none" for use in uses)
        form: WrapForm = wrap.form if wrap is not None else "free-running" if free else "none"
        pairs: list[tuple[int, int]] = []
        odd: list[tuple[int, int, int]] = []
        if studied is not None and capacity is not None:
            for (cell, function, before, after, by), certain in sorted(studied.pairs.items()):
                if cell != key or function != advance.function:
                    continue
                pairs.append((before, after))
                by = by or advance.by or 0  # a path that only wraps goes one step too
                expected = (before + by) % capacity
                if by and certain and form not in ("free-running", "none") and after % capacity != expected:
                    odd.append((before, after, expected))
        yield CheckedStep(
            advance.function,
            origin(advance.position),
            form,
            origin(wrap.position) if wrap is not None else None,
            wrap.limit if wrap is not None else None,
            tuple(dict.fromkeys(pairs)),
            advance.by,
            wrap.operator if wrap is not None else "",
            tuple(dict.fromkeys(odd)),
            orbit is not None and orbit.complete,
            len({use.touch.position for use in uses if key in use.cells and use.touch.function == advance.function}),
        )


def _wrap_of(merged: Catalogue, key: Key, advance: Advance, moves: Moves) -> Wrap | None:
    """The wrap that belongs to an advance: of the same function, else of a function that it is laid out with."""
    order = [
        [wrap for wrap in moves.wraps.values() if wrap.function == advance.function],
        [
            wrap
            for facts in merged.facts
            for found in (facts.cells.get(key),)
            if found is not None and advance in found.advances
            for wrap in found.wraps
            if is_solid(wrap)
        ],
    ]
    for wraps in order:
        known = [wrap for wrap in wraps if wrap.limit is not None] or wraps
        if known:
            # The wrap next to the advance is its own, where a function has several.
            return min(
                known,
                key=lambda wrap: (WRAP_ORDER[wrap.form] > 1, abs(wrap.position.line - advance.position.line)),
            )
    return None


# ---------------------------------------------------------------------------------------------------------- accesses


def _accesses(
    merged: Catalogue,
    candidate: Candidate,
    uses: Sequence[Use],
    studied: Study | None,
    origin: Callable[[Position], Origin],
) -> Iterator[CheckedAccess]:
    by_place: dict[tuple[Position, str], Use] = {(use.touch.position, use.touch.kind): use for use in uses}
    if studied is None:
        for use in sorted(uses, key=lambda item: item.touch.position):
            touch = use.touch
            yield CheckedAccess(
                touch.function,
                origin(touch.position),
                _index_name(candidate, use),
                touch.kind,
                None,
                None,
                use.reduction,
                use.modulus,
                doubt="the capacity is set at run time",
                cells=tuple("/".join(key) for key in sorted(use.cells)),
                reduced_where=origin(use.reduced_at) if use.reduced_at is not None else None,
                scaled=use.scaled,
            )
        return
    for (position, kind, function, _), found in sorted(studied.accesses.items()):
        use_here = by_place.get((position, kind))
        yield _access(candidate, found, use_here, function, origin)


def _index_name(candidate: Candidate, use: Use | None) -> str:
    if use is None:
        return ""
    mine = [key for key in candidate.indices if key in use.cells] or sorted(use.cells)
    return " + ".join(short_text(key) for key in mine)


def _access(
    candidate: Candidate,
    found: Found,
    use: Use | None,
    function: str,
    origin: Callable[[Position], Origin],
) -> CheckedAccess:
    capacity = candidate.capacity or 0
    touch = found.touch
    values = found.certain | found.doubtful
    complete = found.settled or not found.cut
    exact: tuple[int, ...] | None = None
    if complete and all(isinstance(value, int) for value in values):
        exact = tuple(sorted(int(value) for value in values))
    fits = complete and not any(out_of_range(value, capacity, touch) for value in values)
    bad = found.bad[0] if found.bad is not None else None
    maybe = ""
    doubt = ""
    if bad is None and not fits:
        maybe = _value_text(found.maybe)
        doubt = (
            "it depends on state or on arguments that could not all be followed"
            if found.maybe is not None
            else "not all ways through the code could be followed"
        )
    return CheckedAccess(
        function,
        origin(touch.position),
        _index_name(candidate, use),
        touch.kind,
        _hull(values) if complete else None,
        exact,
        use.reduction if use is not None else "none",
        use.modulus if use is not None else None,
        tuple(_story(candidate, found, touch.position, origin)),
        bad=None if bad is None else int(bad),
        below=bad is not None and (isinstance(bad, Low) or bad < 0),
        maybe=maybe,
        maybe_below=isinstance(found.maybe, Low) or (isinstance(found.maybe, int) and found.maybe < 0),
        doubt=doubt,
        settled=fits,
        cells=tuple("/".join(key) for key in sorted(use.cells)) if use is not None else (),
        reduced_where=origin(use.reduced_at) if use is not None and use.reduced_at is not None else None,
        scaled=use is not None and use.scaled,
    )


def _hull(values: set[Value]) -> Interval | None:
    lows = [value.low if isinstance(value, Range) else value for value in values]
    highs = [value.high if isinstance(value, Range) else value for value in values]
    if not values or any(not isinstance(value, int) for value in (*lows, *highs)):
        return None
    low, high = min(lows), max(highs)
    return Interval(int(low), int(high), 1 if low < high else 0)


def _value_text(value: Value) -> str:
    if isinstance(value, Range):
        return f"between {value.low} and {value.high}"
    return "" if value is None else str(int(value))


def _story(
    candidate: Candidate, found: Found, position: Position, origin: Callable[[Position], Origin]
) -> Iterator[OrbitStep]:
    """The steps to the bad access, one for each store of an index, the middle of a long row left out."""
    if found.bad is None:
        return
    subscript, witness = found.bad
    stores = _shown(witness, candidate)
    skipped = len(stores) - MANY_STEPS
    for number, (place, key, before, after) in enumerate(stores):
        if skipped > 1 and 4 <= number < 4 + skipped:
            continue
        name = short_text(key)
        text = f"{name} goes from {_value_text(before)} to {_value_text(after)}"
        if skipped > 1 and number == 4 + skipped:
            text += f" (after {skipped} more steps)"
        yield OrbitStep(origin(place), text, ((name, _value_text(after)),))
    storage = key_text(candidate.storage)
    yield OrbitStep(
        origin(position),
        f"{storage} is accessed at {int(subscript)}; its slots are 0 to {(candidate.capacity or 1) - 1}",
        (("subscript", str(int(subscript))),),
    )


def _shown(witness: Witness, candidate: Candidate) -> list[tuple[Position, Key, Value, Value]]:
    mine = {*candidate.indices}
    return [store for store in witness.stores if store[1] in mine]


# ---------------------------------------------------------------------------------------------------------- scheme


def _scheme(merged: Catalogue, candidate: Candidate, indices: Sequence[Index]) -> Scheme:
    """How full and empty are told apart."""
    if candidate.counts:
        return "count"
    walkers = [index for index in indices if index.role != "count"]
    if len(walkers) < 2:
        return "overwrite"
    keys = set(candidate.indices)
    moved = same = difference = False
    for comparison in merged.comparisons:
        left, right = comparison.left & keys, comparison.right & keys
        if len(left) > 1 or len(right) > 1:
            difference = True
        elif left and right and left != right:
            same = True
            moved = moved or comparison.moved
    free = all(step.wrap == "free-running" for index in walkers for step in index.steps)
    if difference and free:
        return "difference"
    if moved:
        return "one slot empty"
    if _flag(merged, candidate):
        return "flag"
    if difference:
        return "difference"
    return "unknown" if same else "unchecked"


def _flag(merged: Catalogue, candidate: Candidate) -> bool:
    """Whether a lasting integer that only ever gets the constants 0 and 1 is stored where the indices move."""
    movers = {item.function for key in candidate.indices for item in merged.moves[key].advances.values()}
    for key, moves in merged.moves.items():
        if key in candidate.indices or moves.advances or len(moves.resets) < 2:
            continue
        values = {reset.value for reset in moves.resets.values()}
        if values == {0, 1} and {reset.function for reset in moves.resets.values()} & movers:
            return True
    return False
