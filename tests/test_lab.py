"""Panels of the lab without a browser: what their controls do, and what they say when it fails."""

import json
from dataclasses import replace
from pathlib import Path

import pytest
from bokeh.events import SelectionGeometry, Tap
from sample_orbits import numbered, pure_braid

from orbitsearch.catalog import Catalog
from orbitsearch.cli import main
from orbitsearch.lab import BrowsePanel, SearchPanel, StartView, VerifyPanel
from orbitsearch.lab.orbit_detail import rows_of
from orbitsearch.lab.parts import facts
from orbitsearch.orbit import Start
from orbitsearch.plots.selection import selected
from orbitsearch.refine import refine

WAIT = 120.0


def finish(panel) -> None:
    """Let the panel's work come to its end."""
    assert panel._worker.drain(WAIT)


def searched_panel(path: Path) -> SearchPanel:
    """Panel that has searched the window of the figure-eight and its twin."""
    panel = SearchPanel(path)
    panel.controls.set_window((0.3, 0.4, 0.5, 0.6))
    panel.controls.grid.value, panel.controls.scaled_period.value = 8, 12.0
    panel.controls.workers.value = 1
    panel.start.click()
    finish(panel)
    return panel


# ---------------------------------------------------------------- search


def test_a_search_fills_map_table_and_catalogue(tmp_path: Path) -> None:
    panel = searched_panel(tmp_path / "new" / "orbits.db")
    assert panel.message.text == "finished: 2 new and 0 known orbits"
    assert [id for _, id in panel.table.options] == [1, 2]
    assert (panel._map.status != -2).all()
    assert "64 starts" in panel.tells.value
    assert panel._mark_source.data["state"] == ["new", "new"]
    assert (panel.start.disabled, panel.stop.disabled) == (False, True)
    with Catalog.open(panel.path) as catalog:
        assert len(list(catalog.orbits())) == 2


def test_a_second_search_meets_what_is_known(catalog: Path) -> None:
    panel = searched_panel(catalog)
    assert panel.message.text == "finished: 0 new and 2 known orbits"
    assert panel._mark_source.data["state"] == ["known", "known"]


def test_a_row_and_a_mark_lead_to_each_other(catalog: Path) -> None:
    panel = searched_panel(catalog)
    panel.table.value = 1
    assert panel._mark_source.selected.indices == [panel._mark_source.data["id"].index(1)]
    assert panel.view.place == pytest.approx((0.34711689, 0.53272495), abs=1e-4)
    twin = panel._orbits[2].start
    tap(panel, twin.p, twin.q)
    assert panel.table.value == 2
    # And again, after another start was followed.
    tap(panel, 0.32, 0.55)
    assert panel.view.place == pytest.approx((0.32, 0.55))
    tap(panel, twin.p, twin.q)
    assert panel.view.place == pytest.approx((twin.p, twin.q), abs=1e-4)


def tap(panel: SearchPanel, x: float, y: float) -> None:
    """What a click on the map sends."""
    plot = panel.figure.model.select_one({"name": "window figure"})
    panel._tap(Tap(plot, x=x, y=y))


def test_a_box_on_the_map_becomes_the_window(tmp_path: Path) -> None:
    panel = SearchPanel(tmp_path / "orbits.db")
    plot = panel.figure.model.select_one({"name": "window figure"})
    box = {"type": "rect", "x0": 0.4, "x1": 0.3, "y0": -0.1, "y1": 0.2}
    # While it is drawn nothing happens yet, and a tap sends a geometry, too.
    panel._box(SelectionGeometry(plot, geometry=box, final=False))
    panel._box(SelectionGeometry(plot, geometry={"type": "point", "x": 0.1, "y": 0.1}))
    assert panel.controls.window == (0.0, 0.6, 0.0, 0.6)
    panel._box(SelectionGeometry(plot, geometry=box))
    assert panel.controls.window == (0.3, 0.4, 0.0, 0.2)
    assert panel._map.window == (0.3, 0.4, 0.0, 0.2)


def test_the_number_fields_and_the_sliders_follow_each_other(tmp_path: Path) -> None:
    controls = SearchPanel(tmp_path / "orbits.db").controls
    controls.sliders[0].value = (0.1, 0.2)
    assert controls.window[:2] == (0.1, 0.2)
    controls.ends[3].value = 0.25
    assert controls.sliders[1].value == (0.0, 0.25)
    # Exact numbers are not those of the slider, and stay when the other one moves.
    controls.ends[0].value, controls.ends[3].value = 0.1234567, 1.5
    controls.sliders[1].value = (0.01, 0.3)
    assert controls.request().window == (0.1234567, 0.2, 0.01, 0.3)


