"""Pages to keep or to send: one HTML file with figures and numbers that needs no network.

BokehJS is inside the file.  The page takes light or dark from the reader's browser, as the figures
do from the page.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Callable, Iterable, Sequence
from typing import Any

from bokeh.embed import file_html
from bokeh.layouts import column, row
from bokeh.models import LayoutDOM
from bokeh.resources import INLINE

from orbitsearch.errors import BadRequest
from orbitsearch.plots.catalog_plots import (
    law_data,
    law_figure,
    points_of,
    starts_data,
    starts_figure,
)
from orbitsearch.plots.selection import link_selection
from orbitsearch.records import Record

__all__ = ["SECTIONS", "catalog_page", "figure_page"]

SECTIONS = 12
"""Orbits that `catalog_page` draws if it is not told otherwise."""

WORD_ROOM = 24
# With the multipliers beside them, the figures along the period fit into the width of STYLE.
WIDTH = 680

TABLE: dict[str, Callable[[Record], str]] = {
    "orbit": lambda record: str(record.id),
    "start": lambda record: record.orbit.start.kind,
    "p": lambda record: f"{record.orbit.start.p:.10g}",
    "q": lambda record: f"{record.orbit.start.q:.10g}",
    "T": lambda record: f"{record.orbit.period:.10g}",
    "T*": lambda record: f"{record.orbit.scaled_period:.10g}",
    "word": lambda record: _short(record.orbit.word),
    "L": lambda record: str(len(record.orbit.word)),
    "symmetry": lambda record: record.orbit.symmetry.title if record.orbit.symmetry else "?",
    "stability": lambda record: record.orbit.stability.kind,
    "status": lambda record: str(record.orbit.status),
}
"""Columns of the table of a selection; every digit is in the sections and in exported tables."""

STYLE = """
:root { color-scheme: light dark; }
body { font: 14px/1.45 sans-serif; max-width: 1240px; margin: 1.5em auto; padding: 0 1em; }
h1 { font-size: 1.5em; } h2 { font-size: 1.2em; margin-top: 2em; }
table { border-collapse: collapse; margin: 1em 0; }
td, th { padding: 0.15em 0.9em 0.15em 0; text-align: left; vertical-align: top; }
th { font-weight: 600; white-space: nowrap; }
td { white-space: pre-wrap; overflow-wrap: anywhere; font-variant-numeric: tabular-nums; }
tr { border-bottom: 1px solid #77777744; }
.list td { white-space: nowrap; }
.wide { overflow-x: auto; }
.note { border-left: 4px solid #b4508f; padding-left: 0.8em; }
.part th { font-weight: 400; padding-left: 1.2em; }
"""

# Sections are (heading, anchor, note, rows of the table, number of the root or None).
BODY = """
{% from macros import embed %}
{% block postamble %}<style>{{ style }}</style>{% endblock %}
{% block contents %}
<h1>{{ title | e }}</h1>
{% for note in notes %}<p class="note">{{ note | e }}</p>{% endfor %}
{% if table %}
<div class="wide"><table class="list">
<tr>{% for name in table[0] %}<th>{{ name | e }}</th>{% endfor %}</tr>
{% for cells, anchor in table[1] %}<tr>{% for cell in cells %}<td>
{%- if loop.first and anchor %}<a href="#{{ anchor }}">{{ cell | e }}</a>
{%- else %}{{ cell | e }}{% endif %}</td>{% endfor %}</tr>
{% endfor %}</table></div>
{% endif %}
{% for section in sections %}
{% if section.heading %}<h2 id="{{ section.anchor }}">{{ section.heading | e }}</h2>{% endif %}
{% for note in section.notes %}<p class="note">{{ note | e }}</p>{% endfor %}
{% if section.root is not none %}<div class="wide">{{ embed(roots[section.root]) }}</div>{% endif %}
{% if section.rows %}<table>
{% for label, value, part in section.rows %}<tr{% if part %} class="part"{% endif %}>
{%- if label is none %}<td colspan="2">{{ value | e }}</td>
{%- else %}<th scope="row">{{ label | e }}</th><td>{{ value | e }}</td>{% endif %}</tr>
{% endfor %}</table>{% endif %}
{% endfor %}
{% endblock %}
"""


def figure_page(record: Record, text: str) -> str:
    """Page of one orbit: its figures, then its numbers.

    Parameters
    ----------
    record : Record
    text : str
        Everything to tell of it, as the command ``show`` prints it; each line becomes a row.

    Returns
    -------
    str
        HTML.

    Raises
    ------
    BadRequest
        When the orbit cannot be followed, as `orbitsearch.plots.data.motion_of`.
    """
    section = {"heading": "", "notes": [], "rows": _rows(text), "root": 0}
    title = f"Orbit {record.id}: {record.orbit.start.kind}, T* = {record.orbit.scaled_period:.10g}"
    return _page(title, [_orbit_figures(record)], sections=[section])


def catalog_page(
    records: Iterable[Record],
    describe: Callable[[Record], str],
    *,
    title: str = "Periodic orbits of three equal masses",
    limit: int = SECTIONS,
) -> str:
    """Page of a selection: the table, the law of periods, and the first orbits one by one.

    Parameters
    ----------
    records : iterable of Record
        In the order they should have.
    describe : callable
        Text of a record, as for `figure_page`.
    title : str
        What stands on top.
    limit : int
        How many orbits are drawn; a note says so when there are more.

    Raises
    ------
    BadRequest
        When there are no records.
    """
    records = list(records)
    if not records:
        raise BadRequest(
            "`records` must hold an orbit at least: the conditions leave none, drop one"
        )
    drawn = records[:limit]
    roots: list[LayoutDOM] = [_overview(records)]
    overview = {"heading": "Overview", "anchor": "overview", "notes": [], "rows": [], "root": 0}
    sections = [_section(record, describe(record), roots) for record in drawn]
    notes = []
    if len(drawn) < len(records):
        notes.append(
            f"All {len(records):,} orbits are in the table and the overview, and the first "
            f"{len(drawn)} are drawn below. Of any other: orbitsearch figure ID --output FILE.html"
        )
    rows = [
        ([cell(record) for cell in TABLE.values()], f"orbit-{record.id}" if k < limit else "")
        for k, record in enumerate(records)
    ]
    return _page(title, roots, [overview, *sections], notes, (list(TABLE), rows))


def _page(
    title: str,
    roots: Sequence[LayoutDOM],
    sections: Sequence[dict[str, Any]],
    notes: Sequence[str] = (),
    table: tuple[Any, ...] = (),
) -> str:
    variables = {"sections": sections, "notes": notes, "table": table, "style": STYLE}
    return file_html(roots, INLINE, title, template=BODY, template_variables=variables)


def _overview(records: Sequence[Record]) -> LayoutDOM:
    """The law of periods and the starts of the set that most of the records are from."""
    counts = Counter(s.kind for record in records for s in record.orbit.starts)
    counts.update(record.orbit.start.kind for record in records)
    start = counts.most_common(1)[0][0]
    stable = [record.id for record in records if record.orbit.stability.stable]
    starts = starts_figure(starts_data(points_of(records, start), start, stable))
    layout = column(law_figure(law_data(records)), starts)
    link_selection(layout)
    return layout


def _section(record: Record, text: str, roots: list[LayoutDOM]) -> dict[str, Any]:
    """What the page tells of one of its orbits; the figures are added to the roots."""
    notes, root = [], None
    try:
        figures = _orbit_figures(record)
    except BadRequest as refusal:
        notes.append(f"No figures: {refusal}")
    else:
        root = len(roots)
        roots.append(figures)
    return {
        "heading": f"Orbit {record.id}",
        "anchor": f"orbit-{record.id}",
        "notes": notes,
        "rows": _rows(text),
        "root": root,
    }


def _orbit_figures(record: Record) -> LayoutDOM:
    # The overview of a large selection should not need the integrator.
    from orbitsearch.plots.alignments import alignments_data, alignments_figure
    from orbitsearch.plots.data import motion_of
    from orbitsearch.plots.multipliers import multipliers_data, multipliers_figure
    from orbitsearch.plots.orbit_view import orbit_data, orbit_figure
    from orbitsearch.plots.separation import separation_data, separation_figure

    motion = motion_of(record.orbit)
    along = column(
        alignments_figure(alignments_data(motion), width=WIDTH),
        separation_figure(separation_data(motion), width=WIDTH),
    )
    return column(
        orbit_figure(orbit_data(motion)),
        row(along, multipliers_figure(multipliers_data(record.orbit), size=300)),
    )


# "name: text"; what belongs to the line above is indented and set off by blanks.
NAMED = re.compile(r"([^\s:][^:]{0,17}):\s+(.+)")
PART = re.compile(r"  (\S.{0,21}?)?\s{2,}(\S.*)")


def _rows(text: str) -> list[tuple[str | None, str, bool]]:
    return [_row(line) for line in text.splitlines() if line.strip()]


def _row(line: str) -> tuple[str | None, str, bool]:
    """Label, text, and whether the line is a part of the one above; no label for plain text."""
    if match := NAMED.fullmatch(line):
        return match[1], match[2], False
    if match := PART.fullmatch(line):
        return match[1] or "", match[2], True
    return None, line, False


def _short(word: str) -> str:
    return word if len(word) <= WORD_ROOM else f"{word[: WORD_ROOM - 8]}..."
