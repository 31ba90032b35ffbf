"""Which orbits are selected, by their numbers: in a figure, and carried from one to another."""

from __future__ import annotations

from collections.abc import Collection

from bokeh.models import ColumnDataSource, CustomJS, LayoutDOM

__all__ = ["link_selection", "select", "selected"]


def link_selection(layout: LayoutDOM) -> None:
    """Carry selections between all figures of a layout by the column `id`, in the browser.

    Figures that are separate widgets are separate documents to the browser: carry their selections
    with `selected` and `select`.
    """
    sources = _with_ids(layout)
    for one in sources:
        others = [other for other in sources if other is not one]
        one.selected.js_on_change(
            "indices", CustomJS(args={"one": one, "others": others, "lock": sources[0]}, code=CARRY)
        )


# What is selected in one source is selected in the others, and their answers are not listened to:
# a source may lack orbits of another one, and would take their selection away.
CARRY = """
if (lock.carrying) return
lock.carrying = true
try {
  const ids = new Set(one.selected.indices.map((k) => one.data.id[k]))
  for (const other of others) {
    const rows = []
    for (let k = 0; k < other.data.id.length; k++)
      if (ids.has(other.data.id[k])) rows.push(k)
    other.selected.indices = rows
  }
} finally {
  lock.carrying = false
}
"""


def select(layout: LayoutDOM, ids: Collection[int]) -> None:
    """Select orbits by number in every figure of a layout that has them."""
    wanted = frozenset(ids)
    for orbits in _with_ids(layout):
        orbits.selected.indices = [k for k, id in enumerate(orbits.data["id"]) if id in wanted]


def selected(layout: LayoutDOM) -> list[int]:
    """Numbers of the orbits that are selected in any figure of a layout, in order."""
    return sorted(
        {int(orbits.data["id"][k]) for orbits in _with_ids(layout) for k in orbits.selected.indices}
    )


def _with_ids(layout: LayoutDOM) -> list[ColumnDataSource]:
    sources = (m for m in layout.references() if isinstance(m, ColumnDataSource))
    return sorted((s for s in sources if "id" in s.data), key=lambda s: str(s.name))
