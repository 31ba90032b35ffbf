"""Figures of a search window and of a catalogue, and the pages that hold them."""

import logging
import math
import re
from dataclasses import dataclass, replace
from html.parser import HTMLParser

import numpy as np
import pytest
from bokeh.document import Document
from bokeh.layouts import column
from bokeh.models import ColumnDataSource, Range1d
from sample_orbits import figure_eight, numbered, pure_braid, twin

from orbitsearch import flow, period_law
from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Start, Status
from orbitsearch.plots import catalog_plots, page, window
from orbitsearch.plots.catalog_plots import (
    kinds_data,
    kinds_figure,
    law_data,
    law_figure,
    points_of,
    starts_data,
    starts_figure,
)
from orbitsearch.plots.page import catalog_page, figure_page
from orbitsearch.plots.selection import link_selection, select, selected
from orbitsearch.plots.style import update
from orbitsearch.plots.window import (
    LAYERS,
    Mark,
    chosen_data,
    map_data,
    marks_data,
    marks_of,
    nearest_mark,
    window_data,
    window_figure,
)
from orbitsearch.plots.window_map import LARGEST, WindowMap
from orbitsearch.records import Kind, Record, StartPoint

CODE = {status: code for code, status in flow.STATUS.items()}
ENDING = {
    Status.CONVERGED: "stayed together",
    Status.ESCAPE: "a body escapes",
    Status.COLLISION: "close approach",
    Status.BUDGET: "out of steps",
}


@dataclass
class Tile:
    """Outcomes of a tile."""

    status: np.ndarray
    lifetime: np.ndarray
    alignments: np.ndarray
    nearest: np.ndarray

    def part(self, i0, i1, j0, j1):
        return Tile(*(values[i0:i1, j0:j1] for values in vars(self).values()))


def outcomes(n: int, m: int, seed: int = 0) -> Tile:
    """Made-up outcomes of n by m starts, all kinds of endings among them."""
    rng = np.random.default_rng(seed)
    return Tile(
        rng.choice([-1, *flow.STATUS], (n, m)),
        rng.uniform(0.0, 20.0, (n, m)),
        rng.integers(0, 40, (n, m)),
        10.0 ** rng.uniform(-4.5, 0.0, (n, m)),
    )


def blank(n: int = 7, m: int = 5, **changes) -> WindowMap:
    arguments = {
        "start": "collinear", "window": (0.1, 0.4, 0.2, 1.2), "grid": (n, m), "scaled_period": 40.0,
    }  # fmt: skip
    return WindowMap.blank(**arguments | changes)


def image(data):
    """Pixels of a map as they are seen, [row from the bottom, column]."""
    return data["window map"]["image"][0]


def record(id, orbit) -> Record:
    return Record(id, orbit, "2026-01-01T00:00:00+00:00", "0", None, "", ())


@pytest.fixture(scope="module")
def records():
    """The figure-eight, its twin, an orbit without a collinear start, and a series."""
    lone = Start("isosceles", ("0.5", "0.25"), "31.0")
    apart = replace(numbered(50), start=lone, starts=(lone,))
    orbits = [figure_eight(), twin(), apart, *(numbered(n) for n in range(20))]
    return [record(k, orbit) for k, orbit in enumerate(orbits, start=1)]


@pytest.fixture(scope="module")
def kinds():
    return [
        Kind(pure_braid(3 * n).braid, count, n % 2, int(n == 2), 9.2 * n, 100 + n)
        for n, count in ((1, 12), (2, 3), (3, 1), (4, 1))
    ]


def check_sound(layout, caplog) -> None:
    """The browser gets a document of these models, and Bokeh finds no fault with them."""
    document = Document()
    document.add_root(layout)
    with caplog.at_level(logging.WARNING):
        document.validate()
        again = Document.from_json(document.to_json())
    assert not caplog.records
    names = {model.name for model in layout.references() if model.name}
    assert names == {model.name for model in again.models if model.name}


# ---------------------------------------------------------------- the map of a window


