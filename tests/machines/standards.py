"""Machines that standards publish as tables, ready to be written down in every form.

IEEE Std 1149.1, clause 6.1.1 (the TAP controller), RFC 1661 section 4.1 (the option negotiation automaton of the Link
Control Protocol), RFC 9293 section 3.3.2, figure 5 with its notes 1 and 2 (the states of a TCP connection).
"""

import csv
import re

from tests.machines.programs import Made
from tests.machines.style import Family, Storage, Style, clean
from tests.machines.tables import Cells, Step, Table
from tests.machines.written import FORMS
from tests.marks import DATA

LCP_ACTIONS = (
    "/* The option negotiation automaton of the Link Control Protocol, RFC 1661 section 4.1.",
    " * Actions: irc and zrc set the restart count, to its start or to zero; tlu, tld, tls and tlf tell the layers",
    " * above and below that this one is up, down, started or finished; scr, sca, scn, str, sta, scj and ser send",
    " * packets: requests and answers to them. An event that cannot happen in a state has no step there. */",
)
TCP_ACTIONS = (
    "/* The states of a TCP connection, RFC 9293 section 3.3.2, figure 5 with its notes 1 and 2.",
    " * The caller gives EV_RCV_RST in SYN-RECEIVED only to a connection that was opened passively (note 1). */",
)
TAP_ACTIONS = (
    "/* The Test Access Port (TAP) controller of IEEE Std 1149.1: 16 states, one step at each rising edge of TCK. */",
)

STYLES: dict[str, tuple[Storage, Family, bool, int]] = {
    "switch": ("static", "define", True, 0),
    "state then event": ("member", "enum", False, 0),
    "event then state": ("member", "enum", False, 0),
    "if-chain": ("static", "define", True, 0),
    "table": ("static", "enum", False, 1),
    "rows": ("member", "define", False, 0),
    "function pointer": ("member", "enum", False, 0),
    "next returned": ("static", "enum", False, 0),
    "handlers in a table": ("member", "enum", False, 1),
    "event functions": ("object member", "define", False, 0),
    "goto": ("static", "enum", False, 0),
    "next variable": ("bit-field", "define", False, 0),
    "setter": ("element", "enum", True, 0),
}
"""For each form: where the state is kept, how its constants are declared, how events are told apart, the variant."""

WRITERS = {"state then event": "switch", "handlers in a table": "next returned"}
"""Forms whose writer has another name."""


def rows(name: str) -> list[dict[str, str]]:
    """The rows of a published table."""
    with (DATA / name).open(encoding="utf-8", newline="") as text:
        return list(csv.DictReader((line for line in text if not line.startswith("#")), delimiter="\t"))


def spelled(prefix: str, name: str) -> str:
    """A state's or event's name in a table as C spells it."""
    name = name.replace("+ACK", "AND ACK").replace(" + ", " AND ").replace("=", " ")
    name = re.sub(r"\+$", " PLUS", re.sub(r"-$", " MINUS", name))
    return prefix + re.sub(r"[^A-Z0-9]+", "_", name.upper())


def _table(noun: str, cells: list[tuple[str, str, str, tuple[str, ...]]]) -> Table:
    """A table from (state, event, next state, actions), states and events in the order of their first mention."""
    prefix = f"{noun.upper()}_"
    named: Cells = {}
    for state, event, target, actions in cells:
        named[spelled(prefix, state), spelled("EV_", event)] = (Step(spelled(prefix, target), actions=actions),)
    states = list(dict.fromkeys(state for state, _ in named))
    return Table(
        noun,
        {state: value for value, state in enumerate(states)},
        tuple(dict.fromkeys(event for _, event in named)),
        named,
        states[0],
    )


def tap() -> Table:
    """The TAP controller: 16 states, two values of TMS."""
    words = {"0": "TMS low", "1": "TMS high"}
    return _table("tap", [(row["state"], words[row["tms"]], row["next_state"], ()) for row in rows("jtag_tap.tsv")])


def lcp() -> Table:
    """The negotiation automaton: 10 states, 16 events, 120 cells; what cannot happen is left out."""
    return _table(
        "lcp",
        [
            (row["state"], row["event"], row["next_state"], tuple(act for act in row["actions"].split(",") if act))
            for row in rows("rfc1661_lcp.tsv")
            if row["status"] == "legal"
        ],
    )


def tcp() -> Table:
    """The TCP connection: 11 states, 21 transitions."""
    return _table(
        "tcp", [(row["state"], row["event"], row["next_state"], _acts(row)) for row in rows("rfc9293_tcp.tsv")]
    )


def _acts(row: dict[str, str]) -> tuple[str, ...]:
    parts = [part.strip() for part in row["action"].split(";")]
    return tuple(spelled("", part).lower() for part in parts if part not in ("", "x"))


MACHINES = {"tap": (tap, TAP_ACTIONS), "lcp": (lcp, LCP_ACTIONS), "tcp": (tcp, TCP_ACTIONS)}


def published(machine: str, form: str) -> Made:
    """A published machine in a form."""
    table, comment = MACHINES[machine][0](), MACHINES[machine][1]
    storage, family, chains, variant = STYLES[form]
    style = Style(table, storage, family, chains=chains, variant=variant, comment=comment)
    writer = WRITERS.get(form, form)
    text, lines = clean(FORMS[writer](style))
    number = list(MACHINES).index(machine) * len(STYLES) + list(STYLES).index(form)
    return Made(number, writer, style, table, "", (), text, lines, (), (), frozenset(), frozenset())
