"""Whoever may change a loop proposes on a page what needs two people; nothing changes by that alone."""

from __future__ import annotations

from dataclasses import replace

import pytest
from flask import Flask

from service.context import services
from service.pages import loop_proposals
from service.records import loops
from service.records.roles import CONSOLE
from service.records.views import LoopView
from tests.pages.conftest import Person, SignedIn
from tests.pages.invented import LOUD, Kept, password_of

REASON = f"The transmitter was re-ranged at the shutdown. {LOUD}"


def present(app: Flask, kept: Kept, case: str = "stable") -> LoopView:
    with app.app_context(), services().database.reading() as session:
        return loops.find(session, CONSOLE, kept.loops[case])


def address(kept: Kept, case: str = "stable", page: str = "propose") -> str:
    return f"/loops/{kept.loops[case]}/{page}"


def propose(person: Person, kept: Kept, case: str = "stable", **typed: str) -> Person:
    person.open(address(kept, case))
    person.send(address(kept, case), **{name.replace("__", "-"): text for name, text in typed.items()})
    return person


def test_the_form_shows_the_loop_as_it_is(author: Person, kept: Kept) -> None:
    page = author.open(address(kept, "not_met"))
    shown = {field.get("name"): field.get("value") for field in page.all("input") if field.get("name")}
    assert (shown["pv-low"], shown["pv-high"], shown["pv-unit"]) == ("0", "150", "°C")
    assert shown["gain_margin_min"] == "6"
    assert shown["phase_margin_deg_min"] == ""
    assert "checked" in page.one("input", id="safety_related-no").attributes
    assert page.all("script") == []


def test_a_range_is_proposed_here_and_confirmed_by_another(
    app: Flask, author: Person, reviewer: Person, kept: Kept
) -> None:
    author.open(f"/loops/{kept.loops['stable']}")
    assert author.page.one("a", href=address(kept))
    propose(author, kept, pv__high="200", reason=REASON)
    assert author.status == 200
    assert author.page.one("h1").text == "Change of TIC-204"
    assert "→ 0 to 200 °C" in author.page.text
    assert REASON in author.page.text
    assert present(app, kept).revision == 1
    changed = author.answer.request.path if author.answer else ""
    reviewer.open(changed)
    reviewer.send(f"{changed}/sign", decision="confirm", reason="Read.", password=password_of("reviewer"))
    after = present(app, kept)
    assert (after.revision, after.loop.pv.high) == (2, 200.0)
    assert after.loop.description == "Wash water temperature"


def test_limits_safety_mark_and_fail_position_are_proposed_together(author: Person, kept: Kept) -> None:
    propose(
        author,
        kept,
        "safety",
        safety_related="no",
        fail_position="closed",
        gain_margin_min="2.5",
        rise_time_s_max="40",
        reason=REASON,
    )
    assert "One approval will be enough in place of two." in author.page.text
    assert "The fail position changes from none to closed." in author.page.text
    assert "gain margin at least 2.5" in author.page.text
    assert "at most 40 s" in author.page.text


def test_a_cascade_is_named_by_site_and_tag(author: Person, kept: Kept) -> None:
    typed = {"inner_loop__site": "Vanholm", "inner_loop__tag": "FIC-205"}
    propose(author, kept, **typed, reason=REASON)
    assert "FIC-205 at Vanholm" in author.page.text


def test_whatever_is_wrong_is_named_at_its_field_and_the_rest_is_kept(author: Person, kept: Kept) -> None:
    typed = {"pv__low": "zero", "output__high": "", "gain_margin_min": "-2", "inner_loop__tag": "FIC-205"}
    propose(author, kept, **typed, reason="kept as typed")
    assert author.status == 422
    links = {link.get("href") for link in author.page.one("div", role="alert").all("a")}
    assert links == {"#pv-low", "#output-high"}
    propose(author, kept, gain_margin_min="-2", inner_loop__tag="FIC-205", reason="")
    assert author.status == 422
    links = {link.get("href") for link in author.page.one("div", role="alert").all("a")}
    assert links == {"#gain_margin_min", "#inner_loop-site", "#reason"}
    assert all(author.page.one(id=link[1:]) for link in links)
    assert author.page.one("input", id="gain_margin_min").get("value") == "-2"


