"""How to hold the process while typing is said by its model; the rest is the same for every loop."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from service.documents.loops import LoopReference
from service.sheets import cautions
from tests.sheets.conftest import Printed
from tests.sheets.records_to_print import LAG, LEVEL, LOOP, RUNAWAY, TUNED, models, recomputed

PrintCase = Callable[[str], Printed]


def facts(*plants: object) -> list[object]:
    return [
        recomputed(LOOP, model, TUNED, 0, None)[0].answer.recomputation.facts
        for model in models(*plants)  # type: ignore[arg-type]
    ]


def while_typing(*plants: object) -> str:
    return cautions.cautions(facts(*plants), None)[1].sentences[0]  # type: ignore[arg-type]


def test_a_process_that_comes_to_rest_is_held_in_manual() -> None:
    assert while_typing(LAG) == cautions.HOLDS
    assert "in manual" in cautions.HOLDS


def test_a_process_that_integrates_does_not_hold_itself() -> None:
    assert while_typing(LEVEL) == cautions.INTEGRATES


def test_an_unstable_process_is_not_put_in_manual() -> None:
    assert while_typing(RUNAWAY) == cautions.UNSTABLE
    assert "Do not put it in manual" in cautions.UNSTABLE


def test_one_operating_point_that_does_not_hold_decides() -> None:
    assert while_typing(LAG, LEVEL) == cautions.INTEGRATES
    assert while_typing(LEVEL, RUNAWAY) == cautions.UNSTABLE


def test_without_a_model_nothing_is_promised() -> None:
    assert while_typing() == cautions.NOT_KNOWN


def test_the_holding_stands_on_the_first_page(print_case: PrintCase) -> None:
    held, drifts = print_case("ordinary").pages[0], print_case("level").pages[0]
    assert "DOES NOT HOLD ITSELF" not in held.replace("\n", " ")
    assert "DOES NOT HOLD ITSELF IN MANUAL: it integrates" in drifts.replace("\n", " ").replace("  ", " ")


def test_a_known_cascade_is_named() -> None:
    inner = LoopReference(site="Quarry Lane Works", tag="FIC-2105")
    assert "FIC-2105" in cautions.cautions([], inner)[0].sentences[-1]
    assert cautions.cautions([], None)[0].sentences[-1] == cautions.CASCADE


def test_every_usual_caution_is_there() -> None:
    said = " ".join(sentence for group in cautions.cautions([], None) for sentence in group.sentences)
    for words in (
        "state of this record is still the one printed",
        "tag, form, units and action on the controller's own display",
        "operator's agreement",
        "Note output, mode and set point",
        "SP = PV",
        "take the primary out of cascade first",
        "Change one thing",
        "first minutes",
        "go back",
        "engineering database",
        "safety instrumented functions",
        "sticking valve, limits, interaction",
        "failed sensor",
        "Site procedure, local codes and licensed practice govern",
    ):
        assert words in said


def test_facts_that_hold_nowhere_else_are_taken_as_drifting() -> None:
    plain = facts(LAG)[0]
    odd = replace(plain, plant_holds_in_manual=False)  # type: ignore[type-var]
    assert cautions.cautions([odd], None)[1].sentences[0] == cautions.DRIFTS  # type: ignore[list-item]