def test_p_goes_to_the_right_and_q_upwards():
    status = np.full((7, 5), CODE[Status.CONVERGED])
    status[6, 0] = CODE[Status.ESCAPE]  # the largest p and the least q: the lower right corner
    status[0, 3] = CODE[Status.COLLISION]
    seen = blank()
    seen.fill(0, 0, replace(outcomes(7, 5), status=status))
    data = map_data(seen)
    pixels = image(data)
    texts = data["window levels"]["text"]
    assert pixels.shape == (5, 7)
    assert texts[pixels[0, 6]] == "a body escapes"
    assert texts[pixels[3, 0]] == "close approach"
    assert np.count_nonzero(pixels == pixels[1, 1]) == 33


@pytest.mark.parametrize("grid", [(7, 5), (2, 2), (1000, 401)])
def test_the_middle_of_a_pixel_is_its_start(grid):
    seen = blank(*grid)
    place = {key: values[0] for key, values in map_data(seen)["window map"].items()}
    rows, columns = place["image"].shape
    p, q = (np.linspace(*ends, n) for ends, n in zip(((0.1, 0.4), (0.2, 1.2)), grid, strict=True))
    middle_p = place["x"] + (np.arange(columns) + 0.5) * place["dw"] / columns
    middle_q = place["y"] + (np.arange(rows) + 0.5) * place["dh"] / rows
    assert max(rows, columns) <= LARGEST
    np.testing.assert_allclose(middle_p, p[:: seen.stride[0]], rtol=1e-12)
    np.testing.assert_allclose(middle_q, q[:: seen.stride[1]], rtol=1e-12)


@pytest.mark.parametrize("grid", [(60, 40), (901, 433)])
def test_tiles_make_the_map_in_any_order_and_twice(grid):
    n, m = grid
    whole = outcomes(n, m)
    at_once, by_tiles = blank(n, m), blank(n, m)
    at_once.fill(0, 0, whole)
    # As those of a search, tiles share the starts of their common edge.
    corners = [(i, j) for i in range(0, n, 23) for j in range(0, m, 17)]
    for i, j in [*reversed(corners), *corners[:3]]:
        by_tiles.fill(i, j, whole.part(i, i + 24, j, j + 18))
    for name in ("status", "lifetime", "alignments", "nearest"):
        shown = getattr(whole, name)[:: at_once.stride[0], :: at_once.stride[1]]
        np.testing.assert_array_equal(getattr(at_once, name), shown)
        np.testing.assert_array_equal(getattr(by_tiles, name), shown)


@pytest.mark.parametrize("layer", LAYERS)
def test_what_is_not_done_is_clear_and_only_that(layer):
    seen = blank(60, 40)
    assert not image(map_data(seen, layer)).any()
    seen.fill(20, 10, outcomes(15, 12))
    pixels = image(map_data(seen, layer))
    done = np.zeros((40, 60), bool)
    done[10:22, 20:35] = True
    np.testing.assert_array_equal(pixels > 0, done)
    assert window.PALETTE[0] == "rgba(0, 0, 0, 0)"
    assert map_data(seen, layer)["window title"]["text"] == "collinear starts, 180 of 2,400"


def test_every_ending_has_a_colour_and_its_share_in_the_legend():
    seen = blank(60, 40)
    whole = outcomes(60, 40)
    seen.fill(0, 0, whole)
    data = map_data(seen)
    legend = dict(text.split("  ") for text in data["window labels"]["text"] if "%" in text)
    for status, name in {**ENDING, None: "no such start"}.items():
        mine = whole.status == CODE.get(status, -1)
        levels = set(image(data).T[mine].tolist())
        assert {data["window levels"]["text"][level] for level in levels} == {name}
        assert legend[name] == f"{100 * mine.mean():.0f} %"
    assert len(set(window.PALETTE[: window.FIRST])) == window.FIRST
    assert len(window.PALETTE) == len(data["window levels"]["text"]) == 256


@pytest.mark.parametrize("layer", ["together", "syzygies", "approach"])
def test_a_hover_tells_the_value_of_a_start(layer):
    seen = blank(60, 40)
    whole = outcomes(60, 40)
    seen.fill(0, 0, whole)
    data = map_data(seen, layer)
    values = {
        "together": whole.lifetime,
        "syzygies": whole.alignments,
        "approach": np.log10(whole.nearest),
    }[layer]
    ends = {"together": 20.0, "syzygies": 40.0, "approach": 5.0}[layer]
    texts = np.array(data["window levels"]["text"])[image(data).T]
    real = whole.status >= 0
    assert set(texts[~real]) == {"no such start"}
    told = texts[real].astype(float)
    # Half a shade, and what rounding the text takes.
    room = 0.5 * ends / window.SHADES + (0.5 if layer == "syzygies" else 0.051)
    assert np.abs(told - values[real]).max() <= room


