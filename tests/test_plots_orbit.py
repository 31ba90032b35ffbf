"""Figures of one orbit: what is in their data, and how a layout follows other data.

What the browser does with them (turning, running) is looked at in tests/browser.
"""

import json
import subprocess
import sys
from dataclasses import replace

import numpy as np
import pytest
from bokeh.core.validation import check_integrity
from bokeh.document import Document
from bokeh.embed import json_item
from bokeh.models import ColumnDataSource, CustomJS
from bokeh.models.widgets import Slider, Toggle

import orbitsearch.plots
from orbitsearch import shape
from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Orbit
from orbitsearch.period import motion_from
from orbitsearch.plots import (
    alignments_data,
    alignments_figure,
    motion_of,
    multipliers_data,
    multipliers_figure,
    orbit_data,
    orbit_figure,
    plane_data,
    plane_figure,
    separation_data,
    separation_figure,
    sphere_data,
    sphere_figure,
    style,
    update,
)
from orbitsearch.plots.multipliers import multipliers
from orbitsearch.plots.sphere import PALE, project
from orbitsearch.refine import refine
from orbitsearch.stability import classify

FIGURES = {
    "alignments": (alignments_data, alignments_figure),
    "multipliers": (multipliers_data, multipliers_figure),
    "orbit": (orbit_data, orbit_figure),
    "plane": (plane_data, plane_figure),
    "separation": (separation_data, separation_figure),
    "sphere": (sphere_data, sphere_figure),
}


def found(*guess) -> Orbit:
    orbit = refine(*guess).orbit
    assert orbit is not None
    return orbit


@pytest.fixture(scope="module")
def eight() -> Orbit:
    return found("collinear", 0.3471168881, 0.5327249454, 6.3259139829)


@pytest.fixture(scope="module")
def three() -> Orbit:
    """An orbit whose bodies have a curve each."""
    return found("collinear", 0.4644451728, 0.3960600147, 14.89430518)


@pytest.fixture(scope="module")
def turning() -> Orbit:
    """An orbit that comes back turned, two of whose bodies then share a curve."""
    return found("isosceles", 0.3249286291, 0.3542218585, 8.597643533)


@pytest.fixture(params=FIGURES)
def kind(request):
    return FIGURES[request.param]


def named(layout) -> dict:
    """Models of a layout by name."""
    return {model.name: model for model in layout.references() if model.name}


def shown(layout, data) -> dict:
    """What a layout holds under the names of `data`, as plain values."""
    values = {}
    for name, entry in data.items():
        model = named(layout)[name]
        if isinstance(model, ColumnDataSource):
            values[name] = {column: list(model.data[column]) for column in model.data}
        else:
            values[name] = {key: getattr(model, key) for key in entry}
    return values


def same(one, other) -> bool:
    """Whether two results of `shown` are equal; NaN, which ends a line, equals itself."""
    return repr(one) == repr(other)


# ---------------------------------------------------------------- any figure


def test_figures_are_valid_and_can_be_sent(kind, eight, turning):
    data_of, figure_of = kind
    for orbit in (eight, turning):
        layout = figure_of(data_of(orbit))
        issues = check_integrity(layout.references())
        assert not issues.error
        assert not issues.warning
        assert json.dumps(json_item(layout))


def test_an_updated_figure_is_like_one_drawn_anew(kind, eight, turning):
    data_of, figure_of = kind
    layout = figure_of(data_of(eight))
    before = shown(layout, data_of(eight))
    update(layout, data_of(turning))
    after = shown(layout, data_of(turning))
    assert same(after, shown(figure_of(data_of(turning)), data_of(turning)))
    assert not same(after, before)


def test_updates_can_be_sent_twice_and_taken_back(kind, eight, turning):
    data_of, figure_of = kind
    layout = figure_of(data_of(eight))
    # In a document, as in a notebook, models are found in another way.
    Document().add_root(layout)
    before = shown(layout, data_of(eight))
    update(layout, data_of(turning))
    once = shown(layout, data_of(turning))
    update(layout, data_of(turning))
    assert same(shown(layout, data_of(turning)), once)
    update(layout, data_of(eight))
    assert same(shown(layout, data_of(eight)), before)


