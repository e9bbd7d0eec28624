"""A change of a loop confirmed, and a password changed, in a browser: by keyboard, with axe, at 320 px."""

from __future__ import annotations

from pathlib import Path

import pytest
from playwright.sync_api import Page, expect

from service.records.views import ChangeView
from tests.browser.conftest import Opened, Site
from tests.browser.test_reading import sideways, violations
from tests.pages import invented
from tests.pages.invented import password_of
from tests.pages.test_loop_changes import propose

pytestmark = pytest.mark.xdist_group("browser")


@pytest.fixture
def change(site: Site, tmp_path: Path) -> ChangeView:
    app = invented.application(f"sqlite:///{tmp_path / 'store.db'}")
    made = propose(app, site.kept)
    invented.close(app)
    return made


def looked_at(page: Page) -> None:
    for summary in page.locator("summary").all():
        summary.click()
    assert violations(page) == []
    assert sideways(page) == 0


def test_a_change_is_confirmed_on_a_narrow_screen(opened: Opened, site: Site, change: ChangeView) -> None:
    page = opened("reviewer", width=320, scripts=True)
    page.goto(site.address)
    page.locator(f'a[href="/changes/{change.id}"]').click()
    looked_at(page)
    page.get_by_role("button", name="Sign the decision").click()
    expect(page.get_by_role("alert")).to_contain_text("Choose to confirm or to reject.")
    looked_at(page)
    page.get_by_label("Confirm this change").check()
    page.get_by_label("Reason", exact=True).fill("Read against the data sheet.")
    page.get_by_label("Your password").fill(password_of("reviewer"))
    page.keyboard.press("Enter")
    expect(page.get_by_text("I have read this change")).to_be_visible()
    looked_at(page)
    page.goto(f"{site.address}/loops/{site.kept.loops['stable']}")
    expect(page.get_by_text("due for a recheck").first).to_be_visible()
    looked_at(page)


def test_a_password_is_changed_on_a_narrow_screen(opened: Opened, site: Site) -> None:
    page = opened("reviewer", width=320, scripts=True)
    page.get_by_role("link", name="Change password").click()
    looked_at(page)
    page.get_by_label("Your present password").fill(password_of("reviewer"))
    page.get_by_label("New password", exact=True).fill("seven wet bicycles")
    page.get_by_label("New password, once more").fill("seven wet bicycle")
    page.keyboard.press("Enter")
    expect(page.get_by_role("alert")).to_contain_text("The two are not the same.")
    looked_at(page)
    page.get_by_label("Your present password").fill(password_of("reviewer"))
    page.get_by_label("New password", exact=True).fill("seven wet bicycles")
    page.get_by_label("New password, once more").fill("seven wet bicycles")
    page.keyboard.press("Enter")
    expect(page.get_by_role("status")).to_have_text("Your password is changed. Sign in with the new one.")
    looked_at(page)