@pytest.mark.parametrize("layer", ["together", "approach"])
def test_colours_keep_their_meaning_while_the_map_fills(layer):
    seen = blank(60, 40)
    first, second = outcomes(60, 20), outcomes(60, 20, seed=1)
    seen.fill(0, 0, first)
    before = map_data(seen, layer)
    seen.fill(0, 20, second)
    after = map_data(seen, layer)
    np.testing.assert_array_equal(image(before)[:20], image(after)[:20])
    assert before["window levels"] == after["window levels"]


def test_labels_of_a_scale_stand_where_their_value_is():
    seen = blank(60, 40)
    seen.fill(0, 0, outcomes(60, 40))
    labels = map_data(seen, "together")["window labels"]
    low, high = window.BAR
    told = [
        (20.0 * (y - low) / (high - low), text)
        for y, text in zip(labels["y"], labels["text"], strict=True)
        if text != LAYERS["together"]
    ]
    assert len(told) >= 3
    for value, text in told:
        assert float(text) == pytest.approx(value, abs=1e-9)


def test_an_unknown_layer_or_mark_is_refused_with_the_names_that_exist():
    with pytest.raises(BadRequest, match=r"`layer` must be one of outcome, together.*'speed'"):
        map_data(blank(), "speed")
    with pytest.raises(BadRequest, match=r"`state` must be one of new, known.*'old'"):
        Mark(0.1, 0.2, "old")
    with pytest.raises(BadRequest, match="`start` must be one of"):
        blank(start="nowhere")


def test_marks_differ_in_shape_and_tell_what_is_known():
    marks = [
        Mark(0.1, 0.2, state, id) for state, id in zip(window.STATES, (7, 8, 9, None), strict=True)
    ]
    marks[0] = replace(marks[0], scaled_period=9.2376812, word="abAB" * 30)
    columns = marks_data(marks)["window marks"]
    assert len(set(columns["marker"])) == 4
    assert columns["id"] == [7, 8, 9, 0]
    assert columns["title"][0] == "7, new"
    assert columns["title"][3] == "start, rejected"
    assert columns["tells"] == ["T* = 9.23768  abABabABabABabABabABabAB... (120)", "", "", ""]


def test_an_orbit_has_a_mark_for_each_of_its_starts_in_the_set(records):
    two = replace(figure_eight(), starts=(figure_eight().start, twin().start))
    assert [(m.id, m.p) for m in marks_of([record(5, two)], "collinear")] == [
        (5, figure_eight().start.p),
        (5, twin().start.p),
    ]
    assert {m.id for m in marks_of(records, "collinear")} == {r.id for r in records} - {3}
    bare = replace(figure_eight(), starts=())
    assert len(marks_of([record(1, bare)], "collinear")) == 1


def test_a_tap_means_the_mark_that_looks_nearest():
    marks = [Mark(0.30, 0.5, "known"), Mark(0.31, 0.9, "known")]
    # A plane that is shown twice as high as wide: 0.2 upwards looks like 0.01 to the right.
    assert nearest_mark(marks, 0.302, 0.72, reach=(0.02, 0.4)) == 0
    assert nearest_mark(marks, 0.302, 0.72, reach=(0.2, 0.2)) == 1
    assert nearest_mark(marks, 0.40, 0.5, reach=(0.02, 0.4)) is None
    assert nearest_mark([], 0.3, 0.5, reach=(1.0, 1.0)) is None


def test_an_update_moves_the_window_and_one_of_a_part_leaves_it():
    seen = blank()
    layout = window_figure(window_data(seen))
    ranges = {name: layout.select_one({"name": f"window {name} range"}) for name in "pq"}
    assert all(isinstance(r, Range1d) for r in ranges.values())
    ranges["p"].update(start=0.2, end=0.3)  # the user has zoomed in
    seen.fill(0, 0, outcomes(7, 5))
    update(layout, map_data(seen) | marks_data([Mark(0.2, 0.3, "new", 1)]) | chosen_data((0.2, 1)))
    assert (ranges["p"].start, ranges["p"].end) == (0.2, 0.3)
    assert layout.select_one({"name": "window marks"}).data["id"] == [1]
    assert layout.select_one({"name": "window chosen"}).data == {"p": [0.2], "q": [1]}
    other = blank(11, 21, start="rest", window=(0.0, 0.5, 0.0, 1.0))
    update(layout, window_data(other))
    for name, high in (("p", 0.5), ("q", 1.0)):
        assert ranges[name].start < 0.0 < high < ranges[name].end < 1.1 * high
        assert ranges[name].reset_end == ranges[name].end
    assert layout.select_one({"name": "window p axis"}).axis_label == "x"
    assert layout.select_one({"name": "window chosen"}).data == {"p": [], "q": []}


