"""Every published value is reproduced here, or it is said why not."""

from __future__ import annotations

import re
from pathlib import Path

from tests.published.reading import PUBLISHED

IDENTIFICATION = "a model found from a step or a table of data: the service takes models as they are given"
TUNING = "arithmetic of a tuning rule: the service recomputes gains and proposes none"

ELSEWHERE = {
    "A27": TUNING,
    "A28": TUNING,
    "A29": TUNING,
    "B27": "the file does not tell the loop",
    "E12": "the file does not tell the loop",
    "F04": "a filter of the second order, which no form of the interface has",
    "G02": "the variance of continuous white noise: the service tells noise by the scan",
    "I01": IDENTIFICATION,
    "I03": IDENTIFICATION,
    "I04": IDENTIFICATION,
    "I06": IDENTIFICATION,
    "I07": IDENTIFICATION,
}


def test_every_published_value_is_reproduced_or_it_is_said_why_not() -> None:
    texts = [
        path.read_text("utf-8") for path in Path(__file__).parent.glob("test_*.py") if path != Path(__file__)
    ]
    used = {name for text in texts for name in re.findall(r'"([A-I]\d\d)"', text)}
    assert used | set(ELSEWHERE) == set(PUBLISHED)
    assert not used & set(ELSEWHERE)
