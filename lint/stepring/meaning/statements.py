"""Lowering of statements: control flow becomes blocks, and what rules need of the syntax is noted on the way.

A ``switch`` body is lowered as plain code in which each ``case`` starts a block, wherever it stands (N1570 6.8.4.2),
so that labels in inner loops and blocks need no rule of their own. Falls from one case into the next, code before the
first label and labels inside inner statements are noted on the ``Switch``.
"""

from collections.abc import Callable
from typing import Any

from pycparser import c_ast

from stepring.meaning.builder import (
    OpenSwitch,
    Work,
    emit,
    finish,
    jump,
    new_block,
    resume,
    temporary,
)
from stepring.meaning.expressions import settled_condition
from stepring.meaning.fold import convert, fold
from stepring.meaning.initial import declare_static, initialise
from stepring.meaning.lowering import arithmetic, condition, converted, effect, handle, value
from stepring.meaning.places import load
from stepring.meaning.scope import (
    FunctionSymbol,
    TypeName,
    build,
    index_tags,
    position,
    qualifiers,
)
from stepring.meaning.types import (
    ArrayType,
    Assign,
    Begin,
    CaseLabel,
    Const,
    Expr,
    FallThrough,
    FunctionType,
    IntType,
    Return,
    Switch,
    SwitchSyntax,
    Unknown,
    Variable,
    VariablePlace,
    VoidType,
)
from stepring.places import Position

_JUMPS = (c_ast.Break, c_ast.Continue, c_ast.Goto, c_ast.Return, c_ast.EmptyStatement, c_ast.Pragma)


def statement(work: Work, node: Any) -> None:
    """Lower one statement or block item."""
    if node is None:
        return
    work.at = position(node, work.at)
    handler = _STATEMENTS.get(type(node))
    if work.switches and not isinstance(node, c_ast.Case | c_ast.Default | c_ast.Compound):
        _note_in_switch(work, node)
    if handler is not None:
        handler(work, node)
    else:
        effect(work, node)


def _note_in_switch(work: Work, node: Any) -> None:
    inner = work.switches[-1]
    if isinstance(node, c_ast.Label | c_ast.Decl):
        return
    if not work.live and not isinstance(node, _JUMPS) and work.depth == inner.depth and not _holds_label(node):
        # One note for a run of dead statements, which share a block.
        if work.current not in work.dead_blocks:
            inner.unreached.append(position(node, work.at))
            work.dead_blocks.add(work.current)
    if not isinstance(node, c_ast.EmptyStatement | c_ast.Pragma):
        inner.latest = position(node, work.at)


def _holds_label(node: Any) -> bool:
    stack = [node]
    while stack:
        item = stack.pop()
        if isinstance(item, c_ast.Case | c_ast.Default | c_ast.Label):
            return True
        stack.extend(child for child in item if child is not None)
    return False


def _compound(work: Work, node: Any) -> None:
    outer = work.scope
    work.scope = outer.inner()
    for item in node.block_items or ():
        statement(work, item)
    work.scope = outer


def _inside(work: Work, node: Any) -> None:
    """A statement governed by another one: labels inside it are nested."""
    work.depth += 1
    outer = work.scope
    work.scope = outer.inner()
    statement(work, node)
    work.scope = outer
    work.depth -= 1


def _if(work: Work, node: Any) -> None:
    then, after = new_block(work), new_block(work)
    otherwise = new_block(work) if node.iffalse is not None else after
    condition(work, node.cond, then, otherwise)
    resume(work, then)
    _inside(work, node.iftrue)
    jump(work, after)
    if node.iffalse is not None:
        resume(work, otherwise)
        _inside(work, node.iffalse)
        jump(work, after)
    resume(work, after)


def _loop(work: Work, body: Any, test: Any, following: Any, *, first: bool) -> None:
    """``while``, ``do`` and ``for``: ``first`` says that the test comes before the body."""
    head, start, after = new_block(work), new_block(work), new_block(work)
    proceed = new_block(work)
    jump(work, head if first else start)
    settled = settled_condition(work, test) if test is not None else True

    def tested() -> None:
        if settled is True:
            jump(work, start)
        elif settled is False:
            jump(work, after)
        else:
            condition(work, test, start, after)

    if first:
        resume(work, head)
        tested()
    resume(work, start)
    work.breaks.append(after)
    work.continues.append(proceed)
    _inside(work, body)
    work.breaks.pop()
    work.continues.pop()
    jump(work, proceed)
    resume(work, proceed)
    if following is not None:
        effect(work, following)
    if first:
        jump(work, head)
    else:
        tested()
    resume(work, after)