def test_columns_of_a_source_are_equally_long_and_belong_to_it_alone(kind, turning):
    data_of, figure_of = kind
    layout = figure_of(data_of(turning))
    sources = [model for model in layout.references() if isinstance(model, ColumnDataSource)]
    # A source without columns is that of a glyph made from numbers alone.
    assert all(len({len(c) for c in model.data.values()}) <= 1 for model in sources)
    # The browser writes into arrays in place; two columns of one memory would be written twice.
    columns = [column for model in sources for column in model.data.values()]
    arrays = [column for column in columns if isinstance(column, np.ndarray)]
    assert not any(np.shares_memory(a, b) for i, a in enumerate(arrays) for b in arrays[:i])


def test_data_of_another_figure_is_refused(eight):
    layout = multipliers_figure(multipliers_data(eight))
    before = shown(layout, multipliers_data(eight))
    with pytest.raises(BadRequest, match="it has nothing called alignments title"):
        update(layout, {**multipliers_data(eight), **alignments_data(eight)})
    assert same(shown(layout, multipliers_data(eight)), before)


def test_what_moves_is_put_where_the_clock_is_when_data_come(turning):
    data = orbit_data(turning)
    layout = named(orbit_figure(data))
    for part, driver in (("plane", "plane motion"), ("sphere", "sphere track")):
        # Last, or else bodies would be placed by old data.
        assert [name for name in data if name.startswith(part)][-1] == driver
    for name in ("plane motion", "plane bodies", "plane trail", "sphere track", "sphere now"):
        assert layout[name].js_property_callbacks["change:data"]


def test_controls_say_what_they_do_and_stay_in_the_browser(eight):
    controls = [
        m for m in orbit_figure(orbit_data(eight)).references() if isinstance(m, (Slider, Toggle))
    ]
    assert len(controls) == 5
    for control in controls:
        assert len(control.html_attributes["title"].split()) > 4
        assert control.html_attributes["aria-label"] == control.html_attributes["title"]
        assert not control.syncable


def test_plane_and_sphere_share_one_clock(eight):
    layout = orbit_figure(orbit_data(eight))
    clocks = [m for m in layout.references() if m.name == "clock phase"]
    assert len(clocks) == 1
    callbacks = clocks[0].js_property_callbacks["change:value"]
    assert all(isinstance(callback, CustomJS) for callback in callbacks)
    moved = {m.name for callback in callbacks for m in callback.args.values() if hasattr(m, "name")}
    assert {"plane bodies", "plane trail", "sphere now"} <= moved


# ---------------------------------------------------------------- plane


def places(data) -> np.ndarray:
    """Places of the bodies, shape (n, 3, 2)."""
    motion = data["plane motion"]
    return np.stack(
        [np.stack([motion[f"{axis}{i}"] for axis in "xy"], axis=-1) for i in (1, 2, 3)], axis=1
    )


def test_curves_close(eight, three, turning):
    for orbit in (eight, three, turning):
        r = places(plane_data(orbit))
        assert np.allclose(r[0], r[-1], atol=1e-6)
    r = places(plane_data(turning, turning=False))
    assert np.abs(r[0] - r[-1]).max() > 0.05


def test_curves_are_drawn_by_lines_too_short_to_see(eight, three, turning):
    for orbit in (eight, three, turning):
        r = places(plane_data(orbit)).astype(float)
        # Height of a corner over the line between its neighbours, in pixels of a frame of 420.
        chord = r[2:] - r[:-2]
        side = r[1:-1] - r[:-2]
        area = np.abs(chord[..., 0] * side[..., 1] - chord[..., 1] * side[..., 0])
        height = area / np.maximum(np.linalg.norm(chord, axis=-1), 1e-9)
        assert height.max() * 420 / np.ptp(r, axis=(0, 1)).max() < 0.5


def test_the_frame_has_equal_scales_and_holds_the_curves(eight, three, turning):
    for orbit in (eight, three, turning):
        data = plane_data(orbit)
        r = places(data)
        spans = data["plane x"], data["plane y"]
        across, up = (span["end"] - span["start"] for span in spans)
        assert across == pytest.approx(up)
        for axis, span in enumerate(spans):
            assert span["start"] < r[..., axis].min() <= r[..., axis].max() < span["end"]
            assert (span["reset_start"], span["reset_end"]) == (span["start"], span["end"])
        plot = named(plane_figure(data, size=300))["plane figure"]
        assert plot.frame_width == plot.frame_height == 300