@pytest.mark.parametrize("kind", ["isosceles", "rest", "perpendicular", "collinear"])
def test_every_start_set_has_its_window(tmp_path: Path, kind: str) -> None:
    panel = SearchPanel(tmp_path / "orbits.db")
    panel.controls.start.value = kind
    assert panel.controls.request().start == kind
    assert panel._map.start == kind
    assert panel.view.kind == kind
    # The middle of the new window, not of one half old and half new.
    p0, p1, q0, q1 = panel.controls.window
    if kind != "collinear":
        assert panel.view.place == pytest.approx(((p0 + p1) / 2, (q0 + q1) / 2), abs=1e-4)


def test_a_window_that_is_none_is_told(tmp_path: Path) -> None:
    panel = SearchPanel(tmp_path / "orbits.db")
    panel.controls.ends[0].value = 0.7
    panel.start.click()
    assert "`window` must go from low to high in a" in panel.message.text
    assert panel._worker is None


def test_a_damaged_catalogue_is_told(tmp_path: Path) -> None:
    path = tmp_path / "orbits.db"
    path.write_text("no database", encoding="utf-8")
    said = "must be an SQLite file"
    assert said in SearchPanel(path).message.text
    browse = BrowsePanel(path)
    finish(browse)
    assert said in browse.message.text
    verify = VerifyPanel(path)
    verify.load.click()
    assert said in verify.message.text


def test_a_stopped_search_is_gone_on_with(tmp_path: Path) -> None:
    panel = SearchPanel(tmp_path / "orbits.db")
    panel.controls.grid.value, panel.controls.scaled_period.value = 60, 14.0
    panel.controls.workers.value = 1
    panel.start.click()
    while panel._done < 1:
        panel._worker.drain(0.05)
    panel.stop.click()
    finish(panel)
    assert panel.message.text.startswith("stopped: ")
    assert panel.resume.description == "Resume run 1"
    # As after closing everything: another panel finds it in the catalogue.
    other = SearchPanel(panel.path)
    assert not other.resume.disabled
    other.controls.workers.value = 1
    other.resume.click()
    finish(other)
    assert other.message.text.startswith("finished: ")
    assert other.progress.value == other.progress.max
    assert other.resume.disabled


# ---------------------------------------------------------------- a start


def test_a_start_is_followed_and_refined(tmp_path: Path) -> None:
    met = []
    view = StartView(on_orbit=met.append)
    view.show("collinear", 0.347, 0.533)
    assert "alignments: 312312" in view.message.text
    view.refine.click()
    finish(view)
    assert met[0].word == "abAB"
    assert "the nearest moved by" in view.message.text


def test_what_was_found_is_still_said_when_it_is_shown(tmp_path: Path) -> None:
    panel = SearchPanel(tmp_path / "orbits.db")
    panel.view.show("collinear", 0.347, 0.533)
    panel.view.refine.click()
    finish(panel.view)
    assert "the nearest moved by" in panel.view.message.text


def test_a_panel_listens_again_after_something_went_wrong(catalog: Path, monkeypatch) -> None:
    panel = BrowsePanel(catalog)
    finish(panel)

    def broken(records):
        raise RuntimeError("broken")

    with monkeypatch.context() as patch:
        patch.setattr("orbitsearch.lab.browse_panel.law_data", broken)
        panel.symmetry.value = "choreography"
        assert "this is a bug: RuntimeError: broken" in panel.message.text
    panel.symmetry.value = "any"
    assert panel.message.text == "2 of 2 orbits"
    panel.orbits.value = 2
    assert panel.detail.orbit is not None


def test_starts_that_fly_apart_collide_or_are_none_are_told() -> None:
    view = StartView()
    view.show("collinear", 0.9, 0.9)
    assert "no bound start here: E = 2.36" in view.message.text
    view.show("rest", 0.2, 0.15)
    view.time.value = 60.0
    assert "a body escapes at t =" in view.message.text
    view.show("rest", 0.0, 0.8660254037844386)
    assert "two bodies meet at t =" in view.message.text


def test_an_orbit_met_from_a_start_is_filed_and_listed(tmp_path: Path) -> None:
    panel = SearchPanel(tmp_path / "orbits.db")
    panel.view.show("collinear", 0.347, 0.533)
    panel.view.refine.click()
    finish(panel.view)
    assert [id for _, id in panel.table.options] == [1]
    assert panel.table.value == 1


