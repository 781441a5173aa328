"""A unit's meaning: its scope, its objects with static storage, and each function lowered to IR.

Functions that several units share (inline ones of a header) are lowered once for the run; ``Meanings`` keeps them. A
function that cannot be lowered costs itself and is reported.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from pycparser import c_ast

from stepring.meaning import calls as _calls  # noqa: F401 - it fills the table of lowering
from stepring.meaning.builder import OpenBlock, Work, close, int_type, successors
from stepring.meaning.constants import element_type, text
from stepring.meaning.initial import declare_static, initial_length, initialise
from stepring.meaning.lowering import value
from stepring.meaning.models import integer
from stepring.meaning.places import addressed_names, place, taken_labels
from stepring.meaning.scope import (
    DeclarationIndex,
    FileScope,
    FunctionSymbol,
    Scope,
    adjusted,
    build,
    index_declaration,
    position,
    qualifiers,
)
from stepring.meaning.statements import statement
from stepring.meaning.types import (
    ArrayType,
    Block,
    Branch,
    CaseLabel,
    CType,
    DataModel,
    Expr,
    Function,
    FunctionType,
    IntType,
    Jump,
    Object,
    Stop,
    Switch,
    SwitchSyntax,
    TypedUnit,
    TypeTable,
    Unknown,
    Variable,
    VoidType,
)
from stepring.places import Notice
from stepring.read.types import Declaration, ReadUnit


@dataclass(slots=True)
class Evaluator:
    """What building types needs of lowering: constant expressions, types of expressions, array lengths."""

    def constant(self, scope: Scope, node: Any) -> Expr | None:
        """A constant expression's lowered form, or None where it has side effects or reads control flow."""
        work = _scratch(scope)
        result = value(work, node)
        if len(work.blocks) > 1 or work.blocks[0].statements:
            return None
        return result

    def type_of(self, scope: Scope, node: Any) -> CType:
        """An expression's type; nothing is evaluated. An array does not decay (6.3.2.1p3)."""
        work = _scratch(scope)
        try:
            where = place(work, node)
        except (AttributeError, TypeError):
            where = None
        if where is not None:
            return where.type
        if isinstance(node, c_ast.Constant) and node.type == "string":
            return ArrayType(element_type(scope.file.model, node.value), len(text(node.value)) + 1)
        return value(work, node).type

    def initial_length(self, scope: Scope, type_: CType, init: Any) -> int | None:
        """The number of elements that an initialiser gives an array."""
        return initial_length(scope, type_, init)

    def initialise(self, work: Work, target: Any, init: Any) -> None:
        """Initialise an automatic object."""
        initialise(work, target, init)

    def int_type(self, work: Work) -> IntType:
        """``int``."""
        return int_type(work)


def _scratch(scope: Scope) -> Work:
    work = Work(scope, "", "", VoidType())
    work.blocks.append(OpenBlock())
    work.reached.add(0)
    return work


@dataclass(slots=True)
class Meanings:
    """What a run keeps between units: indexes of declarations, and functions and objects already lowered."""

    indexes: dict[str, DeclarationIndex] = field(default_factory=dict)
    functions: dict[tuple[str, str], tuple[Function, tuple[Object, ...]]] = field(default_factory=dict)


def file_scope(unit: ReadUnit, model: DataModel, meanings: Meanings) -> Scope:
    """The unit's file scope."""
    ordinary: dict[str, list[tuple[Any, Declaration]]] = {}
    tags: dict[str, Any] = {}
    enumerators: dict[str, Any] = {}
    attributes: dict[str, frozenset[str]] = {}
    packed: set[int] = set()
    for declaration in unit.declarations:
        index = meanings.indexes.get(declaration.key)
        if index is None:
            index = meanings.indexes[declaration.key] = index_declaration(declaration)
        for name, node in index.ordinary.items():
            ordinary.setdefault(name, []).append((node, declaration))
        tags.update(index.tags)
        enumerators.update(index.enumerators)
        packed |= index.packed
        if declaration.attributes:
            for name in declaration.names:
                attributes[name] = attributes.get(name, frozenset()) | declaration.attributes
    scope = Scope(FileScope(model, ordinary, tags, enumerators, attributes, packed=packed))
    scope.evaluator = Evaluator()
    return scope


def lower_unit(unit: ReadUnit, model: DataModel, meanings: Meanings) -> TypedUnit:
    """The meaning of a unit."""
    scope = file_scope(unit, model, meanings)
    functions: list[Function] = []
    objects: list[Object] = []
    notices: list[Notice] = []
    defined: set[str] = set()
    for declaration in unit.declarations:
        for node in declaration.nodes:
            if isinstance(node, c_ast.FuncDef):
                key = (declaration.key, model.name)
                try:
                    known = meanings.functions.get(key)
                    if known is None:
                        known = meanings.functions[key] = lower_function(scope, node, declaration)
                    functions.append(known[0])
                    objects.extend(known[1])
                except RecursionError:
                    notices.append(_left_out(node, "its expressions are nested too deeply"))
                except Exception as trouble:  # one function's trouble must not cost the unit
                    notices.append(
                        _left_out(node, f"it could not be given a meaning ({type(trouble).__name__}: {trouble})")
                    )
            elif isinstance(node, c_ast.Decl) and node.name and node.name not in defined:
                try:
                    found = _object(scope, node, declaration)
                except RecursionError:
                    notices.append(_left_out(node, "its type or initialiser is nested too deeply"))
                    continue
                if found is not None:
                    defined.add(node.name)
                    objects.append(found)
    for name in list(scope.file.enumerators):
        scope.lookup(name)
    return TypedUnit(
        tuple(functions), tuple(objects), TypeTable(model, scope.file.structs, scope.file.enums), tuple(notices)
    )