@pytest.mark.parametrize(
    ("name", "frame", "paths"),
    [
        ("eight", True, "1"),
        ("eight", False, "1"),
        ("three", True, "123"),
        ("turning", True, "13"),
        ("turning", False, "123"),
    ],
)
def test_a_curve_that_bodies_share_is_drawn_once(request, name, frame, paths):
    data = plane_data(request.getfixturevalue(name), turning=frame)
    drawn = [i for i in "123" if data[f"plane path {i}"]["visible"]]
    assert "".join(drawn) == paths
    # In grey if it is no body's own.
    own = [i for i in drawn if data[f"plane path {i} look"]["line_color"] != style.NEUTRAL]
    assert len(own) == {"1": 0, "123": 3, "13": 1}[paths]


def test_a_curve_said_to_be_shared_is(turning):
    r = places(plane_data(turning))
    gaps = np.linalg.norm(r[:, None, 1] - r[None, :, 0], axis=-1).min(axis=1)
    assert gaps.max() < 0.02


def test_titles_tell_the_frame(eight, turning):
    title = plane_data(eight)["plane title"]["text"]
    assert title == "Plane: one period, T = 6.32591398"
    assert plane_data(turning)["plane title"]["text"].endswith("in the frame that turns with it")
    title = plane_data(turning, turning=False)["plane title"]["text"]
    assert title.endswith("comes back turned by -9.931°")


def test_a_motion_that_is_not_periodic_is_shown_to_its_end():
    motion = motion_from("isosceles", 0.3, 0.0, 10.0)
    data = orbit_data(motion)
    assert data["plane title"]["text"] == "Plane: followed for L = 1.28238, ends as collision"
    assert data["clock phase"]["title"] == "t / L"
    assert data["plane facts"]["periodic"] == [0]
    assert data["plane motion"]["phase"][[0, -1]].tolist() == [0.0, 1.0]
    assert data["sphere track"]["phase"][[0, -1]].tolist() == [0.0, 1.0]
    # Two bodies meet: on the sphere at their collision point.
    end = [data["sphere track"][f"n{i}"][-1] for i in (1, 2, 3)]
    assert np.allclose(end, shape.COLLISIONS["12"], atol=1e-4)


def test_a_motion_is_not_computed_twice(eight):
    motion = motion_of(eight)
    assert motion_of(motion) is motion
    assert motion.course is motion_of(eight).course


# ---------------------------------------------------------------- sphere


def test_the_view_is_a_rotation():
    n = np.random.default_rng(3).normal(size=(50, 3))
    for turn, tilt in ((20, 25), (-170, -80), (0, 90)):
        seen = np.stack(project(n, turn, tilt), axis=-1)
        assert np.allclose(seen @ seen.T, n @ n.T)
        a, b = np.radians([turn, tilt])
        towards = [np.cos(b) * np.cos(a), np.cos(b) * np.sin(a), np.sin(b)]
        assert np.allclose(np.stack(project([towards], turn, tilt)).T, [[0.0, 0.0, 1.0]])
        # The poles are on the middle line, the upper one above.
        x, y, _ = project([[0.0, 0.0, 1.0]], turn, tilt)
        assert abs(x[0]) < 1e-15
        assert y[0] >= -1e-15


def test_the_track_lies_on_the_sphere_and_closes(eight, turning):
    for orbit in (eight, turning):
        track = sphere_data(orbit)["sphere track"]
        n = np.stack([track[f"n{i}"] for i in (1, 2, 3)], axis=-1)
        assert np.allclose(np.linalg.norm(n, axis=1), 1.0, atol=1e-6)
        assert np.allclose(n[0], n[-1], atol=1e-6)
        assert shape.great_circle_distance(n[1:], n[:-1]).max() < 0.021
        assert (np.diff(track["phase"]) > 0).all()


def test_every_point_of_the_track_is_on_the_near_or_the_far_side(eight):
    track = sphere_data(eight)["sphere track"]
    n = np.stack([track[f"n{i}"] for i in (1, 2, 3)], axis=-1).astype(float)
    x, y, depth = project(n)
    # A point on the rim may be rounded to the other side.
    sure = np.abs(depth) > 1e-6
    near = np.isfinite(track["near_x"])
    assert (near == np.isfinite(track["near_y"])).all()
    assert (near ^ np.isfinite(track["far_x"])).all()
    assert (near == (depth > 0))[sure].all()
    assert 0 < near.sum() < len(near)
    assert np.allclose(np.where(near, track["near_x"], track["far_x"]), x, atol=1e-6)
    assert np.allclose(np.where(near, track["near_y"], track["far_y"]), y, atol=1e-6)