# ---------------------------------------------------------------- verify


def test_an_orbit_of_the_catalogue_is_verified(catalog: Path) -> None:
    panel = VerifyPanel(catalog)
    panel.number.value = 1
    panel.load.click()
    finish(panel)
    assert panel.message.text == "verified; known as orbit 1"
    assert panel.verdict.value.count("✓ holds") == 9
    assert panel.detail.orbit.word == "abAB"
    assert len(panel._figures) == 2


def test_a_pasted_row_is_refined_and_kept_with_its_note(catalog: Path) -> None:
    panel = VerifyPanel(catalog)
    # M. Suvakov & V. Dmitrasinovic, PRL 110, 114301 (2013), to the digits printed.
    panel.pasted.value = "collinear, 0.46444, 0.39606, 14.8939"
    assert [field.value for field in panel.values] == ["0.46444", "0.39606", "14.8939"]
    panel.refine.click()
    finish(panel)
    assert panel.message.text.startswith("verified; parameters moved by at most")
    assert panel.message.text.endswith("new to the catalogue")
    panel.note.value = "from a letter"
    panel.keep.click()
    assert panel.message.text == "filed as orbit 3"
    panel.keep.click()
    assert panel.message.text == "known already, as orbit 3"
    with Catalog.open(catalog) as filed:
        assert filed.get(3).note == "from a letter"


@pytest.mark.parametrize(
    ("row", "said"),
    [
        ("collinear, x, 1, 2", "must be"),
        (",,,", "`table row` must have a start set, two numbers and a period"),
        ("circular 0.1 0.2 3", "`start` must be one of collinear, isosceles"),
        ("collinear 0.9 0.9 5", "must be bound, E < 0"),
        ("", "`a` must be a number, got ''"),
    ],
)
def test_a_bad_guess_is_told(catalog: Path, row: str, said: str) -> None:
    panel = VerifyPanel(catalog)
    panel.pasted.value = row
    if said not in panel.message.text:
        panel.refine.click()
    if panel._worker is not None:
        finish(panel)
    assert said in panel.message.text
    assert panel.keep.disabled


def test_a_row_is_pasted_in_any_shape(catalog: Path) -> None:
    panel = VerifyPanel(catalog)
    for row in ("Collinear, 0.3 0.5 6", "collinear;0.3;0.5;6", "collinear\t0.3\t0.5\t6"):
        panel.pasted.value = row
        assert [field.value for field in panel.values] == ["0.3", "0.5", "6"]
        panel.set_guess(Start("rest", ("0", "0"), "0"))


def test_a_new_record_is_kept_from_refining_only(catalog: Path) -> None:
    panel = VerifyPanel(catalog)
    # M. Suvakov & V. Dmitrasinovic, PRL 110, 114301 (2013), refined.
    orbit = refine("collinear", 0.46444, 0.39606, 14.8939).orbit
    panel.set_guess(orbit.start)
    panel.as_given.click()
    finish(panel)
    panel.keep.click()
    assert "press Refine first" in panel.message.text
    panel.refine.click()
    finish(panel)
    panel.keep.click()
    assert panel.message.text == "filed as orbit 3"
    with Catalog.open(catalog) as filed:
        assert len(filed.get(3).orbit.starts) == 2


def test_numbers_as_given_may_fail(catalog: Path) -> None:
    panel = VerifyPanel(catalog)
    panel.pasted.value = "collinear 0.34711 0.53272 6.3259"
    panel.as_given.click()
    finish(panel)
    assert panel.message.text.startswith("Not done: rejected") or "rejected" in panel.message.text
    assert "✗ FAILS" in panel.verdict.value
    assert panel.keep.disabled


# ---------------------------------------------------------------- browse


