"""The report page: one HTML file that holds everything and asks no network for anything."""

from __future__ import annotations

import time
from importlib.resources import files
from typing import TYPE_CHECKING

from transim import __version__
from transim.errors import OutputError
from transim.report.budget import budget_lines
from transim.report.cycle import cycles_of
from transim.report.panels import embed_panels, key_of, panels_of, thinned_note, time_scale
from transim.report.pulses import pulse_lines
from transim.report.ratings import rating_tables
from transim.report.settled import settled_lines
from transim.report.shortest import shortest_lines
from transim.report.summary import (
    caution_rows,
    deck_rows,
    definition_rows,
    driver_cards,
    figure_tables,
    limit_tables,
    setting_tables,
)
from transim.report.verdicts import definition_lines, overall_sentence
from transim.study.run import Outcome

if TYPE_CHECKING:
    from jinja2 import Template

__all__ = ["page_text", "require_page"]


def require_page() -> None:
    """Refuse a page where what draws it is not installed, before any work is done.

    Raises
    ------
    OutputError
        If bokeh cannot be imported.
    """
    try:
        import bokeh.embed  # noqa: F401
    except ImportError as exc:
        raise OutputError(
            "a report page needs the package bokeh, which is not installed; install transim with its extra"
            " report: pip install 'transim[report]', or -e '.[report]' in its folder"
        ) from exc


def page_text(outcome: Outcome) -> str:
    """Write the report page of a run.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    str
        HTML; every text of the design is escaped.
    """
    from bokeh.resources import Resources
    from markupsafe import Markup

    cycles = cycles_of(outcome)
    panels = panels_of(cycles)
    script, groups = embed_panels(panels, cycles, _piece("reading.js"))
    design, scale = outcome.design, time_scale(cycles)[0]
    # what bokeh makes is HTML already; its data are JSON in which < > & and quotes are escaped
    return _template().render(
        title=design.title,
        file=design.source.path.name,
        text=design.source.text,
        verdict=outcome.verdict.upper(),
        sentence=overall_sentence(outcome).partition("; ")[2],
        engine=outcome.engine,
        version=__version__,
        made=time.strftime("%Y-%m-%d %H:%M %z"),
        cards=driver_cards(outcome),
        cautions=caution_rows(outcome),
        limits=limit_tables(outcome),
        figures=figure_tables(outcome),
        budgets=budget_lines(outcome),
        pulses=pulse_lines(outcome),
        ratings=rating_tables(outcome),
        shortest=shortest_lines(outcome),
        settled=settled_lines(outcome),
        key=key_of(cycles),
        groups=[
            {**group, "panels": [{**panel, "div": Markup(panel["div"])} for panel in group["panels"]]}
            for group in groups
        ],
        thinned=thinned_note(panels, cycles),
        edges={"on": cycles[0].timing.on_edge * scale, "off": cycles[0].timing.off_edge * scale},
        definitions=definition_lines(design.definitions),
        settings=definition_rows(design),
        components=setting_tables(design),
        methods=_methods(outcome),
        decks=deck_rows(outcome),
        style=Markup(_piece("page.css")),
        code=Markup(_piece("page.js")),
        library=Markup(Resources(mode="inline", components=["bokeh"]).render_js()),
        data=Markup(script),
    )


def _template() -> Template:
    from jinja2 import Environment, StrictUndefined

    environment = Environment(autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    return environment.from_string(_piece("page.html"))


def _piece(name: str) -> str:
    return (files("transim.report") / name).read_text(encoding="utf-8")


def _methods(outcome: Outcome) -> list[str]:
    """Return how the envelopes were found, each way once, with the largest difference to ngspice."""
    found = dict.fromkeys(f"{result.analysis} analysis, {result.method}" for result in outcome.results)
    checks = [result.check for result in outcome.results if result.check is not None]
    if checks:
        return [*found, f"largest difference of S to ngspice's own .ac at the same biases: {max(checks):.2g} dB"]
    return list(found)
