"""What a ``switch`` on a state variable says: its labels, falls and default, and whether it dispatches on a state at
all.

Falls are judged by the comments and attributes around them, a default by what its own code does.
"""

from stepring.meaning.show import expr_text
from stepring.meaning.types import (
    Assign,
    Cast,
    Expr,
    Function,
    IntType,
    Load,
    PointerType,
    Switch,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.facts import (
    Constant,
    DispatchFact,
    LabelFact,
)
from stepring.shapes.keys import PlaceKey, uncast
from stepring.shapes.names import constant_at
from stepring.shapes.state_default import Does, default_fall, default_region, does, overwrites, storing
from stepring.shapes.state_scan import Scan, Seen, Work, is_carried
from stepring.shapes.types import DefaultFall


def dispatch_fact(work: Work, scan: Scan, seen: Seen, block: int, switch: Switch) -> DispatchFact:
    function = scan.function
    names = work.names
    where = names.origin(switch.syntax.position)
    falls = {fall.label: fall.source for fall in switch.syntax.falls}
    ways = storing(work, scan, seen)
    labels: list[LabelFact] = []
    characters = False
    line_numbers = 0
    for case in switch.cases:
        at = names.origin(case.position)
        constant = constant_at(names, case.written, case.constant, case.name, at)
        characters = characters or constant.where.spelling.startswith(("'", "L'"))
        if constant.name is None and case.written == at.line and case.low > 1:
            line_numbers += 1
        source = falls.get(case.position)
        labels.append(
            LabelFact(
                Constant(case.low, constant.name, constant.where),
                case.high,
                case.written,
                at,
                names.origin(source) if source is not None else None,
                source is not None and _marked(work, source, case.position),
                source is not None and overwrites(ways, case.target),
            )
        )
    default_does: Does = "none"
    fall: DefaultFall | None = None
    if switch.syntax.default is not None:
        source = falls.get(switch.syntax.default)
        region = default_region(function, switch, block, source is not None)
        default_does = does(ways, region)
        if source is not None:
            marked = _marked(work, source, switch.syntax.default)
            fall = default_fall(work, ways, switch, block, region, source, marked)
    return DispatchFact(
        seen.key.key,
        seen.key.instance,
        function.identity,
        expr_text(switch.value),
        where,
        tuple(labels),
        names.origin(switch.syntax.default) if switch.syntax.default is not None else None,
        default_does,
        tuple(names.origin(position) for position in switch.syntax.unreached),
        characters,
        line_numbers > 0 and line_numbers >= len([label for label in labels if label.constant.value > 1]),
        seen.key.scope == "local" and is_carried(scan, seen, block),
        is_packet(function, seen.key),
        _is_working(scan, switch.value),
        switch.syntax.end,
        "switch",
        fall,
    )


def _is_working(scan: Scan, value: Expr) -> bool:
    """Whether a dispatch is on a local variable that stands for the state."""
    inner = uncast(value)
    return (
        isinstance(inner, Load)
        and isinstance(inner.place, VariablePlace)
        and inner.place.variable.identity in {alias.variable for alias in scan.aliases if not alias.anywhere}
    )


def is_packet(function: Function, key: PlaceKey) -> bool:
    """Whether the object is reached through a local pointer that was made from a pointer to bytes."""
    root = key.root
    if root is None or root.storage != "automatic" or not isinstance(root.type, PointerType):
        return False
    made = [
        statement.value
        for block in function.blocks
        for statement in block.statements
        if isinstance(statement, Assign)
        and isinstance(statement.place, VariablePlace)
        and statement.place.variable.identity == root.identity
    ]
    return any(
        isinstance(value, Cast)
        and isinstance(inner := uncast(value).type, PointerType)
        and isinstance(inner.to, IntType)
        and inner.to.width == 8
        for value in made
    )


def _marked(work: Work, source: Position, label: Position) -> bool:
    """Whether a comment or attribute between two places says that the fall is meant."""
    return any(file == label.file and source.line <= line <= label.line for file, line in work.read.marked_falls)
