"""The first notebook in a real page: run it, move controls, look at what changes."""

from __future__ import annotations

import os
import re

import pytest

from tests.require import require

pytestmark = [pytest.mark.browser, pytest.mark.timeout(240)]

PATH = "notebooks/01_first_look.ipynb"


@pytest.fixture
def desk(notebook):
    """The page of the first notebook after all its cells ran."""
    notebook.open(PATH).run_all()
    page = notebook.page
    page.locator("img.widget-image").first.scroll_into_view_if_needed()
    yield page
    assert notebook.troubles == []
    assert page.locator("[data-mime-type*='stderr']").count() == 0


@pytest.fixture
def expect():
    return require("playwright.sync_api").expect


def status_of(page):
    return page.locator("p.toprecon-status[role=status]").first


def picture_of(page):
    """Picture of the panel on view: the last one of the desk."""
    return page.locator("img.widget-image").last


def photograph(page, name):
    if folder := os.environ.get("TOPRECON_SCREENSHOTS"):
        page.wait_for_timeout(700)
        page.screenshot(path=f"{folder}/{name}.png")


def test_slider_moved_by_keyboard_changes_figure_and_numbers(desk, expect):
    status, picture = status_of(desk), picture_of(desk)
    expect(status).to_contain_text("shift of the signal")
    before, old = status.inner_text(), picture.get_attribute("src")
    desk.locator(".noUi-handle-upper").first.focus()
    for _ in range(4):
        desk.keyboard.press("PageDown")
    box = desk.get_by_role("spinbutton", name="below", exact=True)
    expect(box).to_have_value("45")
    expect(picture).not_to_have_attribute("src", old)
    expect(status).not_to_have_text(before)
    assert re.search(r"reconstructed 0\.\d+ ± 0\.\d+", status.inner_text())
    outline = desk.evaluate(
        "() => getComputedStyle(document.activeElement).outlineStyle"
    )
    assert outline == "solid"


def test_number_typed_into_the_box_moves_the_cut(desk, expect):
    before = status_of(desk).inner_text()
    box = desk.get_by_role("spinbutton", name="below", exact=True)
    box.fill("12.5")
    box.press("Enter")
    expect(status_of(desk)).not_to_have_text(before)
    expect(desk.locator(".toprecon-error")).to_have_count(0)


def test_wrong_setting_is_one_sentence_and_goes_away(desk, expect):
    low = desk.get_by_role("spinbutton", name="from", exact=True)
    low.fill("60")
    low.press("Enter")
    high = desk.get_by_role("spinbutton", name="below", exact=True)
    high.fill("12")
    high.press("Enter")
    error = desk.locator(".toprecon-error[role=alert]")
    expect(error).to_contain_text("low must not be above high; got low=60.0, high=12.0")
    photograph(desk, "error")
    low.fill("0")
    low.press("Enter")
    expect(error).to_have_count(0)


def test_every_panel_shows_its_figure(desk, expect):
    old = picture_of(desk).get_attribute("src")
    titles = ("Pairing", "Scan", "Migration", "One event", "Events", "Angle")
    for title in titles:
        button = desk.get_by_role("button", name=title, exact=True)
        button.focus()
        desk.keyboard.press("Enter")
        picture = picture_of(desk)
        expect(picture).not_to_have_attribute("src", old)
        old = picture.get_attribute("src")
        photograph(desk, f"panel {title}")
    for view in ("causes of the shift", "wrong hemisphere"):
        desk.get_by_role("button", name=view).click()
        expect(picture_of(desk)).not_to_have_attribute("src", old)
        old = picture_of(desk).get_attribute("src")
        photograph(desk, f"view {view}")


