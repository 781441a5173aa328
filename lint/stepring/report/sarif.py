"""A run's outcome as a SARIF 2.1.0 log.

One idea: a verdict is a result kind. ``fail`` alone has a level; ``pass``, ``open`` and ``review`` have level ``none``
(sections 3.27.9 and 3.27.10). A witness is a code flow whose steps carry values; a machine is a graph; a ring stands
in the run's properties, for which SARIF has no member of its own. The log holds no time, no random id and no place
of the tree, so that the same checkout gives the same bytes wherever it lies (appendix F).
"""

from collections import defaultdict
from collections.abc import Callable, Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import sarif_om as om

from stepring import __version__
from stepring.paths.replay import start_values
from stepring.paths.witness_json import witness_to_json
from stepring.places import NOTICE_KINDS, Notice, Origin
from stepring.report import cwe
from stepring.report.assumptions import assumptions, assumptions_section, rests_on_assumptions
from stepring.report.fingerprints import KEY, fingerprints, in_order
from stepring.report.graphs import graph_of, traversal_of, verdict_counts
from stepring.report.locations import Register, message
from stepring.report.provenance import Checkout, checkout_of
from stepring.report.serialise import JSON, SCHEMA, log_to_json
from stepring.report.sources import BASES, CHECKOUT_BASE, OUTSIDE_BASE, ROOT_BASE, Sources
from stepring.report.text import clean, escape_message, function_name, joined, one_sentence
from stepring.report.types import Inspection, Outcome
from stepring.report.words import OTHER, assumed_by, level_of, open_reasons
from stepring.rule import Obligation, Rule
from stepring.shapes.types import Ring

ABOUT = (
    "Inspects embedded C for defects in state machines and ring-shaped storage. A verdict holds for the source, the "
    "data model and the assumptions stated; findings support a review and do not replace it."
)

# Troubles with what the user asked for; all other notices are troubles with the work (section 3.20.22).
_CONFIGURATION = frozenset(
    {"bad-database", "missing-compiler", "refused-compiler", "dropped-option", "bad-settings", "unknown-rule"}
)

# The general form of each verdict's message, for consumers that look messages up by id; results carry their own text.
_TEMPLATES = {
    "fail": "{} Found in '{{0}}', at '{{1}}'.",
    "open": "It could not be settled whether this holds in '{{0}}', at '{{1}}': {}",
    "review": "A person has to judge this in '{{0}}', at '{{1}}': {}",
    "pass": "Shown not to be so in '{{0}}', at '{{1}}': {}",
}

_EXIT_WORDS = {
    0: "Nothing was found at or above the fail level.",
    1: "Something was found at or above the fail level.",
    2: "The work could not be done in full.",
}


@dataclass(frozen=True, slots=True, eq=False)
class _Run:
    """What the parts of one log share."""

    outcome: Outcome
    register: Register
    rule_numbers: Mapping[str, int]
    rules: Mapping[str, Rule]
    machine_numbers: Mapping[str, int]
    ring_numbers: Mapping[str, int]
    prints: Mapping[Obligation, str]


def sarif_log(outcome: Outcome, kinds: Collection[str] = ("fail",), exit_code: int | None = None) -> dict[str, JSON]:
    """The log as JSON data; ``kinds`` are the verdicts that are written as results."""
    sources = Sources(outcome.root)
    ordered = in_order(outcome.obligations, sources)
    register = Register(sources)
    for file in _files(outcome, ordered, kinds):
        register.add_file(file)
    register.freeze()
    rule_ids = sorted({rule.id for rule in outcome.rules} | {one.rule for one in ordered})
    run = _Run(
        outcome=outcome,
        register=register,
        rule_numbers={rule: number for number, rule in enumerate(rule_ids)},
        rules={rule.id: rule for rule in outcome.rules},
        machine_numbers={machine.identity: number for number, machine in enumerate(outcome.program.machines)},
        ring_numbers={ring.identity: number for number, ring in enumerate(outcome.program.rings)},
        prints=fingerprints(ordered, sources),
    )
    results = [_result(one, run) for one in ordered if one.kind in kinds]
    verdicts = _verdicts(ordered)
    checkout = checkout_of(outcome.root)
    made = om.Run(
        tool=om.Tool(driver=_driver(run, rule_ids)),
        invocations=[_invocation(run, exit_code)],
        original_uri_base_ids=_bases(register, checkout),
        version_control_provenance=None if checkout is None else [checkout.details()],
        artifacts=register.artifacts(),
        graphs=[
            graph_of(machine, index, register, verdict_counts(verdicts[machine.identity]))
            for index, machine in enumerate(outcome.program.machines)
        ],
        results=results,
        taxonomies=_taxonomies(outcome.rules),
        column_kind="unicodeCodePoints",
        properties=_properties(run, verdicts),
    )
    made.logical_locations = list(register.logical.values()) or None
    return log_to_json(om.SarifLog(runs=[made], version="2.1.0", schema_uri=SCHEMA))


