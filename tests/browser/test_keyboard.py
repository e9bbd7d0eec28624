"""A reviewer's whole way by keyboard alone, without any script: sign in, read, approve, take the sheet."""

from __future__ import annotations

import pytest
from playwright.sync_api import Page, expect

from tests.browser.conftest import Opened, Site
from tests.pages.invented import password_of

pytestmark = pytest.mark.xdist_group("browser")


def tab_to(page: Page, role: str, name: str, at_most: int = 60) -> None:
    """Press Tab until the element with this role and name has the focus."""
    wanted = page.get_by_role(role, name=name, exact=True).first  # type: ignore[arg-type]  # any role
    for _ in range(at_most):
        page.keyboard.press("Tab")
        if wanted.and_(page.locator(":focus")).count():
            return
    raise AssertionError(f"{role} {name!r} is not reached by Tab")


def test_a_reviewer_approves_by_keyboard_alone(opened: Opened, site: Site) -> None:
    page = opened()
    tab_to(page, "textbox", "Account name")
    page.keyboard.type("reviewer")
    page.keyboard.press("Tab")
    page.keyboard.type(password_of("reviewer"))
    page.keyboard.press("Enter")
    expect(page.get_by_role("heading", level=1)).to_have_text("What awaits review")
    tab_to(page, "link", "TIC-204")
    page.keyboard.press("Enter")
    expect(page.get_by_role("heading", level=1)).to_have_text("Planned change for TIC-204")
    tab_to(page, "radio", "Approve these gains")
    page.keyboard.press("Space")
    page.keyboard.press("Tab")
    page.keyboard.type("Margins are ample.")
    page.keyboard.press("Tab")
    page.keyboard.press("Enter")
    expect(page.get_by_role("heading", level=1)).to_have_text("Read back what you sign")
    tab_to(page, "textbox", "Your password")
    page.keyboard.type(password_of("reviewer"))
    page.keyboard.press("Enter")
    expect(page.get_by_role("heading", level=1)).to_have_text("Signed and recorded")
    expect(page.get_by_role("status")).to_contain_text("Bo Lindgren approved these gains")


def test_the_first_tab_leads_past_the_head_of_the_page(opened: Opened, site: Site) -> None:
    page = opened("reviewer")
    page.goto(site.submission("stable"))
    page.keyboard.press("Tab")
    skip = page.locator(":focus")
    expect(skip).to_have_text("Skip to the content")
    expect(skip).to_be_in_viewport()
    page.keyboard.press("Enter")
    page.keyboard.press("Tab")
    assert page.locator("main :focus").count() == 1


def test_what_is_wrong_has_the_focus_and_leads_to_its_field(opened: Opened, site: Site) -> None:
    page = opened("reviewer")
    page.goto(site.submission("stable"))
    page.get_by_role("button", name="Read back before signing").click()
    expect(page.locator("#problems")).to_be_focused()
    tab_to(page, "link", "Give the reason for your decision.")
    page.keyboard.press("Enter")
    expect(page.get_by_label("Reason", exact=True)).to_be_in_viewport()


def test_what_is_folded_up_opens_by_keyboard(opened: Opened, site: Site) -> None:
    page = opened("reviewer")
    page.goto(site.submission("stable"))
    summary = page.locator("summary", has_text="Every computed figure")
    summary.focus()
    page.keyboard.press("Enter")
    expect(page.get_by_text("How the verdict was reached")).to_be_visible()
