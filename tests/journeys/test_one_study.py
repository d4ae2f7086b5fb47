"""From nothing to a decomposition: start a study, log, import, correct, set aside, read."""

from __future__ import annotations

from pathlib import Path

import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Page, expect

pytestmark = pytest.mark.journey

PAGES = (
    "/", "/series/new", "/series/1/studies/new", "/studies/1", "/studies/2", "/studies/3", "/studies/5", "/studies/7",
    "/studies/8", "/studies/9", "/studies/9/plan", "/studies/1/plan", "/studies/8/end", "/studies/8/step",
    "/studies/1/history", "/studies/1/trials", "/studies/1/trials?which=set_aside", "/studies/1/trials/17",
    "/studies/8/log", "/studies/8/import", "/studies/1?rows=start&columns=walk", "/studies/4?response=wrong+pick",
    "/studies/6/compare", "/studies/6/compare?with=3", "/series/1/recurrence", "/series/1/levels",
    "/studies/1/decisions", "/series/1/levels/3/name", "/series/1/levels/3/meaning", "/series/1/links",
    "/series/1/links/new?scope=study&study=6",
)  # fmt: skip


def test_a_study_from_its_start_to_its_decomposition(page: Page, tmp_path: Path) -> None:
    page.goto("/series/1/studies/new")
    page.fill("[name=title]", "Walk by start")
    page.fill("[name=site]", "Main hall")
    page.select_option("[name=time_zone]", "Europe/Copenhagen")
    fill_factor(page, 0, "walk", "serpentine\nlargest gap")
    fill_factor(page, 1, "start", "front\nback")
    page.evaluate(CLEAR_OTHER_ROWS)
    fill_name(page, "[name=responses-0-name]", "minutes")
    page.select_option("[name=responses-0-unit]", "min")
    page.fill("[name=responses-0-step]", "0.1")
    page.get_by_role("button", name="Make the study").click()
    expect(page.get_by_role("heading", level=1)).to_have_text("Walk by start")

    page.get_by_role("button", name="Start without a plan").click()
    expect(page.get_by_role("status")).to_contain_text("The study runs")

    page.get_by_role("link", name="Log a trial").click()
    page.get_by_text("largest gap", exact=True).first.click()
    page.get_by_text("back", exact=True).first.click()
    page.fill("[name=readings-minutes]", "7,1")
    page.get_by_role("button", name="Log this trial").click()
    expect(page.get_by_role("alert")).to_contain_text("write a decimal point: 7.1")
    expect(page.locator("[name=readings-minutes]")).to_have_value("7,1")
    page.fill("[name=readings-minutes]", "7.1")
    page.get_by_role("button", name="Log this trial").click()
    expect(page.get_by_role("status")).to_contain_text("Trial 1 is logged: largest gap, back: minutes 7.1.")

    page.goto(page.url.partition("/log")[0] + "/import")
    faulty = tmp_path / "faulty.csv"
    faulty.write_text("walk,start,minutes\nzigzag,back,7.1\nlargest gap,front,7.1x\n")
    give(page, faulty)
    expect(page.get_by_role("alert")).to_contain_text("line 2, column walk: 'zigzag' given")
    expect(page.get_by_role("alert")).to_contain_text("line 3, column minutes: '7.1x' given")
    page.get_by_role("button", name="Drop the file").click()
    expect(page.get_by_role("status")).to_contain_text("nothing was written")

    page.get_by_role("link", name="Import a file").click()
    clean = tmp_path / "clean.csv"
    rows = [
        f"{walk},{start},{20 + turn / 10:.1f}"
        for walk in ("serpentine", "largest gap")
        for start in ("front", "back")
        for turn in range(3)
    ]
    clean.write_text("walk,start,minutes\n" + "\n".join(rows) + "\n")
    give(page, clean)
    expect(page.get_by_text("12 trials can be taken in.")).to_be_visible()
    page.get_by_role("button", name="Take it in").click()
    expect(page.get_by_role("status")).to_contain_text("12 trials are taken in: 2 to 13.")

    study = page.url
    page.goto(f"{study}/trials/1")
    page.fill("[name=text]", "20.1")
    page.fill("[name=reason]", "watch started late")
    page.get_by_role("button", name="Correct").click()
    expect(page.get_by_role("status")).to_contain_text("Trial 1 is corrected")
    page.fill("[name=keep_reason]", "aisle blocked")
    page.get_by_role("button", name="Set aside").click()
    expect(page.get_by_role("status")).to_contain_text("Trial 1 is set aside")

    page.goto(study)
    expect(page.get_by_text("13 trials are logged; 1 set aside; 12 readings of minutes count.")).to_be_visible()
    page.wait_for_selector("html[data-figures=drawn]", state="attached")
    expect(page.get_by_role("heading", name="How each mean is built")).to_be_visible()
    expect(page.locator("table.build-up")).to_contain_text("20.10")


CLEAR_OTHER_ROWS = """() => {
  for (const field of document.querySelectorAll("[name^='factors-'], [name^='responses-']")) {
    const [kind, at] = field.name.split("-");
    const kept = kind === "factors" ? at < 2 : at < 1;
    if (!kept && field.tagName !== "SELECT" && field.type !== "radio") field.value = "";
  }
}"""


def fill_factor(page: Page, at: int, name: str, levels: str) -> None:
    fill_name(page, f"[name=factors-{at}-name]", name)
    page.fill(f"[name=factors-{at}-levels]", levels)


def fill_name(page: Page, field: str, name: str) -> None:
    """Type a name and leave the field: then the page fills in what the series knows of it."""
    page.fill(field, name)
    page.locator(field).blur()


def give(page: Page, path: Path) -> None:
    page.set_input_files("[name=file]", path)
    page.get_by_role("button", name="Look at it").click()


@pytest.mark.parametrize("width", [390, 1280])
def test_no_page_overflows_or_breaks_a_rule_of_accessibility(page: Page, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 900})
    found: list[str] = []
    for address in PAGES:
        page.goto(address)
        if page.locator("[data-chart]").count():
            page.wait_for_selector("html[data-figures=drawn]", state="attached")
        if page.evaluate("document.documentElement.scrollWidth") > width:
            found.append(f"{address} is wider than {width}")
        found += [f"{address}: {violation['id']}" for violation in Axe().run(page).response["violations"]]

    assert found == []
