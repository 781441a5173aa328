"""A function's graph as symbolic runs need it: an order in which ways meet, the loops, the variables in memory.

A loop is a head and all blocks from which a way leads back to it without leaving (the natural loop of the back edges to
the head). A way back to a block that does not dominate its source enters a loop in the middle; such a function is not
cut at heads.
"""

from dataclasses import dataclass

import networkx

from stepring.meaning.builder import successors
from stepring.meaning.types import (
    AddressOf,
    ElementPlace,
    FloatType,
    Function,
    IntType,
    MemberPlace,
    PlaceExpr,
    PointerType,
    VariablePlace,
)
from stepring.values.graph import shape_of
from stepring.values.scan import expressions_of, inside_place, places_of, walk_deep


@dataclass(frozen=True, slots=True, eq=False)
class Graph:
    """``order``: reachable blocks in reverse postorder; ``loops``: by head, the blocks of the loop; ``resident``: the
    identities of automatic variables that live in memory (aggregates, and scalars whose address is taken)."""

    order: tuple[int, ...]
    loops: dict[int, frozenset[int]]
    heads: frozenset[int]
    irreducible: bool
    resident: frozenset[str]


_graphs: dict[int, tuple[Function, Graph]] = {}


def graph_of(function: Function) -> Graph:
    """The prepared graph of a function, computed once."""
    known = _graphs.get(id(function))
    if known is not None and known[0] is function:
        return known[1]
    graph = _prepare(function)
    if len(_graphs) > 2048:
        _graphs.clear()
    _graphs[id(function)] = (function, graph)
    return graph


def _prepare(function: Function) -> Graph:
    shape = shape_of(function)
    order = tuple(sorted(shape.order, key=lambda block: shape.order[block]))
    place = {block: number for number, block in enumerate(order)}
    net: networkx.DiGraph[int] = networkx.DiGraph()
    net.add_nodes_from(order)
    for block in order:
        net.add_edges_from((block, target) for target in successors(function.blocks[block].terminator))
    loops: dict[int, frozenset[int]] = {}
    irreducible = False
    back = [(block, target) for block, target in net.edges if place[target] <= place[block]]
    if back:
        above = networkx.immediate_dominators(net, 0)
        for block, target in sorted(back):
            if not _dominates(above, target, block):
                irreducible = True
                continue
            inside = {target}
            pending = [block]
            while pending:
                here = pending.pop()
                if here not in inside:
                    inside.add(here)
                    pending.extend(net.predecessors(here))
            loops[target] = loops.get(target, frozenset()) | inside
    return Graph(order, loops, frozenset(target for _, target in back), irreducible, _resident(function))


def _dominates(above: dict[int, int], one: int, other: int) -> bool:
    while other != one:
        upper = above.get(other, other)
        if upper == other or upper is None:
            return False
        other = upper
    return True


def _resident(function: Function) -> frozenset[str]:
    found = {
        variable.identity
        for variable in (*function.variables, *function.parameters)
        if not isinstance(variable.type, IntType | PointerType | FloatType)
    }
    for block in function.blocks:
        for step in (*block.statements, block.terminator):
            expressions = list(expressions_of(step))
            places: list[PlaceExpr] = []
            if step is not block.terminator:
                places = list(places_of(step))  # type: ignore[arg-type]
            expressions += [inner for place in places for inner in inside_place(place)]
            for expression in expressions:
                for part in walk_deep(expression):
                    if isinstance(part, AddressOf):
                        base = part.place
                        while isinstance(base, MemberPlace | ElementPlace):
                            base = base.base
                        if isinstance(base, VariablePlace):
                            found.add(base.variable.identity)
    return frozenset(found)