def test_the_window_reaches_the_browser_whole(caplog):
    seen = blank()
    seen.fill(0, 0, outcomes(7, 5))
    marks = [Mark(0.2, 0.3, state, 1) for state in window.STATES]
    check_sound(window_figure(window_data(seen, "approach", marks, (0.2, 0.3))), caplog)


# ---------------------------------------------------------------- figures of a catalogue


def test_the_law_passes_through_the_published_mean(records):
    data = law_data(records)
    band = data["law band"]
    assert band["length"][0] == 0.0
    longest = band["length"][1]
    assert longest == max(len(r.orbit.word) for r in records)
    expected = {
        "low": period_law.MEAN - period_law.SPREAD,
        "mean": period_law.MEAN,
        "high": period_law.MEAN + period_law.SPREAD,
    }
    for name, ratio in expected.items():
        assert band[name] == [0.0, pytest.approx(ratio * longest)]
        assert band[f"{name}_ratio"] == [ratio, ratio]
        assert data["law ratio range"]["start"] < ratio < data["law ratio range"]["end"]
    assert data["law period range"]["end"] > band["high"][1]


def test_points_of_the_law_are_the_records(records):
    columns = law_data(records)["law orbits"]
    by_id = {r.id: r.orbit for r in records}
    assert sorted(columns["id"]) == sorted(by_id)
    for row, id in enumerate(columns["id"]):
        orbit = by_id[id]
        assert columns["length"][row] == len(orbit.word)
        assert columns["scaled_period"][row] == orbit.scaled_period
        assert columns["ratio"][row] == orbit.period_per_letter
        assert columns["group"][row].startswith("no collinear start") == (id == 3)
        assert columns["group"][row].endswith("stable") == orbit.stability.stable
        assert (columns["inside"][row] > 0) == orbit.stability.stable
    shapes = dict(zip(columns["id"], columns["marker"], strict=True))
    assert shapes[3] != shapes[1] == shapes[2]
    # Stable ones last, that is on top.
    stable = [group.endswith("stable") for group in columns["group"]]
    assert stable == sorted(stable)


def test_an_empty_word_has_a_point_and_no_ratio():
    data = law_data([record(1, replace(figure_eight(), word="")), record(2, twin())])
    ratios = dict(zip(data["law orbits"]["id"], data["law orbits"]["ratio"], strict=True))
    assert math.isnan(ratios[1])
    assert ratios[2] == pytest.approx(2.309, abs=1e-3)
    assert data["ratio cells"]["title"] == ["orbit 2"]
    assert sorted(data["law cells"]["title"]) == ["orbit 1", "orbit 2"]


def test_cells_hold_every_point_once_and_are_few():
    rng = np.random.default_rng(0)
    x, y = rng.integers(2, 150, 5000), rng.uniform(0, 400, 5000)
    cells = catalog_plots._cells([str(k) for k in range(5000)], x, y, ("x {}", "y {}"))
    counts = [
        1 if title.startswith("orbit ") else int(title.split()[0]) for title in cells["title"]
    ]
    assert sum(counts) == 5000
    across, up = catalog_plots.CELLS
    assert len(counts) <= (across + 1) * (up + 1)
    inside = (
        (cells["left"][:, None] <= x) & (x <= cells["right"][:, None])
        & (cells["bottom"][:, None] <= y) & (y <= cells["top"][:, None])
    )  # fmt: skip
    assert inside.any(axis=0).all()


def test_a_cell_names_its_first_orbits_and_their_range():
    one = [record(k, replace(figure_eight(), scaled_period=9.2 + 1e-5 * k)) for k in range(1, 10)]
    far = record(99, replace(twin(), scaled_period=90.0, word="ab" * 30))
    cells = law_data([*one, far])["law cells"]
    assert cells["title"] == ["9 orbits: 1, 2, 3, 4, 5, 6, ...", "orbit 99"]
    assert cells["tells"] == ["word length 4, T* 9.20001 to 9.20009", "word length 60, T* 90"]


