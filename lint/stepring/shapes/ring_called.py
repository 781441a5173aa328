"""The functions that ring code calls: what runs and proofs need besides the functions that are part of a ring.

A clamp, a conversion, a comparison of two times: without its body a call is one to unknown code. Large functions and
those many calls away are left out; they would bring half the program with them.
"""

from collections.abc import Iterable, Sequence

from stepring.meaning.types import Call, Function, FunctionName

LARGE = 40
"""Functions of more blocks than this are left out."""
LEVELS = 3


def called_by(rings: Sequence[Function], functions: Iterable[Function]) -> tuple[Function, ...]:
    """The unit's functions that ``rings`` call, directly or through others, in the unit's order."""
    by_name = {function.name: function for function in functions}
    known = {function.name for function in rings}
    found: set[str] = set()
    layer = list(rings)
    for _ in range(LEVELS):
        names = {name for function in layer for name in _called(function)} - known
        layer = [by_name[name] for name in sorted(names) if name in by_name and len(by_name[name].blocks) <= LARGE]
        known |= names
        found |= {function.name for function in layer}
    return tuple(function for name, function in by_name.items() if name in found)


def _called(function: Function) -> Iterable[str]:
    for block in function.blocks:
        for statement in block.statements:
            if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                yield statement.callee.name