def _left_out(node: Any, why: str) -> Notice:
    at = position(node)
    if isinstance(node, c_ast.FuncDef):
        kind, name = "skipped-function", node.decl.name
    else:
        kind, name = "skipped-declaration", node.name
    return Notice(kind, "warning", f"{name} was left out: {why}.", at.file, at.line, at.column)


def _object(scope: Scope, node: Any, declaration: Declaration) -> Object | None:
    symbol = scope.lookup(node.name)
    if not isinstance(symbol, Variable) or symbol.storage == "extern":
        return None
    if node.init is None and any(
        other.init is not None for other, _ in scope.file.ordinary[node.name] if isinstance(other, c_ast.Decl)
    ):
        return None
    work = _scratch(Scope(scope.file, None, {}, {}, declaration.typeofs, scope.evaluator))
    return declare_static(work, symbol, node.init, position(node))


def lower_function(scope: Scope, node: Any, declaration: Declaration) -> tuple[Function, tuple[Object, ...]]:
    """One function definition as IR, and the static objects declared inside it."""
    name = node.decl.name
    at = position(node.decl, declaration.start)
    symbol = scope.lookup(name)
    assert isinstance(symbol, FunctionSymbol)
    type_: FunctionType = symbol.type
    top = Scope(scope.file, scope, {}, {}, declaration.typeofs, scope.evaluator)
    work = Work(top, name, at.file, type_.returns, at=at, addressed=addressed_names(node.body))
    work.blocks.append(OpenBlock())
    work.reached.add(0)
    parameters = _parameters(work, node, type_)
    statement(work, node.body)
    _join_labels(work, taken_labels(node.body) if work.computed_gotos else ())
    static = symbol.static or "static" in node.decl.storage
    function = Function(
        name,
        f"{at.file}:{name}" if static else name,
        type_,
        parameters,
        tuple(work.variables.values()),
        _pruned(close(work)),
        at,
        work.at.line,
        static,
        declaration.own,
        declaration.attributes | scope.file.attributes.get(name, frozenset()),
    )
    return function, tuple(work.objects)


def _parameters(work: Work, node: Any, type_: FunctionType) -> tuple[Variable, ...]:
    declared = node.decl.type.args.params if getattr(node.decl.type, "args", None) is not None else []
    by_name = {item.name: item for item in node.param_decls or ()}
    found: list[Variable] = []
    for number, item in enumerate(declared):
        item = by_name.get(item.name, item) if isinstance(item, c_ast.ID) else item
        if isinstance(item, c_ast.EllipsisParam):
            continue
        kind: CType = integer(work.model, "int")
        quals: dict[str, bool] = {}
        if isinstance(item, c_ast.Decl | c_ast.Typename):
            kind = adjusted(work.model, build(work.scope, item.type, item.name or ""))
            quals = qualifiers(work.scope, item)
        if isinstance(kind, VoidType):
            continue
        # A parameter without a name still takes an argument.
        name = getattr(item, "name", None) or f"parameter {number + 1}"
        at = position(item, work.at)
        variable = Variable(name, f"{name}@{at.line}:{at.column}", kind, "parameter", **quals, position=at)
        work.scope.symbols[name] = variable
        work.variables[variable.identity] = variable
        found.append(variable)
    return tuple(found)


def _join_labels(work: Work, taken: Sequence[str]) -> None:
    """A computed goto can lead to every label whose address is taken."""
    if not work.computed_gotos:
        return
    targets = [work.labels[name] for name in taken if name in work.labels]
    int_ = int_type(work)
    at = work.at
    for number in work.computed_gotos:
        if targets:
            cases = tuple(CaseLabel(i, i, block, at, at) for i, block in enumerate(targets))
            syntax = SwitchSyntax(at, (), (), None, False, at.line)
            work.blocks[number].terminator = Switch(Unknown(int_, "a computed goto"), cases, targets[-1], syntax)


def _pruned(blocks: tuple[Block, ...]) -> tuple[Block, ...]:
    """Drop blocks that nothing leads to or that only jump on; renumber the rest in order of first visit."""
    order: list[int] = []
    onward = [_onward(blocks, number) for number in range(len(blocks))]
    seen = {0}
    pending = [0]
    while pending:
        number = pending.pop()
        order.append(number)
        for target in reversed(_targets(blocks[number])):
            target = onward[target]
            if target not in seen:
                seen.add(target)
                pending.append(target)
    place = {old: new for new, old in enumerate(order)}
    renumber = {old: place[target] for old, target in enumerate(onward) if target in place}
    return tuple(_renumbered(blocks[old], renumber) for old in order)


def _onward(blocks: tuple[Block, ...], number: int) -> int:
    """Where a block leads that does nothing but jump; a loop of such blocks stays as it is."""
    passed = {number}
    while True:
        block = blocks[number]
        if block.statements or not isinstance(block.terminator, Jump) or block.terminator.target in passed:
            return number
        number = block.terminator.target
        passed.add(number)


def _targets(block: Block) -> tuple[int, ...]:
    return () if isinstance(block.terminator, Stop) else successors(block.terminator)


def _renumbered(block: Block, numbers: dict[int, int]) -> Block:
    end = block.terminator
    if isinstance(end, Jump):
        end = Jump(numbers[end.target])
    elif isinstance(end, Branch):
        end = replace(end, then=numbers[end.then], otherwise=numbers[end.otherwise])
    elif isinstance(end, Switch):
        cases = tuple(replace(case, target=numbers[case.target]) for case in end.cases)
        end = replace(end, cases=cases, default=numbers[end.default])
    return Block(block.statements, end)