def test_the_sphere_stays_round(eight):
    layout = sphere_figure(sphere_data(eight))
    plot = named(layout)["sphere figure"]
    assert plot.frame_width == plot.frame_height
    assert (plot.x_range.start, plot.x_range.end) == (plot.y_range.start, plot.y_range.end)
    assert [type(tool).__name__ for tool in plot.tools] == ["SaveTool"]


def test_points_that_every_sphere_has_are_named(eight):
    marks = named(sphere_figure(sphere_data(eight)))["sphere marks"].data
    n = np.stack([marks[f"n{i}"] for i in (1, 2, 3)], axis=-1)
    at = dict(zip(marks["label"], n, strict=True))
    assert np.allclose(at["2, 3 collide"], shape.COLLISIONS["23"])
    assert np.allclose(at["3 midway"], shape.EULER[3])
    assert np.allclose(at["equilateral, clockwise"], [0, 0, -1])
    assert len(at) == 8
    _, _, depth = project(n)
    assert (marks["alpha"] == np.where(depth >= 0, 1.0, PALE)).all()


# ---------------------------------------------------------------- along the period


def test_alignments_of_the_figure_eight(eight):
    data = alignments_data(eight)
    columns = data["alignments"]
    assert columns["middle"] == [3, 1, 2, 3, 1, 2]
    assert np.allclose(columns["phase"], np.arange(6) / 6)
    assert columns["marker"] == ["inverted_triangle", "triangle"] * 3
    assert columns["turn"][0] == "counterclockwise before, clockwise after"
    lines = data["alignments title"]["text"].splitlines()
    assert lines[0] == "6 alignments in a period, reduced cycle 123123"
    assert lines[1].startswith(f"least angle {eight.margins[0]:.3g}, ")
    assert min(columns["distance"]) == pytest.approx(eight.margins[1])


def test_triangles_point_the_way_the_track_crosses_the_equator(three):
    alignments = alignments_data(three)["alignments"]
    track = sphere_data(three)["sphere track"]
    for phase, marker in zip(alignments["phase"], alignments["marker"], strict=True):
        before, after = np.interp([(phase - 0.002) % 1, phase + 0.002], track["phase"], track["n3"])
        assert marker == ("inverted_triangle" if before > 0 > after else "triangle")


def test_a_long_cycle_is_cut(eight):
    long = replace(eight, cycle="12" * 100)
    assert "… (200 letters)" in alignments_data(long)["alignments title"]["text"]


def test_where_alignments_cannot_be_told_the_title_says_why():
    data = alignments_data(motion_from("isosceles", 0.3, 0.0, 10.0))
    assert data["alignments"]["phase"] == []
    text = data["alignments title"]["text"]
    assert text.startswith("No alignments to tell:")
    assert "must not run into a collision" in text
    assert max(len(line) for line in text.splitlines()) <= 100


def test_the_least_separation_is_the_one_verified(eight, three, turning):
    for orbit in (eight, three, turning):
        data = separation_data(orbit)
        least, curves = data["separation least"], data["separation"]
        assert least["length"][0] == pytest.approx(orbit.least_separation, rel=1e-9)
        assert min(curves[pair].min() for pair in ("12", "23", "31")) >= least["length"][0]
        at = np.interp(least["phase"][0], curves["phase"], curves[least["pair"][0]])
        assert at == pytest.approx(least["length"][0], rel=1e-2)
        y = data["separation y"]
        assert y["start"] < least["length"][0]
        ticks = [t for t in data["separation ticks"]["ticks"] if y["start"] < t < y["end"]]
        assert 2 <= len(ticks) <= 9


def test_separations_do_not_depend_on_the_scale_of_the_start(eight):
    # The orbit from another of its starts: the unit of length and the phase are other ones.
    other = next(start for start in eight.starts if start.kind == "isosceles")
    energies = [motion_of(o).energy for o in (eight, replace(eight, start=other))]
    assert abs(energies[1] / energies[0] - 1) > 0.01
    one, two = (separation_data(o) for o in (eight, replace(eight, start=other)))
    assert one["separation least"]["length"] == pytest.approx(two["separation least"]["length"])


# ---------------------------------------------------------------- multipliers


