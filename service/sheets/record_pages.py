"""The further pages: what was recomputed, who asked for it, who signed, and by what it can be checked."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

from reportlab.lib.colors import black
from reportlab.platypus import Flowable, Spacer

from service.figures.responses import response_drawing
from service.sheets import styles, texts
from service.sheets.assessments import Assessment, ClaimRow, LimitRow
from service.sheets.content import Model, SheetContent
from service.sheets.controllers import Told
from service.sheets.panel_page import PALE
from service.sheets.signatures import Signature
from service.sheets.styles import WIDTH_PT, joined, named, said, table

_LOOK = [
    ("BACKGROUND", (0, 0), (-1, 0), PALE),
    ("SPAN", (0, 0), (2, 0)),
    ("VALIGN", (0, 0), (-1, -1), "TOP"),
    ("LINEBELOW", (0, 0), (-1, -1), 0.3, black),
    ("LEFTPADDING", (0, 0), (-1, -1), 3),
    ("RIGHTPADDING", (0, 0), (-1, -1), 3),
    ("TOPPADDING", (0, 0), (-1, -1), 1),
    ("BOTTOMPADDING", (0, 0), (-1, -1), 1.5),
]
_SHARES = (0.19, 0.115, 0.16, 0.13, 0.08, 0.225, 0.1)
"""Widths of the columns of the results: a margin, its value and its limit; then twice a name and a value."""
_SHARES_ALONE = (0.25, 0.15, 0.25)
"""The same where there are limits only, because the loop was not shown to be stable."""


def record_pages(content: SheetContent) -> list[Flowable]:
    """Everything after the first page, in the order in which a reviewer asks for it."""
    return [
        *_outcome(content),
        *(flowable for each in content.assessments for flowable in _assessment(each)),
        *_models(content.models),
        said("Loop and request", styles.HEADING),
        _joined(content.loop),
        _joined(content.request),
        *_told(content.reasons),
        *_signatures(content),
        *_identity(content),
    ]


def _outcome(content: SheetContent) -> Iterator[Flowable]:
    if not content.summary_good:
        yield said(content.summary, styles.LOUD)
    yield said(content.criteria_source)
    for sentence in content.worst:
        yield said(sentence)
    for sentence in content.hard_limits:
        yield named("No deviation makes this good", sentence, styles.LOUD)


def _assessment(told: Assessment) -> Iterator[Flowable]:
    yield said(told.title, styles.HEADING)
    yield said(told.verdict, styles.STRONG if told.stable else styles.LOUD)
    if told.no_margins:
        yield said(told.no_margins)
    yield Spacer(0, 2)
    yield from _results(told)
    yield from _responses(told)
    yield from _findings(told)
    if told.claims:
        yield said("Claims of the tool, compared; they enter no verdict", styles.SUBHEADING)
        yield _joined([Told(name=each.name, value=_claim(each)) for each in told.claims])
    if told.equivalents:
        yield said("The same gains in other forms (computed: not for typing)", styles.SUBHEADING)
        yield from _told(told.equivalents)
    yield said("How the verdict was reached", styles.SUBHEADING)
    routes = "; ".join(told.routes)
    yield said(f"{routes[:1].upper()}{routes[1:]}. {told.engine}")
    yield _joined(told.further)


def _results(told: Assessment) -> Iterator[Flowable]:
    """Margins with their limits, the set-point step, the load step and noise: three columns side by side."""
    limits = _limits(told.limits)
    setpoint = _quantities("Set-point step of 1 %", told.setpoint)
    others = [*_quantities("Load step of 1 %", told.load), *_quantities("Measurement noise", told.noise)]
    length = max(len(limits), len(setpoint), len(others))
    if not length:
        return
    if not setpoint and not others:
        yield table(limits, [share * WIDTH_PT for share in _SHARES_ALONE], _LOOK, hAlign="LEFT")
        return
    columns = [
        column + [[""] * width] * (length - len(column))
        for column, width in ((limits, 3), (setpoint, 2), (others, 2))
    ]
    rows = [[cell for part in parts for cell in part] for parts in zip(*columns, strict=True)]
    parted = [("LINEBEFORE", (column, 0), (column, -1), 0.7, black) for column in (3, 5)]
    heads = [("SPAN", (first, 0), (last, 0)) for first, last in ((3, 4), (5, 6))]
    yield table(rows, [share * WIDTH_PT for share in _SHARES], [*_LOOK, *parted, *heads])


def _limits(rows: Sequence[LimitRow]) -> list[list[Any]]:
    if not rows:
        return []
    head = [said(words, styles.STRONG) for words in ("Margins and limits", "", "")]
    return [
        head,
        *(
            [
                said(row.name),
                said(row.value, styles.STRONG),
                said(f"{row.limit} {row.outcome}", styles.BODY if row.met else styles.STRONG),
            ]
            for row in rows
        ),
    ]


def _quantities(heading: str, quantities: Sequence[Told]) -> list[list[Any]]:
    if not quantities:
        return []
    return [[said(heading, styles.STRONG), ""], *([said(each.name), said(each.value)] for each in quantities)]


def _responses(told: Assessment) -> Iterator[Flowable]:
    if told.no_responses:
        yield said(told.no_responses)
        return
    yield Spacer(0, 5)
    width = int(WIDTH_PT / 2) - 6
    drawings = [
        response_drawing(response, width_pt=width, height_pt=112, text_pt=6.5) for response in told.responses
    ]
    yield table([drawings], [WIDTH_PT / 2] * len(drawings), styles.BARE, hAlign="LEFT")


def _findings(told: Assessment) -> Iterator[Flowable]:
    yield said("Findings", styles.SUBHEADING)
    if not told.findings:
        yield said("None.")
    for finding in told.findings:
        yield named(finding.weight.upper(), finding.sentence)


def _claim(claim: ClaimRow) -> str:
    return f"claimed {claim.claimed}, recomputed {claim.recomputed}, {claim.outcome}"


def _models(models: Sequence[Model]) -> Iterator[Flowable]:
    for model in models:
        yield said(model.title, styles.SUBHEADING)
        yield _joined(model.parameters)
        yield named("What it rests on", model.evidence)


def _signatures(content: SheetContent) -> Iterator[Flowable]:
    yield said("Signatures", styles.HEADING)
    if content.no_signature:
        yield said(content.no_signature)
    for signature in content.signatures:
        yield from _signature(signature)
    if content.installations:
        yield said("Installations", styles.HEADING)
        yield from _told(content.installations)


def _signature(signature: Signature) -> Iterator[Flowable]:
    yield said(signature.heading, styles.SUBHEADING)
    yield joined([("Meaning", signature.meaning), ("Reason", signature.reason)])
    if signature.on_earlier_results:
        yield said(signature.on_earlier_results, styles.STRONG)
    for deviation in signature.deviations:
        yield named(f"Deviation, {deviation.name}", deviation.value)
    yield said(signature.entry, styles.SMALL)


def _identity(content: SheetContent) -> Iterator[Flowable]:
    yield said("Version and digests", styles.HEADING)
    yield _joined([*content.version, _ABOUT_CODE])
    for told in content.digests:
        yield named(told.name, told.value, styles.SMALL)
    for sentence in content.checkpoint:
        yield said(sentence, styles.SMALL)
    if any(texts.is_told_in_part(text) for text in texts.strings_in(content)):
        yield said(texts.CODE_POINTS, styles.SMALL)


_ABOUT_CODE = Told(name="Code on the first page", value="digests; last line: checkpoint, for history verify")


def _joined(items: Sequence[Told]) -> Flowable:
    return joined((told.name, f"{told.value} {told.unit}".strip()) for told in items)


def _told(items: Sequence[Told]) -> Iterator[Flowable]:
    for told in items:
        yield named(told.name, f"{told.value} {told.unit}".strip())
