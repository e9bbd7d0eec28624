"""Who did what to a record, when, and what it meant: signatures and installations."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from service.judgement.criteria import quantity_name
from service.judgement.digits import apart, as_entered
from service.judgement.quantities import QUANTITIES
from service.judgement.wording import UNITS, WORST_CASE_LABELS, quantity_label, setting_name
from service.records.content import Difference, Person
from service.records.views import DecisionView, InstallationView
from service.sheets import controllers
from service.sheets.as_left import in_one_line
from service.sheets.controllers import Told

DECISIONS = {
    "approve": "Approved",
    "reject": "Rejected",
    "withdraw": "Withdrawn",
    "revoke": "Approval revoked",
}


EARLIER = "Signed on the content as it was before it was recomputed; it does not count for the present one."


@dataclass(frozen=True, kw_only=True, slots=True)
class Signature:
    """One signature as it was given, its reason and deviations, and its own entry of the history."""

    heading: str
    meaning: str
    reason: str
    deviations: tuple[Told, ...]
    on_earlier_results: str
    """A sentence where the content was recomputed after this was signed, and so is another; else empty."""
    entry: str


def signature(view: DecisionView, content_digest: str) -> Signature:
    """Tell a signature; `content_digest` is that of the present content."""
    decision = view.decision
    earlier = decision.content_digest != content_digest
    return Signature(
        on_earlier_results=f"{EARLIER} Its digest: {decision.content_digest}." if earlier else "",
        heading=f"{DECISIONS[decision.decision]} by {named(decision.signed_by)}, {utc(decision.signed_at)}",
        meaning=decision.meaning,
        reason=decision.reason,
        deviations=tuple(
            Told(name=_criterion(each.criterion), value=each.reason) for each in decision.deviation
        ),
        entry=f"History entry {view.entry.number}, digest {view.entry.digest}",
    )


def _criterion(name: str) -> str:
    """The limit, or the finding, that a deviation answers, in words and by its name."""
    quantity = quantity_name(name)
    if quantity in QUANTITIES or quantity in WORST_CASE_LABELS:
        return f"{quantity_label(quantity)} ({name})"
    return f"finding ({name})"


def installation(view: InstallationView) -> Told:
    """Tell an installation: who typed and read back, and what was found and left otherwise than on record."""
    done = view.installation
    request = done.installation
    people = (
        ("typed by", request.typed_by),
        ("read back by", request.read_back_by),
        ("operator", request.operator),
    )
    told = [f"recorded by {named(done.recorded_by)}", *(f"{role} {name}" for role, name in people if name)]
    told.append("as left is as approved" if done.as_approved else "AS LEFT IS NOT AS APPROVED")
    if done.as_left_recomputed:
        told.append(in_one_line(done.as_left_recomputed))
    told += [f"left: {_difference(each)}" for each in done.differences]
    told += [f"found: {_difference(each)}" for each in done.as_found_differences or ()]
    told.append(_SAVED[request.saved_to_engineering_database])
    told.append(f"history entry {view.entry.number}, digest {view.entry.digest}")
    return Told(name=f"Installed {utc(request.installed_at)}", value="; ".join(told))


def _difference(difference: Difference) -> str:
    recorded, found = _told(difference)
    name = setting_name(difference.setting)
    unit = UNITS.get(difference.unit, difference.unit)
    where = f"{difference.condition}: " if difference.condition else ""
    return f"{where}{name[:1].lower()}{name[1:]} {found} {unit}, on record {recorded}".replace(" ,", ",")


def _told(difference: Difference) -> tuple[str, str]:
    """What is on record and what was found; a term was brought to a common form, so is a computed value."""
    recorded, found = difference.recorded, difference.found
    converted = difference.setting in _CONVERTED
    if converted and isinstance(recorded, float) and isinstance(found, float):
        return apart(recorded, found)
    return _entered(recorded), _entered(found)


_CONVERTED = {
    "proportional",
    "integral",
    "derivative",
    "derivative_filter",
    "setpoint_proportional",
    "setpoint_derivative",
}


def _entered(value: float | str | None) -> str:
    if value is None:
        return controllers.NONE
    return value if isinstance(value, str) else as_entered(value)


_SAVED = {
    True: "saved to the engineering database",
    False: "NOT saved to the engineering database",
    None: "whether it was saved to the engineering database is not recorded",
}


def utc(moment: datetime) -> str:
    """A time on paper, to the second; the records' times are in UTC."""
    return moment.strftime("%Y-%m-%d %H:%M:%S UTC")


def named(person: Person) -> str:
    """A person by the full name and the name of the account, as they were at the time."""
    return f"{person.full_name} ({person.name})"
