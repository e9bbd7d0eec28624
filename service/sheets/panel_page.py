"""The first page: what the technician at the panel needs, and room to write down what was done."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from reportlab.lib.colors import HexColor, black
from reportlab.platypus import Flowable, KeepTogether, Spacer, Table

from service.sheets import styles
from service.sheets.cautions import Cautions
from service.sheets.content import SheetContent
from service.sheets.gain_tables import GainLine, GainTable
from service.sheets.qr import code_drawing
from service.sheets.styles import WIDTH_PT, fitting, named, said, table

PALE = HexColor(0xECECEC)
EMPHASISED = ("Form", "Action")
_NAME_PT, _VALUE_PT, _BEFORE_PT = 0.26 * WIDTH_PT, 0.42 * WIDTH_PT, 0.32 * WIDTH_PT
_CODE_PT = 66.0
_LONG_CODE_PT = 88.0
_LONG_CODE = 300
"""Characters from which on a code needs the larger side, to have modules of three tenths of a millimetre."""

LARGE_LINES = 5
NOT_ANALYSED = "recorded, not analysed"
RECORDED_AT_ONCE = 500
"""Characters of recorded settings that leave the cautions on the first page."""

_CELL = [
    ("VALIGN", (0, 0), (-1, -1), "MIDDLE"),
    ("LEFTPADDING", (0, 0), (-1, -1), 5),
    ("RIGHTPADDING", (0, 0), (-1, -1), 5),
]


def panel_page(content: SheetContent) -> list[Flowable]:
    """Tag, state, gains, what must agree with them, cautions, the box to fill in."""
    common = len({(each.settings, each.recorded) for each in content.tables}) == 1
    flowables = [_head(content), *_conditions(content)]
    for gain_set in content.tables:
        flowables += _gains(content, gain_set, with_settings=not common)
    if common:
        flowables += _settings(content.tables[0])
    flowables += [Spacer(0, 3), _cautions(content.cautions), Spacer(0, 3)]
    # a box to fill in would invite whoever holds a sheet that is not for entry
    if content.state.entry:
        flowables.append(_by_hand(content.tables))
    for gain_set in content.tables[: 1 if common else None]:
        flowables += _recorded_at_length(gain_set)
    return flowables


def _head(content: SheetContent) -> Flowable:
    """Whose gains these are and in which state; at the right the code that a telephone reads."""
    side = _LONG_CODE_PT if len(content.code) > _LONG_CODE else _CODE_PT
    width = WIDTH_PT - side - 10
    words = [
        said(f"Controller gains · {content.site} · record {content.record}", styles.SETTING),
        said(content.tag, fitting(content.tag, width, 25, 13, bold=True)),
        Spacer(0, 3),
        said(content.description, fitting(content.description, width, 11, 8.5, bold=False)),
        Spacer(0, 5),
        _banner(content, width),
    ]
    code = code_drawing(content.code, side)
    look = [*styles.BARE, ("VALIGN", (0, 0), (-1, -1), "TOP"), ("BOTTOMPADDING", (0, 0), (-1, -1), 3)]
    return table([[words, code]], [WIDTH_PT - side, side], look)


def _banner(content: SheetContent, width: float) -> Flowable:
    """Black where the gains may not be typed in, framed where they may."""
    entry = content.state.entry
    heading, sentence = (
        (styles.BANNER, styles.BANNER_SENTENCE) if entry else (styles.INVERSE_BANNER, styles.INVERSE_SENTENCE)
    )
    words = [said(content.state.heading, heading), said(content.state.sentence, sentence)]
    look = [("BOX", (0, 0), (-1, -1), 2.5, black), ("BOTTOMPADDING", (0, 0), (-1, -1), 6)]
    if not entry:
        look.append(("BACKGROUND", (0, 0), (-1, -1), black))
    return table([[words]], [width], look, hAlign="LEFT")


def _conditions(content: SheetContent) -> Iterator[Flowable]:
    yield Spacer(0, 4)
    if content.conditions:
        yield said(" ".join(content.conditions), styles.LOUD)
    yield said(content.summary, styles.SETTING if content.summary_good else styles.LOUD)
    yield Spacer(0, 5)


def _gains(content: SheetContent, gain_set: GainTable, *, with_settings: bool) -> Iterator[Flowable]:
    if gain_set.condition:
        yield Spacer(0, 4)
        yield said(gain_set.condition, styles.LOUD)
        yield Spacer(0, 2)
    yield _gains_table(content, gain_set)
    if with_settings:
        yield from _settings(gain_set)


def _settings(gain_set: GainTable) -> Iterator[Flowable]:
    yield Spacer(0, 4)
    yield _settings_table(gain_set.settings)
    if gain_set.recorded:
        told = _recorded(gain_set)
        if len(told) > RECORDED_AT_ONCE:
            told = f"{len(gain_set.recorded)} of them, listed after the cautions"
        yield Spacer(0, 2)
        yield named(f"Other settings ({NOT_ANALYSED})", told, styles.LABEL)


def _recorded_at_length(gain_set: GainTable) -> Iterator[Flowable]:
    """Recorded settings that would push the cautions off the first page."""
    told = _recorded(gain_set)
    if len(told) > RECORDED_AT_ONCE:
        yield Spacer(0, 4)
        heading = " ".join(part for part in ("Other settings", gain_set.condition) if part)
        yield named(f"{heading} ({NOT_ANALYSED})", told, styles.LABEL)


def _recorded(gain_set: GainTable) -> str:
    return "; ".join(f"{told.name} = {told.value} {told.unit}".strip() for told in gain_set.recorded)


def _gains_table(content: SheetContent, gain_set: GainTable) -> Table:
    """Large where they may be typed in; smaller where not, so that nobody types them from across the room.

    Several sets, or one that changes the form and shows both, keep to one page in smaller type too.
    """
    roomy = sum(len(each.gains) for each in content.tables) <= LARGE_LINES
    largest = 23 if content.state.entry and roomy else 15
    head = ["Setting", content.state.column, gain_set.before_heading]
    rows = [[said(words, styles.COLUMN) for words in head]]
    rows += [
        [
            said(line.name, fitting(line.name, _NAME_PT - 10, 11, 8, bold=True)),
            _number(line.value, line.unit, _VALUE_PT, largest, bold=True),
            [*_number(line.before, line.before_unit, _BEFORE_PT, 13, bold=False), *_change(line)],
        ]
        for line in gain_set.gains
    ]
    look = [
        *_CELL,
        ("GRID", (0, 0), (-1, -1), 0.7, black),
        ("BOX", (1, 0), (1, -1), 2.2, black),
        ("BACKGROUND", (0, 0), (-1, 0), PALE),
        ("TOPPADDING", (0, 1), (-1, -1), 2 if roomy else 0.5),
        ("BOTTOMPADDING", (0, 1), (-1, -1), 4 if roomy else 2.5),
    ]
    return table(rows, [_NAME_PT, _VALUE_PT, _BEFORE_PT], look, repeatRows=1)


def _number(value: str, unit: str, width: float, largest: float, *, bold: bool) -> list[Flowable]:
    """The number as it was entered on a line of its own, its unit in words below."""
    # spaces that the controller shows between digits do not collapse
    kept = value.replace(" ", "\N{NO-BREAK SPACE}")
    style = fitting(kept, width - 10, largest, 8, bold=bold)
    return [said(kept, style), *([said(unit, styles.UNIT if bold else styles.LABEL)] if unit else [])]


def _change(line: GainLine) -> list[Flowable]:
    return [said(line.change, styles.LABEL_STRONG)] if line.change else []


def _settings_table(settings: tuple[GainLine, ...]) -> Table:
    rows = []
    for line in settings:
        strong = line.name in EMPHASISED
        value = [said(line.value, styles.SETTING_STRONG if strong else styles.SETTING)]
        if line.before:
            value.append(named("BEFORE IT WAS", line.before, styles.SETTING))
        rows.append([said(line.name, styles.SETTING), value])
    look = [
        *_CELL,
        ("LINEBELOW", (0, 0), (-1, -1), 0.3, black),
        ("TOPPADDING", (0, 0), (-1, -1), 1.5),
        ("BOTTOMPADDING", (0, 0), (-1, -1), 2),
    ]
    return table(rows, [_NAME_PT, WIDTH_PT - _NAME_PT], look)


def _by_hand(gain_sets: Sequence[GainTable]) -> Flowable:
    """Room for a pen: as found and as left for each gain, and who did it."""
    boxes = [part for gain_set in gain_sets for part in _found_and_left(gain_set)]
    people = ("Typed by", "Read back by", "Operator agreed", "Date, time", "Saved to engineering database")
    signed = table(
        [[said(words, styles.LABEL) for words in people]],
        [WIDTH_PT / len(people)] * len(people),
        [*_CELL, ("VALIGN", (0, 0), (-1, -1), "TOP"), ("GRID", (0, 0), (-1, -1), 0.7, black)],
        rowHeights=[32],
    )
    return KeepTogether([*boxes, signed])


def _found_and_left(gain_set: GainTable) -> list[Flowable]:
    names = [line.name.split(" (")[0] for line in gain_set.gains]
    first = 0.15 * WIDTH_PT
    width = (WIDTH_PT - first) / (len(names) + 1)
    head = [said(words, fitting(words, width - 10, 8, 5, bold=True)) for words in (*names, "Mode, output")]
    empty = [""] * len(head)
    rows = [
        [said("Fill in by hand", styles.LABEL_STRONG), *head],
        [said("As found", styles.LABEL_STRONG), *empty],
        [said("As left", styles.LABEL_STRONG), *empty],
    ]
    look = [*_CELL, ("GRID", (0, 0), (-1, -1), 0.7, black)]
    box = table(rows, [first, *[width] * len(head)], look, rowHeights=[None, 22, 22])
    return [*([said(gain_set.condition, styles.LABEL_STRONG)] if gain_set.condition else []), box]


def _cautions(cautions: tuple[Cautions, ...]) -> Flowable:
    """Steps to tick off in two columns, the second one ending with what the sheet is not."""
    before, while_typing, after, limits = cautions
    left = [*_steps(before, "□"), *_steps(after, "□")]
    right = [*_steps(while_typing, "□"), *_steps(limits, "–")]
    look = [
        ("VALIGN", (0, 0), (-1, -1), "TOP"),
        ("TOPPADDING", (0, 0), (-1, -1), 0),
        ("LEFTPADDING", (0, 0), (0, 0), 0),
    ]
    return table([[left, right]], [WIDTH_PT / 2, WIDTH_PT / 2], look)


def _steps(group: Cautions, mark: str) -> list[Flowable]:
    sentences = [said(f"{mark} {sentence}", styles.STEP) for sentence in group.sentences]
    return [said(group.heading, styles.STEPS), *sentences]
