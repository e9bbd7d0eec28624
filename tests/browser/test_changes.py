"""Changes of loops and of passwords, each by two people, in a browser: by keyboard, with axe, at 320 px."""

from __future__ import annotations

from pathlib import Path

import pytest
from playwright.sync_api import Page, expect

from service.context import services
from service.records import accounts
from service.records.roles import CONSOLE
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
    expect(page.get_by_role("button", name="Sign the decision")).to_be_visible()
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
    expect(page.get_by_label("Your present password")).to_be_visible()
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


def test_a_change_is_proposed_by_keyboard_alone(opened: Opened, site: Site) -> None:
    page = opened("author", scripts=True)
    page.goto(f"{site.address}/loops/{site.kept.loops['stable']}")
    page.get_by_role("link", name="Propose a change").focus()
    page.keyboard.press("Enter")
    expect(page.get_by_label("PV range, high")).to_be_visible()
    looked_at(page)
    page.get_by_label("PV range, high").focus()
    page.keyboard.press("Control+a")
    page.keyboard.type("200")
    page.keyboard.press("Enter")
    # without its reason nothing is proposed; the summary leads to the field
    expect(page.get_by_role("alert")).to_be_focused()
    page.keyboard.press("Tab")
    page.keyboard.press("Enter")
    expect(page.get_by_label("Reason")).to_be_focused()
    page.keyboard.type("The transmitter was re-ranged at the shutdown.")
    page.keyboard.press("Tab")
    page.keyboard.press("Enter")
    expect(page.get_by_role("heading", name="Change of TIC-204")).to_be_visible()
    expect(page.get_by_text("0 to 200 °C").first).to_be_visible()
    looked_at(page)


@pytest.mark.parametrize("form", ["propose", "retire"])
def test_a_proposal_fits_a_narrow_screen(opened: Opened, site: Site, form: str) -> None:
    page = opened("author", width=320, scripts=True)
    page.goto(f"{site.address}/loops/{site.kept.loops['stable']}/{form}")
    looked_at(page)
    page.get_by_role("button", name="Propose").click()
    expect(page.get_by_role("alert")).to_be_visible()
    looked_at(page)


def test_a_reset_is_confirmed_on_a_narrow_screen(opened: Opened, site: Site, tmp_path: Path) -> None:
    app = invented.application(f"sqlite:///{tmp_path / 'store.db'}")
    with app.app_context(), services().database.writing() as session:
        now = services().database.now()
        accounts.reset_password(session, CONSOLE, "reviewer", "seven wet bicycles", "Forgotten.", now)
    invented.close(app)
    page = opened("administrator", width=320, scripts=True)
    page.get_by_role("link", name="Bo Lindgren (reviewer)").click()
    expect(page.get_by_role("button", name="Confirm this reset")).to_be_visible()
    looked_at(page)
    page.get_by_role("button", name="Confirm this reset").click()
    expect(page.get_by_role("alert")).to_contain_text("Say how you made sure")
    looked_at(page)
    page.get_by_label("Reason").fill("He asked me at the gate.")
    page.get_by_role("button", name="Confirm this reset").click()
    expect(page.get_by_role("status")).to_contain_text("The reset is confirmed")
    looked_at(page)