def test_all_starts_of_the_set_are_shown_and_no_other(records):
    points = points_of(records, "isosceles")
    data = starts_data(points, "isosceles", stable=[4, 6])
    columns = data["starts orbits"]
    starts = {(s.p, s.q, r.id) for r in records for s in r.orbit.starts if s.kind == "isosceles"}
    assert set(zip(columns["p"], columns["q"], columns["id"], strict=True)) == starts
    groups = zip(columns["id"], columns["group"], strict=True)
    assert {id for id, group in groups if group == "stable"} == {4, 6}
    assert data["starts p axis"] == {"axis_label": "eta"}
    assert len(set(columns["marker"])) == 2


def test_starts_outside_the_usual_window_widen_it():
    data = starts_data([StartPoint(3.5, -0.4, 20.0, 1)], "isosceles")
    assert data["starts p range"]["end"] > 3.5
    assert data["starts q range"]["start"] < -0.4
    fixed = starts_data([StartPoint(3.5, -0.4, 20.0, 1)], "isosceles", window=(0.0, 1.0, 0.0, 1.0))
    assert fixed["starts p range"]["end"] < 1.1


def test_kinds_show_count_and_shortest_period(kinds):
    data = kinds_data(kinds)
    columns = data["kinds types"]
    rows = {id: row for row, id in enumerate(columns["id"])}
    for kind in kinds:
        row = rows[kind.orbit_id]
        assert columns["count"][row] == kind.count
        assert columns["shortest"][row] == kind.shortest
        assert columns["entropy"][row] == pytest.approx(kind.braid.entropy)
        assert columns["marker"][row].endswith("_dot") == (kind.stable > 0)
    up = data["kinds count range"]
    assert 0 < up["start"] < 1 < 12 < up["end"]
    # On the logarithmic axis, too, a cell lies about its members.
    titles = data["kinds cells"]["title"]
    k = titles.index("braid (LR)^3")
    assert data["kinds cells"]["bottom"][k] < 12 < data["kinds cells"]["top"][k]
    assert data["kinds cells"]["tells"][k] == "shortest T* 9.2, orbits of the type: 12"


@pytest.mark.parametrize(
    ("data", "draw"),
    [
        (law_data, law_figure),
        (lambda records: starts_data(points_of(records, "collinear"), "collinear"), starts_figure),
        (lambda records: kinds_data([]), kinds_figure),
    ],
)
def test_figures_of_nothing_and_of_something_reach_the_browser(data, draw, records, kinds, caplog):
    layout = draw(data([]))
    update(layout, data(records) if draw is not kinds_figure else kinds_data(kinds))
    check_sound(layout, caplog)


def test_a_selection_goes_by_the_number_of_the_orbit(records):
    law, starts = (
        law_figure(law_data(records)),
        starts_figure(starts_data(points_of(records, "collinear"), "collinear")),
    )
    select(law, [3, 1, 777])
    assert selected(law) == [1, 3]
    select(starts, selected(law))
    assert selected(starts) == [1]  # orbit 3 has no collinear start
    select(law, [])
    assert selected(law) == []


def test_linked_sources_tell_all_others(records, kinds):

    layout = column(
        law_figure(law_data(records)),
        starts_figure(starts_data(points_of(records, "collinear"), "collinear")),
        kinds_figure(kinds_data(kinds)),
    )
    link_selection(layout)
    names = {"law orbits", "starts orbits", "kinds types"}
    for name in names:
        source = layout.select_one({"name": name})
        (call,) = source.selected.js_property_callbacks["change:indices"]
        assert call.args["one"] is source
        assert {other.name for other in call.args["others"]} == names - {name}


# ---------------------------------------------------------------- pages


