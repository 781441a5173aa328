"""What a rule is, and what it says: obligations with verdicts.

A rule is data (``Rule``) with one function that takes the ``Program`` and yields an ``Obligation`` for each thing
that must hold at one place. Rules register in the entry point group ``stepring.rules``; ``load_rules`` finds them
all, private ones included. The verdict words are SARIF's result kinds (2.1.0 section 3.27.9).
"""

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from importlib.metadata import entry_points
from importlib.resources import files
from typing import Literal, TypeAlias

from stepring.paths.witness import Witness
from stepring.places import Origin
from stepring.shapes.ring_types import OpenReason
from stepring.shapes.types import Program

Kind: TypeAlias = Literal["pass", "fail", "open", "review"]
Level: TypeAlias = Literal["error", "warning", "note"]
LEVELS: tuple[Level, ...] = ("note", "warning", "error")


@dataclass(frozen=True, slots=True)
class Related:
    """Another place that explains a finding."""

    where: Origin
    text: str


@dataclass(frozen=True, slots=True)
class WitnessStep:
    """One step of a witness: where control is, what happens there, and the values that matter, as (expression,
    text)."""

    where: Origin
    text: str
    values: tuple[tuple[str, str], ...] = ()


@dataclass(frozen=True, slots=True)
class Obligation:
    """One thing that must hold at one place, and the verdict on it.

    ``what`` is one sentence, the finding itself; ``why`` says why it matters, ``advice`` what to do; ``reason`` is
    why an ``open`` one is open. ``level`` is set exactly where ``kind`` is ``fail``. ``subject`` is the state
    variable or ring storage and ``shape`` the machine's or ring's identity; ``states`` name the graph nodes
    concerned. ``witness`` are the steps that make it fail, ``evidence`` is the same as data that can be run again.
    ``open_as`` is the reason of an ``open`` one in the ledger's words; ``assumed`` are clauses that the verdict rests
    on beyond the assumptions that all verdicts share.
    """

    rule: str
    kind: Kind
    where: Origin
    what: str
    level: Level | None = None
    why: str = ""
    advice: str = ""
    reason: str = ""
    function: str | None = None
    subject: str | None = None
    subject_kind: Literal["variable", "member"] = "variable"
    shape: str | None = None
    states: tuple[str, ...] = ()
    related: tuple[Related, ...] = ()
    initial: tuple[tuple[str, str], ...] = ()
    witness: tuple[WitnessStep, ...] = ()
    evidence: Witness | None = None
    open_as: OpenReason | None = None
    assumed: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Rule:
    """A rule's identity: stable opaque ``id``, ``name`` in words run together, one-sentence ``summary``, usual
    ``level``.

    ``cwe`` are numbers of CWE 4.20 entries that contain what the rule finds. ``package`` holds ``pages/ID.md``.
    """

    id: str
    name: str
    summary: str
    level: Level
    check: Callable[[Program], Iterable[Obligation]]
    cwe: tuple[int, ...] = ()
    package: str = "stepring_rules"

    def page(self) -> str:
        """The rule's page as Markdown text."""
        return files(self.package).joinpath("pages", f"{self.id}.md").read_text(encoding="utf-8")


def load_rules() -> tuple[Rule, ...]:
    """All registered rules, ordered by id."""
    found: list[Rule] = [point.load() for point in entry_points(group="stepring.rules")]
    return tuple(sorted(found, key=lambda rule: rule.id))