def _files(outcome: Outcome, ordered: Iterable[Obligation], kinds: Collection[str]) -> Iterable[str]:
    """Every file that the log names."""
    for one in ordered:
        if one.kind in kinds:
            yield one.where.file
            yield from (other.where.file for other in one.related)
            yield from (step.where.file for step in one.witness)
            if one.evidence is not None:
                yield one.evidence.ending.where.file
    for machine in outcome.program.machines:
        yield machine.where.file
        yield from (state.where.file for state in machine.states)
        yield from (step.where.file for step in machine.transitions)
    yield from (ring.where.file for ring in outcome.program.rings)
    yield from (notice.file for notice in outcome.notices if notice.file)


def _verdicts(ordered: Iterable[Obligation]) -> Mapping[str, list[str]]:
    """The verdicts on each machine and ring."""
    by_shape: dict[str, list[str]] = defaultdict(list)
    for one in ordered:
        if one.shape is not None:
            by_shape[one.shape].append(one.kind)
    return by_shape


# ---------------------------------------------------------------------------------------------------------- results


def _result(one: Obligation, run: _Run) -> Any:
    register = run.register
    logical = [] if one.function is None else [register.function(function_name(one.function))]
    if one.subject is not None:
        logical.append(register.subject(one.subject, one.subject_kind))
    made = om.Result(
        message=_result_message(one, register, one.rule in run.rules),
        rule_id=one.rule,
        rule_index=run.rule_numbers[one.rule],
        kind=one.kind,
        level=level_of(one) or "none",
        locations=[register.location(one.where, logical=logical)],
        related_locations=[
            _with_id(register.location(related.where, related.text), number)
            for number, related in enumerate(one.related, start=1)
        ]
        or None,
        partial_fingerprints={KEY: run.prints[one]},
        properties=_result_properties(one, run),
    )
    if one.witness:
        made.code_flows = [_code_flow(one, register)]
    machine = run.machine_numbers.get(one.shape or "")
    if machine is not None and one.states:
        traversal = traversal_of(run.outcome.program.machines[machine], machine, one.states)
        made.graph_traversals = None if traversal is None else [traversal]
    return made


def _result_message(one: Obligation, register: Register, known: bool) -> Any:
    """What, why and what to do, then links to the related places; the id leads to the rule's general wording."""
    opened = f"This is left open: {one_sentence(one.reason)}" if one.reason else ""
    text = escape_message(joined(one.what, opened, one.why, one.advice)) or "No text is given."
    links = [
        f"[{escape_message(_short_place(related.where, register))}]({number})"
        for number, related in enumerate(one.related[:3], start=1)
    ]
    place = function_name(one.function or "") or register.sources.of(one.where.file).uri
    full = text + (f" See {' and '.join(links)}." if links else "")
    if not known:  # then there is no general wording either
        return om.Message(text=full)
    return om.Message(
        text=full,
        id=one.kind,
        arguments=[clean(place), clean(one.subject or one.where.spelling) or "line " + str(one.where.line)],
    )


def _short_place(where: Origin, register: Register) -> str:
    return f"{register.sources.of(where.file).uri.rpartition('/')[2]}, line {where.line}"


def _with_id(location: Any, number: int) -> Any:
    location.id = number
    return location


def _result_properties(one: Obligation, run: _Run) -> dict[str, Any] | None:
    """Where the finding's machine (index in ``run.graphs``) or ring (index in ``run.properties.rings``) is, what the
    verdict rests on, why it is open in the ledger's words, and the witness as data that can be run again."""
    found: dict[str, Any] = {}
    for name, numbers in (("machine", run.machine_numbers), ("ring", run.ring_numbers)):
        if one.shape is not None and one.shape in numbers:
            found[name] = numbers[one.shape]
    if one.states:
        found["states"] = [clean(name) for name in one.states]
    if one.kind == "open":
        found["openAs"] = one.open_as or OTHER
    if clauses := assumed_by(one):
        found["assumed"] = [clean(one_sentence(clause)) for clause in clauses]
    if one.evidence is not None:
        found["witness"] = _cleaned(witness_to_json(one.evidence, str(run.outcome.root)))
    return found or None


def _cleaned(data: Any) -> Any:
    """JSON data that can be written as UTF-8 (see ``text.clean``)."""
    if isinstance(data, str):
        return clean(data)
    if isinstance(data, list):
        return [_cleaned(item) for item in data]
    return {name: _cleaned(item) for name, item in data.items()} if isinstance(data, dict) else data


