"""What the rules on machines share: names that mean something, and obligations with a machine's particulars filled
in."""

import re
from typing import Any

from stepring.places import Origin
from stepring.rule import Kind, Level, Obligation
from stepring.shapes.types import Dispatch, Machine

# Names that bound or count a group of constants rather than name a state (common practice).
_BOUND = re.compile(
    r"(?:^|_)(?:count|max|maximum|num|number|nr|last|first|min|size|total|limit|mask|invalid|undefined|undef|unknown|"
    r"reserved|none|nstates|states|n|sentinel|length|len|end_?marker)(?:_|$|s$)",
    re.IGNORECASE,
)
# Names of states in which a machine is meant to rest until something outside restarts it (common practice).
_FINAL = re.compile(
    r"(?:^|_)(?:done|end|ended|final|finish|finished|fault|faulted|fail|failed|failure|error|err|halt|halted|stop|stopped|"
    r"dead|off|abort|aborted|close|closed|complete|completed|exit|exited|locked|lockout|disabled|shutdown|terminated|"
    r"terminate|success|ok|panic|crash|crashed|bad|free|freed|sync_lost|destroyed|released|eof)(?:_|$)",
    re.IGNORECASE,
)


def short(function: str) -> str:
    """A function's name without the file that a static one's identity carries."""
    return function.rsplit(":", 1)[-1]


def is_bound(name: str) -> bool:
    """Whether a constant's name says that it bounds or counts the states."""
    return bool(_BOUND.search(_words(name)))


def is_final(name: str) -> bool:
    """Whether a state's name says that the machine may rest in it."""
    return bool(_FINAL.search(_words(name)))


def _words(name: str) -> str:
    """Camel case told apart by underscores: ``STATE_RxDone`` gives ``STATE_Rx_Done``."""
    return re.sub(r"(?<=[a-z0-9])(?=[A-Z])", "_", name)


def listed(names: list[str] | tuple[str, ...]) -> str:
    """``A``, ``A and B``, ``A, B and C``; long lists are cut."""
    shown = list(names[:6])
    if len(names) > 6:
        return f"{', '.join(shown)} and {len(names) - 6} more"
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}" if shown else "none"


def main_dispatch(machine: Machine) -> Dispatch:
    """The dispatch with most labels: where a reader would look for a state's case, a ``switch`` first."""
    return max(machine.dispatches, key=lambda dispatch: (dispatch.form == "switch", len(dispatch.labels)))


def about(
    rule: str, machine: Machine, kind: Kind, where: Origin, what: str, level: Level | None = None, **rest: Any
) -> Obligation:
    """An obligation on a machine."""
    return Obligation(
        rule,
        kind,
        where,
        what,
        level if kind == "fail" else None,
        subject=machine.variable,
        subject_kind=machine.kind,
        shape=machine.identity,
        **rest,
    )