def _while(work: Work, node: Any) -> None:
    _loop(work, node.stmt, node.cond, None, first=True)


def _do(work: Work, node: Any) -> None:
    _loop(work, node.stmt, node.cond, None, first=False)


def _for(work: Work, node: Any) -> None:
    outer = work.scope
    work.scope = outer.inner()
    if isinstance(node.init, c_ast.DeclList):
        for item in node.init.decls:
            statement(work, item)
    elif node.init is not None:
        effect(work, node.init)
    _loop(work, node.stmt, node.cond, node.next, first=True)
    work.scope = outer


def _switch(work: Work, node: Any) -> None:
    at = position(node, work.at)
    control: Expr = arithmetic(work, value(work, node.cond))
    type_ = control.type
    if not isinstance(type_, IntType):
        type_ = work.scope.evaluator.int_type(work)
        control = Unknown(type_, "a control that is no integer")
    head = work.current
    after, body = new_block(work), new_block(work)
    work.depth += 1
    # The labels' blocks count as reached if the switch is: control goes straight to them.
    opened = OpenSwitch(type_, after, work.depth)
    opened.head_live = work.live
    work.switches.append(opened)
    work.breaks.append(after)
    resume(work, body)
    statement(work, node.stmt)
    end = work.at.line
    jump(work, after)
    work.breaks.pop()
    work.switches.pop()
    work.depth -= 1
    resume(work, head)
    default = opened.default[0] if opened.default is not None else after
    syntax = SwitchSyntax(
        at,
        tuple(opened.falls),
        tuple(opened.unreached),
        opened.default[1] if opened.default is not None else None,
        opened.nested,
        end,
    )
    finish(work, Switch(control, tuple(opened.cases), default, syntax))
    resume(work, after)


def _enter_label(work: Work, at: Position) -> int:
    """Start the block of a ``case`` or ``default``; note a fall from the statements before it."""
    opened = work.switches[-1]
    block = new_block(work)
    if work.live and opened.labelled and opened.latest is not None:
        opened.falls.append(FallThrough(opened.latest, at))
    jump(work, block)
    if opened.head_live:
        work.reached.add(block)
    resume(work, block)
    opened.labelled = True
    opened.latest = None
    if work.depth != opened.depth:
        opened.nested = True
    return block


def _case(work: Work, node: Any) -> None:
    if not work.switches:
        return
    opened = work.switches[-1]
    at = position(node, work.at)
    target = _enter_label(work, at)
    low_node = high_node = node.expr
    if isinstance(node.expr, c_ast.FuncCall) and getattr(node.expr.name, "name", "") == "__stepring_range":
        low_node, high_node = node.expr.args.exprs
    low, high = (work.scope.evaluator.constant(work.scope, item) for item in (low_node, high_node))
    low_value = fold(low) if low is not None else None
    high_value = fold(high) if high is not None else None
    if low_value is not None and high_value is not None:
        name = low.name if isinstance(low, Const) else None
        opened.cases.append(
            CaseLabel(
                convert(low_value, opened.control),
                convert(high_value, opened.control),
                target,
                at,
                position(low_node, at),
                name,
                low_value,
            )
        )
    for item in node.stmts or ():
        statement(work, item)


def _default(work: Work, node: Any) -> None:
    if not work.switches:
        return
    at = position(node, work.at)
    work.switches[-1].default = (_enter_label(work, at), at)
    for item in node.stmts or ():
        statement(work, item)


def _break(work: Work, node: Any) -> None:
    if work.breaks:
        jump(work, work.breaks[-1])
        resume(work, new_block(work))


def _continue(work: Work, node: Any) -> None:
    if work.continues:
        jump(work, work.continues[-1])
        resume(work, new_block(work))


def _goto(work: Work, node: Any) -> None:
    jump(work, _label_block(work, node.name))
    resume(work, new_block(work))