def _code_flow(one: Obligation, register: Register) -> Any:
    last = len(one.witness)
    steps = [
        om.ThreadFlowLocation(
            location=register.location(step.where, step.text),
            state=_state(step.values),
            execution_order=number,
            importance="essential" if number == last else "important",
        )
        for number, step in enumerate(one.witness, start=1)
    ]
    start = one.initial or (start_values(one.evidence) if one.evidence is not None else ())
    flow = om.ThreadFlow(locations=steps, initial_state=_state(start))
    return om.CodeFlow(thread_flows=[flow], message=message("The steps that lead to the finding."))


def _state(values: Sequence[tuple[str, str]]) -> dict[str, Any] | None:
    """Values by expression; SARIF wants each text non-empty (3.38.9)."""
    texts = {name: escape_message(value) or "(empty)" for name, value in values}
    return {clean(name): om.MultiformatMessageString(text=text) for name, text in texts.items()} or None


# ---------------------------------------------------------------------------------------------------------- the tool


def _driver(run: _Run, rule_ids: Sequence[str]) -> Any:
    kinds = _notice_kinds(run.outcome.notices)
    return om.ToolComponent(
        name="stepring",
        version=__version__,
        semantic_version=__version__,
        short_description=om.MultiformatMessageString(text=ABOUT.partition(". ")[0] + "."),
        full_description=om.MultiformatMessageString(text=ABOUT),
        information_uri="sarif:/runs/0/tool/driver/fullDescription",
        rules=[
            _descriptor(rule, number, run.rules.get(rule), run.outcome.rules) for number, rule in enumerate(rule_ids)
        ],
        notifications=[
            om.ReportingDescriptor(
                id=kind,
                name="".join(word.capitalize() for word in kind.split("-")) + "Notice",
                short_description=om.MultiformatMessageString(text=text),
                help_uri=f"sarif:/runs/0/tool/driver/notifications/{number}/shortDescription",
            )
            for number, (kind, text) in enumerate(kinds.items())
        ],
        supported_taxonomies=[_cwe_reference()] if _cwe_numbers(run.outcome.rules) else None,
    )


def _descriptor(rule_id: str, number: int, rule: Rule | None, rules: Sequence[Rule]) -> Any:
    if rule is None:
        return om.ReportingDescriptor(id=rule_id)
    summary = one_sentence(rule.summary) or "A rule."
    page = page_of(rule)
    taxa = _cwe_numbers(rules)
    return om.ReportingDescriptor(
        id=rule.id,
        name=rule.name,
        short_description=om.MultiformatMessageString(text=escape_message(summary)),
        # The page is shown as it is: it takes no arguments, so its braces and brackets are not escaped.
        help=None if page is None else om.MultiformatMessageString(text=clean(page), markdown=clean(page)),
        help_uri=f"sarif:/runs/0/tool/driver/rules/{number}/{'shortDescription' if page is None else 'help'}",
        default_configuration=om.ReportingConfiguration(level=rule.level),
        message_strings={
            kind: om.MultiformatMessageString(text=template.format(escape_message(summary)))
            for kind, template in _TEMPLATES.items()
        },
        relationships=[_relationship(entry, taxa.index(entry)) for entry in sorted(set(rule.cwe))] or None,
    )


def page_of(rule: Rule) -> str | None:
    """The rule's page, with the assumptions that its verdicts rest on; None where its package has none."""
    try:
        page = rule.page().strip()
    except (OSError, ModuleNotFoundError):
        return None
    return f"{page}\n\n{assumptions_section()}" if page and rests_on_assumptions(rule) else page or None


def _relationship(entry: int, number: int) -> Any:
    """The rule's findings are contained in the CWE entry: kind ``superset`` (3.53)."""
    target = om.ReportingDescriptorReference(id=str(entry), index=number, tool_component=_cwe_reference())
    kinds = ["relevant"] if entry in cwe.RELATED_ONLY else ["superset"]
    return om.ReportingDescriptorRelationship(target=target, kinds=kinds)


def _cwe_reference() -> Any:
    return om.ToolComponentReference(name="CWE", index=0)


def _cwe_numbers(rules: Iterable[Rule]) -> list[int]:
    return sorted({entry for rule in rules for entry in rule.cwe})


def _taxonomies(rules: Iterable[Rule]) -> list[Any] | None:
    """CWE, with the entries that the rules use."""
    numbers = _cwe_numbers(rules)
    if not numbers:
        return None
    return [
        om.ToolComponent(
            name="CWE",
            version=cwe.VERSION,
            organization="MITRE",
            information_uri=cwe.URI,
            short_description=om.MultiformatMessageString(text="The MITRE Common Weakness Enumeration."),
            is_comprehensive=False,
            taxa=[_taxon(number) for number in numbers],
        )
    ]