@pytest.fixture
def browse(catalog: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> BrowsePanel:
    monkeypatch.chdir(tmp_path)
    panel = BrowsePanel(catalog)
    finish(panel)
    return panel


def test_orbits_are_listed_by_type(browse: BrowsePanel) -> None:
    assert browse.message.text == "2 of 2 orbits"
    assert "(LR)^3" in browse.kinds.options[1][0]
    browse.symmetry.value = "choreography"
    assert [id for _, id in browse.orbits.options] == [1]
    browse.symmetry.value = "any"
    for name, value, left in (
        ("stable", "unstable", [2]), ("set", "rest", []), ("word", "Ba", [1, 2]),
        ("word", "aa", []), ("source", "matched", []), ("periods", (0.0, 9.0), []),
    ):  # fmt: skip
        filter_ = getattr(browse, name)
        before, filter_.value = filter_.value, value
        assert [id for _, id in browse.orbits.options] == left, (name, value)
        filter_.value = before


def test_a_bad_letter_in_the_filter_is_told(browse: BrowsePanel) -> None:
    browse.word.value = "x"
    assert "must use only the letters a, b, A, B" in browse.message.text


def test_list_and_plots_select_the_same_orbit(browse: BrowsePanel) -> None:
    browse.orbits.value = 2
    assert selected(browse.law.model) == selected(browse.starts.model) == [2]
    assert browse.detail.message.text.startswith("orbit 2, filed")
    source = browse.law.model.select_one({"name": "law orbits"})
    source.selected.indices = [list(source.data["id"]).index(1)]
    assert browse.orbits.value == 1
    assert selected(browse.starts.model) == [1]


def test_a_selection_of_what_is_gone_is_left_alone(browse: BrowsePanel) -> None:
    source = browse.law.model.select_one({"name": "law orbits"})
    browse._pick(source, [57])
    assert browse.orbits.value is None
    assert "bug" not in browse.message.text


def test_a_refresh_keeps_the_type_that_was_chosen(browse: BrowsePanel, catalog: Path) -> None:
    browse.kinds.value = 0
    chosen = browse._kinds[0].braid
    with Catalog.open(catalog) as filed:
        # A type with a shorter period comes first in the list.
        filed.add(replace(numbered(5), scaled_period=1.0, braid=pure_braid(40)))
    browse.refresh.click()
    finish(browse)
    assert browse._kinds[browse.kinds.value].braid == chosen
    assert browse.kinds.value == 1


def test_what_others_added_is_seen_after_a_refresh(browse: BrowsePanel, catalog: Path) -> None:
    verify = VerifyPanel(catalog)
    verify.pasted.value = "collinear 0.46444 0.39606 14.8939"
    verify.refine.click()
    finish(verify)
    verify.keep.click()
    browse.refresh.click()
    finish(browse)
    assert browse.message.text == "3 of 3 orbits"


def test_the_selection_is_written_in_every_form(browse: BrowsePanel, tmp_path: Path) -> None:
    browse.symmetry.value = "choreography"
    for ending in ("csv", "json", "tex", "html"):
        browse._write(ending)
        assert "1 orbits written to" in browse.message.text
    assert len(json.loads((tmp_path / "selection.json").read_text())) == 1
    assert "(LR)$^{3}$" in (tmp_path / "selection.tex").read_text()
    page = (tmp_path / "selection.html").read_text()
    assert "<script src=" not in page
    browse.set.value = "rest"
    browse._write("csv")
    assert "no orbit meets the filters" in browse.message.text


def test_an_empty_catalogue_says_what_to_do(tmp_path: Path) -> None:
    panel = BrowsePanel(tmp_path / "none.db")
    finish(panel)
    assert "run a search" in panel.message.text
    assert not (tmp_path / "none.db").exists()


def test_numbers_are_copied_in_full() -> None:
    orbit = replace(numbered(3), word="ab" * 400, starts=(numbered(3).start,))
    copied = {name: text for name, _, text in rows_of(orbit) if text}
    assert copied["word"] == "ab" * 400
    assert copied["period T"] == orbit.start.period
    assert copied["syzygy cycle"] == orbit.cycle
    assert copied["start"] == " ".join([orbit.start.kind, *orbit.start.parameters])


def test_a_table_of_facts_is_safe_in_a_page() -> None:
    text = facts([("word", "a...", "a" * 500), ("note", '<b>"quoted"</b>', "")])
    assert f'data-text="{"a" * 500}"' in text
    assert "<b>" not in text
    assert text.count("<button") == 1


def test_figure_command_writes_a_page(catalog: Path, tmp_path: Path, capsys) -> None:
    path = tmp_path / "eight.html"
    assert main(["figure", "1", "--output", str(path), "--catalog", str(catalog)]) == 0
    assert capsys.readouterr().out == f"orbit 1 written to {path}\n"
    page = path.read_text(encoding="utf-8")
    assert "choreography, mirror" in page
    assert main(["figure", "99", "--output", str(path), "--catalog", str(catalog)]) == 2
