"""Every page looked at in a browser: by axe, on a narrow screen, enlarged, and on paper."""

from __future__ import annotations

import io

import pypdf
import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Page, expect

from tests.browser.conftest import Opened, Site
from tests.pages.invented import password_of

pytestmark = pytest.mark.xdist_group("browser")

SHOWN = ("stable", "unstable", "undecided", "not_met", "safety", "loud", "long", "without_model")
WCAG = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]


def addresses(site: Site, cases: tuple[str, ...] = SHOWN) -> list[str]:
    """Every page that is reached by an address; those of forms come in the tests that send them."""
    named = ["/", "/loops", "/submissions", "/history", "/history/20", "/nowhere", "/submissions?state=none"]
    named += [f"/submissions/{site.kept.submissions[case]}" for case in cases]
    named += [f"/loops/{site.kept.loops[case]}" for case in ("loud", "long")]
    return [site.address + path for path in named]


def violations(page: Page) -> list[str]:
    page.wait_for_load_state()  # without its style sheet a page has other faults
    options = {"runOnly": {"type": "tag", "values": WCAG}}
    found = Axe().run(page, options=options).response["violations"]
    return [f"{each['id']}: {[node['html'][:200] for node in each['nodes']]}" for each in found]


def sideways(page: Page) -> int:
    """How far the page can be scrolled sideways, in px. Needs scripts, which only the test has."""
    page.wait_for_load_state()
    width: int = page.evaluate("document.documentElement.scrollWidth - document.documentElement.clientWidth")
    return width


def read_back(page: Page, site: Site) -> None:
    page.goto(site.submission("not_met"))
    page.get_by_label("Approve these gains").check()
    page.get_by_label("Reason", exact=True).fill("Agreed.")
    page.get_by_label("Gain margin at least 6").fill("Until the summer.")
    page.get_by_role("button", name="Read back before signing").click()
    expect(page.get_by_role("heading", level=1)).to_have_text("Read back what you sign")


def test_axe_finds_what_is_wrong(opened: Opened) -> None:
    page = opened(scripts=True)
    page.set_content("<html lang='en'><title>t</title><main><h1>t</h1><input><p style='color:#aaa'>pale</p>")
    assert {found.split(":")[0] for found in violations(page)} == {"label", "color-contrast"}


def test_axe_finds_nothing_against_any_page(opened: Opened, site: Site) -> None:
    page = opened(scripts=True)
    assert violations(page) == []
    page = opened("reviewer", scripts=True)
    for address in addresses(site, ("stable", "not_met", "loud", "without_model")):
        page.goto(address)
        assert violations(page) == [], address


def test_axe_finds_nothing_against_a_form_with_problems_or_the_steps_of_a_decision(
    opened: Opened, site: Site
) -> None:
    page = opened("reviewer", scripts=True)
    page.goto(site.submission("not_met"))
    page.get_by_role("button", name="Read back before signing").click()
    expect(page.get_by_role("alert")).to_be_visible()
    assert violations(page) == []
    read_back(page, site)
    page.locator("summary").click()
    assert violations(page) == []
    page.get_by_label("Your password").fill(password_of("reviewer"))
    page.get_by_role("button", name="Sign: approve").click()
    expect(page.get_by_role("heading", level=1)).to_have_text("Signed and recorded")
    assert violations(page) == []


def test_axe_finds_nothing_against_withdrawing_or_recording_an_installation(
    opened: Opened, site: Site
) -> None:
    page = opened("author", scripts=True)
    page.goto(f"{site.submission('stable')}/withdraw")
    assert violations(page) == []
    for case in ("stable", "two_zeros"):
        page.goto(f"{site.submission(case)}/installation")
        for summary in page.locator("summary").all():
            summary.click()
        assert violations(page) == []
        page.get_by_role("button", name="Record this installation").click()
        expect(page.get_by_role("alert")).to_be_visible()
        assert violations(page) == []


def leave_otherwise(page: Page, site: Site, gain: str) -> None:
    """Leave an emergency change's gains otherwise; the page then says what came of it."""
    page.goto(site.submission("emergency") + "/installation")
    for side, value in (("found", "1.60"), ("left", gain)):
        page.locator(f"input[name={side}-action][value=reverse]").check()
        page.locator(f"input[name={side}-proportional-value]").fill(value)
        page.locator(f"input[name={side}-integral-value]").fill("30")
    page.get_by_role("button", name="Record this installation").click()
    expect(page.get_by_role("heading", level=1)).to_have_text("Installation recorded")


def otherwise_told(page: Page, site: Site) -> list[str]:
    """Every page that tells of gains that were left otherwise."""
    paths = [f"/loops/{site.kept.loops['emergency']}", "/"]
    return [page.url, site.submission("emergency"), *(site.address + path for path in paths)]


@pytest.mark.parametrize("gain", ["20.0", "6.0"])
def test_gains_left_otherwise_are_told_without_a_fault_on_a_wide_and_a_narrow_screen(
    opened: Opened, site: Site, gain: str
) -> None:
    page = opened("author", scripts=True)
    leave_otherwise(page, site, gain)
    told = otherwise_told(page, site)
    narrow = opened("author", width=320, scripts=True)
    for address in told:
        page.goto(address)
        expect(page.get_by_text("unstable" if gain == "20.0" else "limits").first).to_be_visible()
        assert violations(page) == [], address
        narrow.goto(address)
        assert sideways(narrow) == 0, address


def test_no_page_scrolls_sideways_at_320_px(opened: Opened, site: Site) -> None:
    page = opened("reviewer", width=320, scripts=True)
    for address in addresses(site):
        page.goto(address)
        for summary in page.locator("summary").all():
            summary.click()
        assert sideways(page) == 0, address
    read_back(page, site)
    page.locator("summary").click()
    assert sideways(page) == 0
    page = opened("author", width=320, scripts=True)
    page.goto(f"{site.submission('stable')}/installation")
    assert sideways(page) == 0


def test_nothing_is_cut_off_at_twice_the_size(opened: Opened, site: Site) -> None:
    # 200 % zoom of a window of 1280 px is a window of 640 px
    page = opened("reviewer", width=640, height=450, scripts=True)
    for address in addresses(site):
        page.goto(address)
        assert sideways(page) == 0, address


def test_the_page_works_with_its_own_policy_and_no_script_at_all(opened: Opened, site: Site) -> None:
    page = opened("reviewer")
    complaints: list[str] = []
    page.on("console", lambda message: complaints.append(message.text))
    page.goto(site.submission("stable"))
    expect(page.locator("figure svg").first).to_be_visible()
    read_back(page, site)
    page.get_by_role("button", name="Go back and change it").click()
    expect(page.get_by_label("Gain margin at least 6")).to_have_value("Until the summer.")
    assert [text for text in complaints if "Content Security Policy" in text] == []


def test_on_paper_everything_is_unfolded_and_no_control_is_left(opened: Opened, site: Site) -> None:
    page = opened("reviewer")
    page.goto(site.submission("stable"))
    paper = pypdf.PdfReader(io.BytesIO(page.pdf(format="A4", print_background=False)))
    text = "\n".join(sheet.extract_text() for sheet in paper.pages)
    assert "How the verdict was reached" in text
    assert "Stable: after a disturbance the loop comes to rest." in text
    for control in ("Read back before signing", "Sign out", "Skip to the content", "For review"):
        assert control not in text