def _label(work: Work, node: Any) -> None:
    block = _label_block(work, node.name)
    jump(work, block)
    # Where the jumps to it stand is not known yet; taking it as reached errs on the side of saying less.
    work.reached.add(block)
    resume(work, block)
    statement(work, node.stmt)


def _label_block(work: Work, name: str) -> int:
    if name not in work.labels:
        work.labels[name] = new_block(work)
    return work.labels[name]


def _return(work: Work, node: Any) -> None:
    at = position(node, work.at)
    result = None
    if node.expr is not None:
        result = value(work, node.expr)
        result = None if isinstance(work.returns, VoidType) else converted(work, result, work.returns)
    finish(work, Return(result, at))
    resume(work, new_block(work))


def _declaration(work: Work, node: Any) -> None:
    index_tags(node.type, work.scope.tags, {})
    at = position(node, work.at)
    if not node.name:
        build(work.scope, node.type)
        return
    type_ = build(work.scope, node.type, node.name)
    if isinstance(type_, FunctionType):
        work.scope.symbols[node.name] = FunctionSymbol(node.name, type_, False)
        return
    if "extern" in node.storage:
        known = work.scope.file.symbols.get(node.name) or work.scope.lookup(node.name)
        if not isinstance(known, Variable):
            known = Variable(node.name, node.name, type_, "extern", **qualifiers(work.scope, node), position=at)
        work.scope.symbols[node.name] = known
        return
    if isinstance(type_, ArrayType) and type_.length is None and node.init is not None:
        type_ = ArrayType(type_.element, work.scope.evaluator.initial_length(work.scope, type_, node.init))
    static = "static" in node.storage
    identity = f"{node.name}@{at.line}:{at.column}"
    if static:
        identity = f"{work.file}:{work.function}:{node.name}@{at.line}.{at.column}"
    variable = Variable(
        node.name,
        identity,
        type_,
        "static-local" if static else "automatic",
        **qualifiers(work.scope, node),
        position=at,
    )
    # The name is in scope in its own initialiser (6.2.1p7).
    work.scope.symbols[node.name] = variable
    work.variables[identity] = variable
    if static:
        work.objects.append(declare_static(work, variable, node.init, at))
        return
    emit(work, Begin(variable, at))
    if node.init is not None:
        initialise(work, VariablePlace(variable), node.init)


def _typedef(work: Work, node: Any) -> None:
    index_tags(node.type, work.scope.tags, {})
    work.scope.symbols[node.name] = TypeName(build(work.scope, node.type, node.name), "volatile" in node.quals)


def _nothing(work: Work, node: Any) -> None:
    return None


def _attributed(work: Work, node: Any) -> None:
    statement(work, node.stmt)


def _statement_expression(work: Work, node: Any) -> Expr:
    """GNU C: the value is that of the last expression statement."""
    outer = work.scope
    work.scope = outer.inner()
    items = list(node.block_items or ())
    for item in items[:-1]:
        statement(work, item)
    result: Expr = Unknown(VoidType(), "void")
    if items:
        last = items[-1]
        if type(last) in _STATEMENTS:
            statement(work, last)
        else:
            result = value(work, last)
            if not isinstance(result.type, VoidType):
                kept = temporary(work, result.type)
                emit(work, Assign(kept, result, work.at))
                result = load(work, kept)
    work.scope = outer
    return result


_STATEMENTS: dict[type, Callable[[Work, Any], None]] = {
    c_ast.Compound: _compound,
    c_ast.If: _if,
    c_ast.While: _while,
    c_ast.DoWhile: _do,
    c_ast.For: _for,
    c_ast.Switch: _switch,
    c_ast.Case: _case,
    c_ast.Default: _default,
    c_ast.Break: _break,
    c_ast.Continue: _continue,
    c_ast.Goto: _goto,
    c_ast.Label: _label,
    c_ast.Return: _return,
    c_ast.Decl: _declaration,
    c_ast.Typedef: _typedef,
    c_ast.EmptyStatement: _nothing,
    c_ast.Pragma: _nothing,
    c_ast.StaticAssert: _nothing,
    c_ast.AttributedStatement: _attributed,
    c_ast.AttributeDeclaration: _nothing,
}

handle(c_ast.Compound, _statement_expression)
