"""The IR's temporaries replaced by what they were computed from, for a reader."""

import re

from stepring.meaning.show import expr_text, statement_text
from stepring.meaning.types import Assign, Call, Function, VariablePlace

_TEMPORARY = re.compile(r"%\d+")


def spelled(function: Function, text: str) -> str:
    """A condition with its temporaries replaced by what they were computed from."""
    if "%" not in text:
        return text
    meaning: dict[str, str] = {}
    for block in function.blocks:
        for statement in block.statements:
            if isinstance(statement, Assign) and isinstance(statement.place, VariablePlace):
                name, source = statement.place.variable.name, expr_text(statement.value)
            elif isinstance(statement, Call) and isinstance(statement.result, VariablePlace):
                name, source = statement.result.variable.name, statement_text(statement).split(" = ", 1)[-1]
            else:
                continue
            if name.startswith("%"):
                # Several sources: the arms of a choice.
                meaning[name] = f"{meaning[name]} or {source}" if name in meaning else source
    for _ in range(4):
        text = _TEMPORARY.sub(lambda match: meaning.get(match[0], match[0]), text)
    return text
