"""Something in every kept table of a store, as it comes about in a plant."""

from __future__ import annotations

from service.issuing import changes, checkpoints
from service.records import kept_sheets
from tests.records.store import WIDER, Store, gains


def live(store: Store) -> None:
    """Two loops: gains approved and installed, gains refused, gains that were installed first, a change that
    two people made, and an operating point that they retired.
    """
    loop = store.register(criteria={"gain_margin_min": 2.0})
    store.add_model(loop)
    first = store.submit(temporary_until="2026-12-31T00:00:00Z", install_by="2026-12-30T00:00:00Z")
    signed = store.approve(first)
    with store.database.writing() as session:
        reviewer = store.actor("reviewer")
        checkpoint = checkpoints.checkpoint(session, None)
        kept_sheets.keep(
            session, reviewer, signed.decision.decision_id, b"%PDF", "1", checkpoint, store.clock()
        )
    store.clock.forward(hours=1)
    store.install(first)
    other = store.register(tag="LIC-7", area="Tank farm")
    store.add_model(other)
    second = store.submit(loop={"site": "North", "tag": "LIC-7"}, controller=gains(1.2))
    store.decide(second, "reject")
    store.submit(kind="emergency", controller=gains(1.1))
    store.approve(store.submit(loop={"site": "North", "tag": "LIC-7"}))
    store.submit(loop={"site": "North", "tag": "LIC-7"}, controller=gains(1.3))
    ranged = store.propose(other, tag="LIC-7", area="Tank farm", pv=WIDER)
    prepared = store.prepare_decision(ranged)
    with store.database.writing() as session:
        changes.sign(session, store.actor("reviewer"), ranged.id, prepared, store.clock(), None)
    store.decide_change(store.propose(other, revision=2, retire="normal"), person="second")
