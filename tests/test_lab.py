"""Panels of the lab without a browser: what their controls do, and what they say when it fails."""

import json
from pathlib import Path

import pytest

from orbitsearch.catalog import Catalog
from orbitsearch.cli import main
from orbitsearch.lab import BrowsePanel, SearchPanel, StartView, VerifyPanel
from orbitsearch.lab.parts import facts
from orbitsearch.plots.selection import selected

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
    panel._mark_source.selected.indices = [panel._mark_source.data["id"].index(2)]
    assert panel.table.value == 2


def test_the_number_fields_and_the_sliders_follow_each_other(tmp_path: Path) -> None:
    controls = SearchPanel(tmp_path / "orbits.db").controls
    controls.sliders[0].value = (0.1, 0.2)
    assert controls.window[:2] == (0.1, 0.2)
    controls.ends[3].value = 0.25
    assert controls.sliders[1].value == (0.0, 0.25)
    # Exact numbers are not those of the slider.
    controls.ends[0].value = 0.1234567
    assert controls.request().window[0] == 0.1234567


@pytest.mark.parametrize("kind", ["isosceles", "rest", "perpendicular", "collinear"])
def test_every_start_set_has_its_window(tmp_path: Path, kind: str) -> None:
    panel = SearchPanel(tmp_path / "orbits.db")
    panel.controls.start.value = kind
    assert panel.controls.request().start == kind
    assert panel._map.start == kind
    assert panel.view.kind == kind


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
        ("collinear, x, 1, 2", "`a` must be a number, got ''"),
        ("collinear 0.9 0.9 5", "must be bound, E < 0"),
        ("", "`a` must be a number, got ''"),
    ],
)
def test_a_bad_guess_is_told(catalog: Path, row: str, said: str) -> None:
    panel = VerifyPanel(catalog)
    panel.pasted.value = row
    panel.refine.click()
    if panel._worker is not None:
        finish(panel)
    assert said in panel.message.text
    assert panel.keep.disabled


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


def test_a_copied_number_is_whole_and_safe_in_a_page() -> None:
    text = facts([("word", "a" * 500, True), ("note", '<b>"quoted"</b>', False)])
    assert f'data-text="{"a" * 500}"' in text
    assert "<b>" not in text


def test_figure_command_writes_a_page(catalog: Path, tmp_path: Path, capsys) -> None:
    path = tmp_path / "eight.html"
    assert main(["figure", "1", "--output", str(path), "--catalog", str(catalog)]) == 0
    assert capsys.readouterr().out == f"orbit 1 written to {path}\n"
    page = path.read_text(encoding="utf-8")
    assert "choreography, mirror" in page
    assert main(["figure", "99", "--output", str(path), "--catalog", str(catalog)]) == 2