class Loads(HTMLParser):
    """What a page loads from elsewhere, where it can be gone to, and its cells."""

    def __init__(self, text):
        super().__init__()
        self.loads, self.ids, self.targets, self.cells, self._cell = [], [], [], [], None
        self.feed(text)

    def handle_starttag(self, tag, attributes):
        attributes = dict(attributes)
        if tag in ("script", "img", "iframe", "source") and "src" in attributes:
            self.loads.append(attributes["src"])
        if tag == "link":
            self.loads.append(attributes.get("href"))
        if tag == "a":
            self.targets.append(attributes["href"])
        if tag in ("h1", "h2") and "id" in attributes:
            self.ids.append(attributes["id"])
        if tag in ("td", "th", "p"):
            self.cells.append("")
            self._cell = tag

    def handle_endtag(self, tag):
        if tag == self._cell:
            self._cell = None

    def handle_data(self, data):
        if self._cell:
            self.cells[-1] += data


def roots(text):
    """Number of figures that the page draws."""
    return len(set(re.findall(r'data-root-id="([^"]+)"', text)))


SHOWN = """orbit 7, filed today
word:             abAB   length 4
  T* over length  2.3094, <b>near</b> the mean
                  a clause of its own
verdict: verified (closes)
  closure              2.8e-14   bound 1e-07    ok
"""


def test_the_page_of_an_orbit_has_its_figures_and_every_line_of_text():
    text = figure_page(record(7, figure_eight()), SHOWN)
    found = Loads(text)
    assert found.loads == []
    assert roots(text) == 1
    for name in ("plane figure", "alignments figure", "separation figure", "multipliers figure"):
        assert f'"{name}"' in text
    assert found.cells == [
        "orbit 7, filed today",
        "word", "abAB   length 4",
        "T* over length", "2.3094, <b>near</b> the mean",
        "", "a clause of its own",
        "verdict", "verified (closes)",
        "closure", "2.8e-14   bound 1e-07    ok",
    ]  # fmt: skip
    assert "<title>Orbit 7: collinear, T* = 9.237681251</title>" in text


def test_no_style_of_the_page_comes_from_elsewhere():
    assert "@import" not in page.STYLE
    assert "url(" not in page.STYLE


def test_an_orbit_that_cannot_be_followed_leaves_its_section_with_a_note():
    # At rest on top of each other: bodies 1 and 2 have nowhere to go.
    start = Start("collinear", ("0", "0"), "1000")
    lost = record(8, replace(figure_eight(), start=start, starts=(start,)))
    with pytest.raises(BadRequest) as refusal:
        figure_page(lost, SHOWN)
    found = Loads(catalog_page([lost], lambda r: SHOWN))
    assert f"No figures: {refusal.value}" in found.cells
    assert "abAB   length 4" in found.cells


def test_the_page_of_a_selection_draws_the_first_and_lists_all(records):
    text = catalog_page(records[:4], lambda r: f"word: this is {r.id}", limit=2)
    found = Loads(text)
    assert found.loads == []
    assert roots(text) == 3  # the overview and two orbits
    assert found.ids == ["overview", "orbit-1", "orbit-2"]
    assert found.targets == ["#orbit-1", "#orbit-2"]
    assert found.cells[0].startswith(
        "All 4 orbits are in the table and the overview, and the first 2"
    )
    width = len(page.TABLE)
    rows = [found.cells[1 + k * width :][:width] for k in range(5)]
    assert rows[0] == list(page.TABLE)
    assert [row[0] for row in rows[1:]] == ["1", "2", "3", "4"]
    assert rows[1][2:6] == ["0.3471168881", "0.5327249454", "6.325913983", "9.237681251"]
    assert "this is 2" in found.cells
    assert "this is 3" not in found.cells


def test_a_selection_that_is_drawn_whole_needs_no_note(records):
    found = Loads(catalog_page(records[:1], lambda r: "word: w"))
    assert found.cells[0] == next(iter(page.TABLE))


def test_a_page_of_nothing_is_refused():
    with pytest.raises(BadRequest, match="`records` must hold an orbit at least"):
        catalog_page([], str)


def test_data_of_all_figures_are_plain_columns(records, kinds):
    for data in (
        law_data(records),
        starts_data(points_of(records, "collinear"), "collinear"),
        kinds_data(kinds),
        window_data(blank()),
    ):
        for name, columns in data.items():
            if "text" in columns and isinstance(columns["text"], str):
                continue
            if name.endswith(("range", "axis", "colours", "ticks")):
                continue
            # Bokeh warns of columns of unequal length, but only when they are drawn.
            assert len({len(column) for column in columns.values()}) == 1, name
            ColumnDataSource(data=columns)