def test_multipliers_of_the_figure_eight_are_on_the_circle(eight):
    data = multipliers_data(eight)
    for number in (1, 2):
        columns = data[f"multipliers {number}"]
        assert np.allclose(np.hypot(columns["x"], columns["y"]), 1.0, rtol=0, atol=1e-15)
        assert columns["modulus"] == ["1", "1"]
    turns = sorted(abs(data[f"multipliers {number}"]["turns"][0]) for number in (1, 2))
    assert turns == pytest.approx(eight.stability.angles)
    assert data["multipliers title"]["text"] == (
        "Multipliers: elliptic-elliptic\nν = 0.008423, 0.298093"
    )


@pytest.mark.parametrize(
    "traces", [(9.0, 1.2), (-7.0, 5.0), (1.2 + 0.8j, 1.2 - 0.8j), (1.9, -0.3), (-3.0, 2.5)]
)
def test_multipliers_have_the_traces_they_are_made_from(traces):
    stability = classify(traces, (1e-12, 1e-12))
    for trace, pair in zip(stability.traces, multipliers(stability), strict=True):
        values = [np.exp(complex(log, angle)) for log, angle in pair]
        assert sum(values) == pytest.approx(trace)
        assert np.prod(values) == pytest.approx(1.0)


def test_huge_multipliers_have_a_place_and_the_circle_stays_a_circle(eight):
    far = replace(eight, stability=classify((-3e140, 1.5), (1e100, 1e-9)))
    data = multipliers_data(far)
    huge, tame = data["multipliers 1"], data["multipliers 2"]
    assert np.allclose(np.hypot(tame["x"], tame["y"]), 1.0)
    assert np.allclose(huge["y"], 0.0, atol=1e-15)
    # λ and 1/λ are equally far from it, on either side.
    assert -2.0 < huge["x"][0] < -1.0 < huge["x"][1] < 0.0
    assert huge["x"][0] + huge["x"][1] == pytest.approx(-2.0)
    assert huge["modulus"][0] == "3 · 10¹⁴⁰"
    assert data["multipliers rings"]["label"] == ["10⁻¹⁰⁰", "1", "10¹⁰⁰", "10²⁰⁰"]
    assert "|λ| / 200" in data["multipliers scale"]["text"]
    assert "largest |λ| = 3e+140" in data["multipliers title"]["text"]


def test_rings_are_where_the_multipliers_they_stand_for_would_be(eight):
    stability = classify((10.0**0.25 + 10.0**-0.25, 1.5), (1e-12, 1e-12))
    data = multipliers_data(replace(eight, stability=stability))
    rings = dict(
        zip(data["multipliers rings"]["label"], data["multipliers rings"]["radius"], strict=True)
    )
    assert rings["1.78"] == pytest.approx(data["multipliers 1"]["x"][0])
    assert rings["1"] == 1.0


# ---------------------------------------------------------------- colours, and the door


def luminance(colour: str) -> float:
    """Relative luminance of a colour, as WCAG 2.1 defines it."""
    parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.03928 else ((c + 0.055) / 1.055) ** 2.4 for c in parts]
    return float(np.dot(linear, [0.2126, 0.7152, 0.0722]))


def contrast(one: str, other: str) -> float:
    low, high = sorted(luminance(c) + 0.05 for c in (one, other))
    return high / low


def test_everything_can_be_seen_on_white_and_on_black():
    for ground in ("#ffffff", "#111111"):
        assert contrast(style.NEUTRAL, ground) >= 4.0
        for look in (*style.BODIES, *style.PAIRS, *style.SERIES):
            assert contrast(look.colour, ground) >= 3.0
    for look in style.BODIES:
        assert contrast("#000000", look.colour) >= 4.0


def test_things_alike_differ_in_more_than_colour():
    for looks in (style.BODIES, style.PAIRS):
        for part in ("label", "colour", "marker", "dash"):
            assert len({getattr(look, part) for look in looks}) == len(looks)
    assert len({look.marker for look in style.SERIES}) == len(style.SERIES)


def test_the_door_leads_to_what_it_names():
    for name in dir(orbitsearch.plots):
        assert callable(getattr(orbitsearch.plots, name))
    with pytest.raises(AttributeError, match="has no attribute 'no_figure'"):
        _ = orbitsearch.plots.no_figure


def test_without_bokeh_an_import_says_what_to_install():
    code = "import sys; sys.modules['bokeh'] = None; import orbitsearch.plots"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 1
    assert "needs Bokeh: pip install 'orbitsearch[lab]'" in done.stderr