def test_kept_plan_is_compared_after_a_change(desk, expect):
    desk.get_by_role("button", name="Compare", exact=True).click()
    desk.get_by_role("button", name="keep this plan").click()
    box = desk.get_by_role("spinbutton", name="below", exact=True)
    box.fill("10")
    box.press("Enter")
    expect(desk.get_by_text("events selected by both").last).to_be_visible()
    expect(desk.get_by_text("kept: StudyPlan().with_cut")).to_contain_text("high=50")
    photograph(desk, "panel Compare")
    desk.get_by_role("button", name="Boosted", exact=True).click()
    expect(desk.get_by_text("Choose a branch with fat jets")).to_be_visible()
    photograph(desk, "panel Boosted")


def test_cut_is_added_from_the_list_and_beams_are_chosen(desk, expect):
    desk.get_by_role("combobox").filter(has_text="add a cut on").select_option(
        label="hadronic W mass [GeV]"
    )
    expect(desk.get_by_label("hadronic W mass [GeV]")).to_be_checked()
    expect(desk.locator(".noUi-handle-upper")).to_have_count(2)
    before = status_of(desk).inner_text()
    desk.get_by_label("beams", exact=True).select_option(label="e-L e+R")
    expect(status_of(desk)).not_to_have_text(before)
    photograph(desk, "two cuts")


def test_shift_is_explained_and_the_matrix_is_put_to_the_test(desk, expect):
    desk.get_by_role("button", name="causes of the shift").click()
    expect(desk.get_by_text("axial, Z")).to_have_count(0)  # beams must be known
    expect(desk.get_by_text("the mix of beams must be known")).to_be_visible()
    desk.get_by_label("beams", exact=True).select_option(label="e-L e+R")
    expect(desk.get_by_text("axial, Z")).to_be_visible()
    photograph(desk, "view meaning")
    desk.get_by_role("button", name="Migration", exact=True).click()
    desk.get_by_role("button", name="closure test").click()
    expect(desk.get_by_text("probability of a larger")).to_be_visible()
    photograph(desk, "view closure")


def test_cells_run_twice_leave_one_desk_that_works(notebook, expect):
    notebook.open(PATH).run_all().run_all()
    page = notebook.page
    expect(page.locator(".noUi-handle-upper")).to_have_count(1)
    page.locator("img.widget-image").first.scroll_into_view_if_needed()
    before = status_of(page).inner_text()
    page.locator(".noUi-handle-upper").first.focus()
    page.keyboard.press("PageDown")
    expect(status_of(page)).not_to_have_text(before)
    assert notebook.troubles == []


def test_plan_is_saved_from_the_desk(desk, expect, served):
    desk.get_by_role("button", name="Hand-off", exact=True).click()
    desk.get_by_role("button", name="save plan").click()
    expect(desk.get_by_text("plan saved as study_plan.toml")).to_be_visible()
    photograph(desk, "panel Hand-off")
    from toprecon import StudyPlan

    plan = StudyPlan.load(served / "notebooks" / "study_plan.toml")
    assert plan.cuts[0].observable == "pairing.chi2"


def test_pairing_is_calibrated_by_a_button(desk, expect):
    desk.get_by_role("button", name="Pairing", exact=True).click()
    desk.get_by_role("button", name="calibrate", exact=True).click()
    expect(desk.get_by_text("right after [%]")).to_be_visible(timeout=60_000)
    expect(desk.get_by_label("pairing -2 ln(right/wrong)")).to_be_visible()
    expect(desk.locator(".toprecon-error")).to_have_count(0)
    desk.get_by_role(
        "button", name="calibrate", exact=True
    ).scroll_into_view_if_needed()
    photograph(desk, "calibrated")


def test_input_is_varied_by_a_button_into_a_table(desk, expect):
    desk.get_by_role("button", name="Compare", exact=True).click()
    desk.get_by_role("button", name="with variations").click()
    expect(desk.get_by_text("how much would the results shift")).to_be_visible()
    desk.get_by_role("button", name="vary the input").click()
    row = desk.get_by_role("row").filter(has_text="b tags lost 2 %")
    expect(row).to_be_visible(timeout=60_000)
    expect(row).to_contain_text("−0.02")
    expect(desk.locator(".toprecon-error")).to_have_count(0)
    row.scroll_into_view_if_needed()
    photograph(desk, "varied")
