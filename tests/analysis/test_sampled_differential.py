"""Loops of every kind, made up, against the slow references.

SAMPLED_LOOPS=2000 in the environment tries so many others than the normal run does, with every delay margin
found once more by lengthening the dead time step by step.
"""

from __future__ import annotations

import os

import pytest

from tests.analysis.sampled_truth import compared, made_up, seeds

MORE = int(os.environ.get("SAMPLED_LOOPS", "0"))
GROUPS = 20
NORMAL, FIRST_OF_MORE = 200, 100_000


@pytest.mark.parametrize("group", range(GROUPS))
def test_the_service_and_the_references_agree(group: int) -> None:
    every = seeds(MORE, FIRST_OF_MORE) if MORE else seeds(NORMAL)
    found = {
        seed: differences
        for seed in every
        if seed % GROUPS == group and (differences := compared(*made_up(seed), search=bool(MORE)))
    }
    assert found == {}
