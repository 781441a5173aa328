"""The inventory as one HTML file: tables, drawings and links to the source, with nothing to fetch and nothing to run.

The layout stands in ``inventory.html`` (jinja2, every value escaped); the drawings come from ``diagram``. Links are
relative to the folder of the page where that is known, so that they open beside a checkout.
"""

import os
from pathlib import Path
from urllib.parse import quote

from jinja2 import Environment, PackageLoader, StrictUndefined, select_autoescape
from markupsafe import Markup

from stepring.places import Origin
from stepring.report.diagram import machine_svg
from stepring.report.sources import Sources
from stepring.report.tables import MachineTables, machine_tables, ring_tables
from stepring.report.text import shown_path
from stepring.report.types import Outcome
from stepring.report.words import CAUTION, coverage_sentence


def inventory_page(outcome: Outcome, target: Path | None = None, base: Path | None = None) -> str:
    """The page as text. ``target`` is where it will stand, ``base`` the folder that shown paths are relative to."""
    sources = Sources(outcome.root)
    folder = (target.parent if target is not None else Path()).absolute()

    def file(where: Origin) -> str:
        return shown_path(sources.of(where.file).file, base)

    def link(where: Origin) -> str:
        path = outcome.root / sources.of(where.file).file
        return f"{quote(Path(os.path.relpath(path, folder)).as_posix())}#L{where.line}"

    def drawing(one: MachineTables, number: int) -> Markup:
        links = {row.state.name: f"#state-{number}-{at}" for at, row in enumerate(one.rows, 1)}
        return Markup(machine_svg(one.machine, one.notes, one.marked, links))

    environment = Environment(
        loader=PackageLoader("stepring", "report"),
        autoescape=select_autoescape(),
        undefined=StrictUndefined,
        trim_blocks=True,
    )
    machines = [
        machine_tables(outcome, one)
        for one in sorted(outcome.program.machines, key=lambda one: (one.where, one.variable))
    ]
    rings = [
        ring_tables(outcome, one) for one in sorted(outcome.program.rings, key=lambda one: (one.where, one.storage))
    ]
    return environment.get_template("inventory.html").render(
        title=f"State machines and rings of {outcome.root.name or 'this program'}",
        coverage=coverage_sentence(outcome),
        caution=CAUTION,
        machines=machines,
        rings=rings,
        file=file,
        link=link,
        drawing=drawing,
    )
