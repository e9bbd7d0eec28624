"""Everything that the page of a submission shows: the records' views, told in the sheet's words."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import datetime

from markupsafe import Markup
from reportlab.graphics.shapes import Drawing

from service.figures import descriptions, frequency
from service.figures.frequency import frequency_drawing
from service.figures.responses import Response, response_drawing
from service.figures.svg import to_svg
from service.issuing import sheets
from service.pages.changes import ChangeTable, change_table
from service.pages.standing import Standing, standing
from service.pages.visits import Visit
from service.pages.words import setting, told_value
from service.records import queries
from service.records.content import Difference
from service.records.views import Comparison, CurvesView, SubmissionView
from service.sheets.assessments import Assessment
from service.sheets.content import SheetContent

NARROW = {"width_pt": 300, "height_pt": 420, "text_pt": 12}
"""A drawing for a screen of 320 px, in points."""


@dataclass(frozen=True, slots=True)
class Figure:
    """A drawing with its words and its numbers. `rows` empty: the words say it all."""

    title: str
    svg: Markup
    narrow_svg: Markup
    """The same for a narrow screen, where the other one's letters would be too small."""
    description: str
    rows: tuple[tuple[str, ...], ...]


@dataclass(frozen=True, slots=True)
class Told:
    """One recomputation in words and figures."""

    assessment: Assessment
    figures: tuple[Figure, ...]


@dataclass(frozen=True, slots=True)
class Happening:
    """One line of what has happened to a submission so far."""

    time: datetime
    what: str
    who: str
    text: str
    deviations: tuple[tuple[str, str], ...]
    entry: int


@dataclass(frozen=True, slots=True)
class Dossier:
    """A submission as a page shows it to one person."""

    view: SubmissionView
    sheet: SheetContent
    changes: tuple[ChangeTable, ...]
    told: tuple[Told, ...]
    history: tuple[Happening, ...]
    standing: Standing


def dossier(visit: Visit, submission_id: str) -> Dossier:
    """Read a submission and tell it. Raises NotFound."""
    view = queries.submission(visit.session, visit.actor, submission_id, visit.now)
    curves = queries.curves(visit.session, visit.actor, submission_id)
    sheet = sheets.content(visit.session, visit.actor, view)
    return Dossier(
        view=view,
        sheet=sheet,
        changes=tuple(_changes(view, sheet)),
        told=tuple(_told(sheet, curves)),
        history=tuple(sorted(_happenings(view), key=lambda happening: happening.entry)),
        standing=standing(view, visit.actor),
    )


def _changes(view: SubmissionView, sheet: SheetContent) -> Iterator[ChangeTable]:
    comparisons: Sequence[Comparison | None] = view.comparisons or [None] * len(sheet.tables)
    for table, comparison in zip(sheet.tables, comparisons, strict=True):
        yield change_table(table, comparison)


def _told(sheet: SheetContent, curves: Sequence[CurvesView]) -> Iterator[Told]:
    for index, assessment in enumerate(sheet.assessments):
        figures = [_response(response) for response in assessment.responses]
        if index < len(curves):
            figures += _frequency(curves[index])
        yield Told(assessment, tuple(figures))


def _response(response: Response) -> Figure:
    words = descriptions.describe(response)
    return Figure(
        title=response.title,
        svg=_svg(response_drawing(response), response.title, words),
        narrow_svg=_svg(response_drawing(response, **NARROW), response.title, words),
        description=words,
        rows=descriptions.table(response),
    )


def _frequency(view: CurvesView) -> Iterator[Figure]:
    curve = view.curves.frequency
    if curve is not None:
        words, title = descriptions.describe(curve), frequency.TITLE
        yield Figure(
            title=title,
            svg=_svg(frequency_drawing(curve), title, words),
            narrow_svg=_svg(frequency_drawing(curve, **NARROW), title, words),
            description=words,
            rows=(),
        )


def _svg(drawing: Drawing, title: str, words: str) -> Markup:
    return Markup(to_svg(drawing, title=title, description=words))  # noqa: S704  drawn by us, texts escaped


def _happenings(view: SubmissionView) -> Iterator[Happening]:
    by = view.content.submitted_by
    yield Happening(view.content.submitted_at, "Submitted", by.full_name, "", (), view.entry.number)
    for each in view.decisions:
        made = each.decision
        yield Happening(
            made.signed_at,
            made.meaning,
            made.signed_by.full_name,
            made.reason,
            tuple((deviation.criterion, deviation.reason) for deviation in made.deviation),
            each.entry.number,
        )
    for done in view.installations:
        yield Happening(
            done.installation.installation.installed_at,
            "Installed as approved" if done.installation.as_approved else "Installed otherwise than approved",
            done.installation.recorded_by.full_name,
            "; ".join(_difference(each) for each in done.installation.differences),
            (),
            done.entry.number,
        )


def _difference(difference: Difference) -> str:
    approved, left = told_value(difference.recorded), told_value(difference.found)
    return f"{setting(difference.setting)}: approved {approved}, left {left}"
