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
from service.pages import left_otherwise
from service.pages.changes import ChangeLine, ChangeTable, change_table, installed_otherwise
from service.pages.left_otherwise import LeftOtherwise
from service.pages.standing import Standing, standing
from service.pages.visits import Visit
from service.records import queries
from service.records.content import InstallationContent
from service.records.views import Comparison, CurvesView, SubmissionView
from service.sheets.as_left import told_as_left
from service.sheets.assessments import Assessment
from service.sheets.content import SheetContent
from service.sheets.signatures import DECISIONS, EARLIER

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


@dataclass(frozen=True, kw_only=True, slots=True)
class Happening:
    """One line of what has happened to a submission so far."""

    time: datetime
    what: str
    who: str
    entry: int
    meaning: str = ""
    """What a signature means; empty where nothing was signed."""
    lines: tuple[str, ...] = ()
    deviations: tuple[tuple[str, str], ...] = ()


@dataclass(frozen=True, slots=True)
class Dossier:
    """A submission as a page shows it to one person."""

    view: SubmissionView
    sheet: SheetContent
    changes: tuple[ChangeTable, ...]
    told: tuple[Told, ...]
    history: tuple[Happening, ...]
    standing: Standing
    left_otherwise: LeftOtherwise | None
    """Gains of this loop, of whichever submission, that were left otherwise and not put right since."""


def dossier(visit: Visit, submission_id: str, *, with_figures: bool) -> Dossier:
    """Read a submission and tell it. Raises NotFound. Drawing the figures takes longer than all the rest."""
    view = queries.submission(visit.session, visit.actor, submission_id, visit.now)
    curves = queries.curves(visit.session, visit.actor, submission_id)
    sheet = sheets.content(visit.session, visit.actor, view)
    return Dossier(
        view=view,
        sheet=sheet,
        changes=tuple(_changes(view, sheet)),
        told=tuple(_told(sheet, curves if with_figures else None)),
        history=tuple(sorted(_happenings(view), key=lambda happening: happening.entry)),
        standing=standing(view, visit.actor),
        left_otherwise=left_otherwise.of_loop(visit, view.content.loop_id),
    )


def _changes(view: SubmissionView, sheet: SheetContent) -> Iterator[ChangeTable]:
    comparisons: Sequence[Comparison | None] = view.comparisons or [None] * len(sheet.tables)
    for table, comparison in zip(sheet.tables, comparisons, strict=True):
        yield change_table(table, comparison)


def _told(sheet: SheetContent, curves: Sequence[CurvesView] | None) -> Iterator[Told]:
    """Each recomputation; `curves` stand in the same order, None: nothing is drawn."""
    for index, assessment in enumerate(sheet.assessments):
        yield Told(
            assessment, () if curves is None else tuple(_figures(assessment, curves[index : index + 1]))
        )


def _figures(assessment: Assessment, curves: Sequence[CurvesView]) -> Iterator[Figure]:
    for response in assessment.responses:
        yield _response(response)
    for view in curves:
        yield from _frequency(view, stable=assessment.stable)


def _response(response: Response) -> Figure:
    words = descriptions.describe(response)
    return Figure(
        title=response.title,
        svg=_svg(response_drawing(response), response.title, words),
        narrow_svg=_svg(response_drawing(response, **NARROW), response.title, words),
        description=words,
        rows=descriptions.table(response),
    )


def _frequency(view: CurvesView, *, stable: bool) -> Iterator[Figure]:
    curve = view.curves.frequency
    if curve is not None:
        words = descriptions.describe_frequency(curve, stable=stable)
        title = frequency.title(stable=stable)
        yield Figure(
            title=title,
            svg=_svg(frequency_drawing(curve, stable=stable), title, words),
            narrow_svg=_svg(frequency_drawing(curve, stable=stable, **NARROW), title, words),
            description=words,
            rows=(),
        )


def _svg(drawing: Drawing, title: str, words: str) -> Markup:
    return Markup(to_svg(drawing, title=title, description=words))  # noqa: S704  drawn by us, texts escaped


def _happenings(view: SubmissionView) -> Iterator[Happening]:
    by = view.content.submitted_by
    yield Happening(
        time=view.content.submitted_at, what="Submitted", who=by.full_name, entry=view.entry.number
    )
    for each in view.decisions:
        made = each.decision
        yield Happening(
            time=made.signed_at,
            what=DECISIONS[made.decision],
            who=made.signed_by.full_name,
            meaning=made.meaning,
            lines=(made.reason, *((EARLIER,) if made.content_digest != view.content_digest else ())),
            deviations=tuple((deviation.criterion, deviation.reason) for deviation in made.deviation),
            entry=each.entry.number,
        )
    for done in view.installations:
        made_known = done.installation
        yield Happening(
            time=made_known.installation.installed_at,
            what="Installed as approved" if made_known.as_approved else "Installed otherwise than approved",
            who=made_known.recorded_by.full_name,
            lines=tuple(_of_installation(view, made_known)),
            entry=done.entry.number,
        )


def _of_installation(view: SubmissionView, done: InstallationContent) -> Iterator[str]:
    yield from map(_difference, installed_otherwise(view.content, done))
    if not done.as_approved:
        told = told_as_left(done.as_left_recomputed)
        yield f"{told.sentence} {told.summary}".strip()


def _difference(line: ChangeLine) -> str:
    approved = f"{line.before} {line.before_unit}".strip()
    return f"{line.name}: approved {approved}, left {f'{line.after} {line.after_unit}'.strip()}"