def test_a_range_upside_down_is_refused_at_its_high_end(author: Person, kept: Kept) -> None:
    propose(author, kept, pv__high="-1", reason=REASON)
    assert author.status == 422
    assert author.page.one("input", id="pv-high").get("aria-invalid") == "true"
    assert "PV range, high: " in author.page.one("div", role="alert").text


def test_a_limit_that_is_folded_away_unfolds_where_it_is_wrong(author: Person, kept: Kept) -> None:
    propose(author, kept, rise_time_s_max="soon", reason=REASON)
    assert "open" in author.page.one("details").attributes
    assert author.page.one("input", id="rise_time_s_max").get("aria-invalid") == "true"


def test_nothing_changed_is_no_proposal(author: Person, kept: Kept) -> None:
    for case in ("stable", "not_met", "safety"):
        propose(author, kept, case, reason=REASON)
        assert author.status == 422
        assert "nothing would change" in author.page.one("div", role="alert").text


def test_a_number_that_was_not_touched_keeps_its_bits(app: Flask, author: Person, kept: Kept) -> None:
    texts = loop_proposals._texts(present(app, kept, "not_met").loop)
    assert float(texts["gain_margin_min"]) == 6.0
    propose(author, kept, pv__low="-0.1", pv__high="123456789.12345678", reason=REASON)
    assert "-0.1 to 123456789.12345678 °C" in author.page.text


def test_a_loop_that_moved_meanwhile_is_said_and_the_next_try_holds(
    app: Flask, author: Person, kept: Kept
) -> None:
    author.open(address(kept))
    with app.app_context(), services().database.writing() as session:
        view = loops.find(session, CONSOLE, kept.loops["stable"])
        moved = replace(view.loop, description="Rinse water")
        now = services().database.now()
        loops.change(session, CONSOLE, view.id, moved, "renamed", view.revision, now)
    author.send(address(kept), **{"pv-high": "200", "reason": REASON})
    assert author.status == 412
    assert "The loop has changed since you opened this page." in author.page.text
    assert author.page.one("input", id="pv-high").get("value") == "200"
    author.send(address(kept))
    assert author.page.one("h1").text == "Change of TIC-204"
    assert "Rinse water" in author.page.text


@pytest.mark.parametrize("page", ["propose", "retire"])
def test_whoever_may_not_change_loops_is_refused(
    reviewer: Person, signed_in: SignedIn, kept: Kept, page: str
) -> None:
    for person in (reviewer, signed_in("auditor")):
        person.open(f"/loops/{kept.loops['stable']}")
        assert person.page.all("a", href=address(kept)) == []
        person.open(address(kept, page=page))
        assert person.status == 403
    elsewhere = signed_in("elsewhere")
    elsewhere.open(address(kept, page=page))
    assert elsewhere.status == 404


def test_an_operating_point_is_proposed_for_retirement(author: Person, kept: Kept) -> None:
    author.open(address(kept))
    assert author.page.one("a", href=address(kept, page="retire"))
    author.open(address(kept, page="retire"))
    author.send(address(kept, page="retire"))
    assert author.status == 422
    assert author.page.one("div", role="alert").one("a").get("href") == "#retire_operating_point"
    author.send(address(kept, page="retire"), retire_operating_point="normal load")
    assert author.page.one("div", role="alert").one("a").get("href") == "#reason"
    author.send(address(kept, page="retire"), reason=REASON)
    assert author.page.one("h1").text == "Retire an operating point of TIC-204"


def test_a_loop_without_a_model_has_no_point_to_retire(author: Person, kept: Kept) -> None:
    page = author.open(address(kept, "without_model"))
    assert page.all("a", href=address(kept, "without_model", "retire")) == []
    page = author.open(address(kept, "without_model", "retire"))
    assert "none to retire" in page.text