def _taxon(number: int) -> Any:
    name = cwe.NAMES.get(number)
    return om.ReportingDescriptor(
        id=str(number),
        name=name,
        short_description=None if name is None else om.MultiformatMessageString(text=name + "."),
        help_uri=f"{cwe.URI}data/definitions/{number}.html",
    )


# ---------------------------------------------------------------------------------------------------------- the work


def _notice_kinds(notices: Iterable[Notice]) -> dict[str, str]:
    """Every kind of notice with its sentence, those that only a private stage gives included."""
    return NOTICE_KINDS | {notice.kind: "A notice." for notice in notices if notice.kind not in NOTICE_KINDS}


def _invocation(run: _Run, exit_code: int | None) -> Any:
    notices = run.outcome.notices
    numbers = {kind: number for number, kind in enumerate(_notice_kinds(notices))}
    return om.Invocation(
        execution_successful=all(notice.level != "error" for notice in notices),
        exit_code=exit_code,
        exit_code_description=None if exit_code is None else _EXIT_WORDS.get(exit_code),
        tool_execution_notifications=_notifications(run, numbers, lambda kind: kind not in _CONFIGURATION),
        tool_configuration_notifications=_notifications(run, numbers, lambda kind: kind in _CONFIGURATION),
    )


def _notifications(run: _Run, numbers: Mapping[str, int], wanted: Callable[[str], bool]) -> list[Any] | None:
    chosen = [notice for notice in dict.fromkeys(run.outcome.notices) if wanted(notice.kind)]
    return [_notification(notice, run, numbers[notice.kind]) for notice in chosen] or None


def _notification(notice: Notice, run: _Run, number: int) -> Any:
    made = om.Notification(
        message=message(one_sentence(_without_root(notice.text, run.outcome))),
        level=notice.level,
        descriptor=om.ReportingDescriptorReference(id=notice.kind, index=number),
    )
    if notice.file:
        column = notice.column or 0
        where = Origin(notice.file, notice.line or 0, column, column + 1)
        made.locations = [run.register.location(where)]
    return made


def _without_root(text: str, outcome: Outcome) -> str:
    """The text without the absolute path of the root, which would tie the log to one machine."""
    root = str(outcome.root).rstrip("/")
    return text.replace(root + "/", "") if root else text


def _bases(register: Register, checkout: Checkout | None) -> dict[str, Any]:
    """The bases in use; the root's own place is left out, so that the log is the same on every machine (3.14.14)."""
    used = {ROOT_BASE} | {source.base for source in register.files.values()}
    if checkout is not None and checkout.below:
        used.add(CHECKOUT_BASE)
    made = {base: om.ArtifactLocation(description=message(text)) for base, text in BASES.items() if base in used}
    if OUTSIDE_BASE in made:
        made[OUTSIDE_BASE].uri = "file:///"
    if checkout is not None and checkout.below:
        made[ROOT_BASE].uri, made[ROOT_BASE].uri_base_id = checkout.below, CHECKOUT_BASE
    return made


def _properties(run: _Run, verdicts: Mapping[str, Sequence[str]]) -> dict[str, Any]:
    coverage = run.outcome.coverage
    return {
        "rings": [
            _ring(ring, run.register, verdict_counts(verdicts.get(ring.identity, ())))
            for ring in run.outcome.program.rings
        ],
        "coverage": {
            "units": {"total": coverage.units_total, "read": coverage.units_read},
            "functions": {"total": coverage.functions_total, "read": coverage.functions_read},
        },
        "dataModels": [clean(model) for model in run.outcome.models],
        "ledger": verdict_counts([one.kind for one in run.prints]) | {"openAs": dict(open_reasons(run.prints))},
        "assumptions": list(assumptions(run.outcome.models)),
        "inspection": _inspection(run.outcome.inspection),
    }


def _inspection(asked: Inspection) -> dict[str, Any]:
    """What is needed to read the same units again, from the root; paths as plain text, not as URIs."""
    return {
        "folder": clean(asked.folder),
        "paths": [clean(path) for path in asked.paths],
        "compileCommands": None if asked.compile_commands is None else clean(asked.compile_commands),
        "dataModel": asked.data_model,
        "compilers": [clean(name) for name in asked.compilers],
        "useCompiler": asked.use_compiler,
    }


def _ring(ring: Ring, register: Register, verdicts: Mapping[str, int]) -> dict[str, Any]:
    return {
        "storage": clean(ring.storage),
        "capacity": ring.capacity,
        "indices": [clean(index.name) for index in ring.indices],
        "scheme": ring.scheme,
        "wrap": ring.wrap,
        "uri": register.sources.of(ring.where.file).uri,
        "line": ring.where.line,
        "verdicts": dict(verdicts),
        "roles": {clean(index.name): index.role for index in ring.indices},
        "types": {clean(index.name): clean(index.type_name) for index in ring.indices},
        "notes": [clean(note) for note in ring.notes],
    }
