"""From this quarter beside last to a stakeholder's phone: compare, recurrence, a fixed link, paper."""

from __future__ import annotations

from pathlib import Path

import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Browser, Page, expect

pytestmark = pytest.mark.journey


def test_from_a_comparison_to_a_link_on_a_phone_and_on_paper(
    browser: Browser, page: Page, served: str, tmp_path: Path
) -> None:
    page.get_by_role("link", name="Walk, batch and start, winter 2026").click()
    page.get_by_role("link", name="Compare", exact=True).click()
    expect(page.get_by_role("heading", level=1)).to_have_text(
        "What changed: A fourth walk, summer 2025 to Walk, batch and start, winter 2026"
    )
    apart = page.get_by_role("region", name="What cannot be compared, and why")
    expect(apart).to_contain_text("walk: zigzag only in A fourth walk, summer 2025.")
    expect(apart).to_contain_text("there and back has also been called return; it is the same level.")

    page.select_option("[name=with]", label="Walk and start by shift, winter 2025 (Main hall)")
    page.get_by_role("button", name="Compare").click()
    expect(apart).to_contain_text(
        "batch: held at 8 in Walk and start by shift, winter 2025, crossed over 4, 8 and 12 in"
        " Walk, batch and start, winter 2026; all else is read at 8."
    )

    page.get_by_role("link", name="Make a reader link").click()
    page.get_by_role("button", name="Make the link").click()
    address = page.get_by_label("Address to hand on").input_value()
    assert address.startswith(f"{served}/r/")

    page.goto("/series/1/recurrence")
    expect(page.get_by_role("main")).to_contain_text("seen again. At least")
    why = page.locator("details", has_text="opposite in some studies").first
    why.locator("summary").first.click()
    expect(why).to_contain_text("At least one study shows it one way and at least one the other.")

    read_signed_out(browser, address, tmp_path)
    page.goto("/series/1/links")
    page.get_by_role("button", name="Revoke").click()
    expect(page.get_by_role("status")).to_contain_text("The link no longer opens.")
    assert page.request.get(address).status == 404


def read_signed_out(browser: Browser, address: str, folder: Path) -> None:
    """Open a link on a phone without an account, check it, and print it."""
    phone = browser.new_context(viewport={"width": 390, "height": 844})
    reader = phone.new_page()
    complaints: list[str] = []
    reader.on("console", lambda message: complaints.append(message.text) if message.type == "error" else None)
    reader.goto(address)
    expect(reader.get_by_role("main")).to_contain_text("This is a read-only page of Weftbook")
    expect(reader.get_by_role("main")).to_contain_text("What this page does not show")
    assert reader.evaluate("document.documentElement.scrollWidth") == 390
    assert Axe().run(reader).response["violations"] == []
    printed = reader.pdf(path=folder / "comparison.pdf", format="A4")
    assert printed.startswith(b"%PDF")
    assert complaints == []
    phone.close()
