"""What was recomputed for one set of gains at one operating point, in the words and digits of the sheet."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from service.analysis.results import (
    Analysis,
    DominantRoot,
    EquivalentTerms,
    Margins,
    Recomputation,
    SecondOpinion,
    TermValue,
)
from service.documents.recomputations import RecomputationAnswer
from service.figures.responses import Response
from service.judgement import digits, wording
from service.judgement.claims import ClaimFinding
from service.judgement.criteria import CriterionFinding, quantity_name
from service.judgement.findings import Finding
from service.judgement.quantities import QUANTITIES, judged, not_stable_at_scan
from service.sheets import worst_cases
from service.sheets.controllers import Told

MARGINS = (
    "gain_margin",
    "gain_reduction_margin",
    "phase_margin_deg",
    "delay_margin_s",
    "max_sensitivity",
    "max_complementary_sensitivity",
    "disk_margin",
)
SETPOINT = (
    "rise_time_s",
    "settling_time_s",
    "overshoot_percent",
    "undershoot_percent",
    "peak_time_s",
    "final_value",
    "iae",
    "ise",
    "itae",
    "output_peak",
    "output_total_variation",
)
LOAD = (
    "peak_deviation",
    "load_peak_time_s",
    "recovery_time_s",
    "load_final_value",
    "load_iae",
    "integrated_error",
)
NOISE = (
    "output_gain_high_frequency",
    "max_control_sensitivity",
    "output_std_per_noise_std",
    "output_travel_per_scan",
    "derivative_share",
)
SHORT = {
    "max_complementary_sensitivity": "Complementary sensitivity",
    "iae": "IAE",
    "ise": "ISE",
    "itae": "ITAE",
    "load_iae": "IAE",
    "output_peak": "Output peak",
    "output_total_variation": "Output variation",
    "load_peak_time_s": "Time of the peak",
    "output_gain_high_frequency": "Gain at high frequency",
    "max_control_sensitivity": "Maximum control sensitivity",
    "output_std_per_noise_std": "Output deviation per noise",
    "output_travel_per_scan": "Output travel a scan per noise",
    "derivative_share": "Share of the derivative",
}
"""Names that fit into a column whose heading says the rest."""

SYMBOLS = {"met": "✓ met", "not_met": "✗ NOT MET", "not_assessed": "? not assessed"}
CLAIM_SYMBOLS = {"agrees": "= agrees", "differs": "≠ DIFFERS", "not_comparable": "? cannot be compared"}
CROSSOVERS_MAX = 4
"""The sheet lists so many of each; the record has them all."""
ON_THE_AXIS = 1e-12
"""A damping ratio below this is what float64 leaves of 0."""


@dataclass(frozen=True, kw_only=True, slots=True)
class LimitRow:
    """A margin with its limit; `limit` and `outcome` empty where nothing limits it."""

    name: str
    value: str
    limit: str
    outcome: str
    met: bool


@dataclass(frozen=True, kw_only=True, slots=True)
class ClaimRow:
    """What the tool claimed beside what was recomputed."""

    name: str
    claimed: str
    recomputed: str
    outcome: str


@dataclass(frozen=True, kw_only=True, slots=True)
class Sentence:
    """A finding: its weight in a word, and its sentence."""

    weight: str
    sentence: str


@dataclass(frozen=True, kw_only=True, slots=True)
class Assessment:
    """Everything the sheet says of one recomputation."""

    title: str
    verdict: str
    stable: bool
    routes: tuple[str, ...]
    limits: tuple[LimitRow, ...]
    no_margins: str
    setpoint: tuple[Told, ...]
    load: tuple[Told, ...]
    noise: tuple[Told, ...]
    further: tuple[Told, ...]
    findings: tuple[Sentence, ...]
    effects: tuple[str, ...]
    """What the change does to the loop; empty where it is not known."""
    claims: tuple[ClaimRow, ...]
    equivalents: tuple[Told, ...]
    responses: tuple[Response, ...]
    no_responses: str
    engine: str


def assessment(
    title: str,
    answer: RecomputationAnswer,
    responses: tuple[Response, ...],
    effects: tuple[str, ...] = (),
) -> Assessment:
    """Tell an answer, with the responses that were stored for it and what the change does."""
    recomputation = answer.recomputation
    analysis = judged(recomputation)
    stable = recomputation.verdict == "stable"
    return Assessment(
        title=title,
        verdict=wording.VERDICTS[recomputation.verdict],
        stable=stable,
        routes=tuple(_routes(recomputation)),
        limits=(
            *_limits(recomputation, analysis, answer.criteria),
            *_over_the_box(recomputation, answer.criteria),
        ),
        no_margins="" if analysis and analysis.margins else _NO_MARGINS,
        setpoint=_quantities(analysis, SETPOINT) if analysis and analysis.setpoint_step else (),
        load=_quantities(analysis, LOAD) if analysis and analysis.load_step else (),
        noise=_quantities(analysis, NOISE) if analysis and analysis.noise else (),
        further=tuple(_further(recomputation, analysis)),
        findings=_sentences(answer.own_findings),
        effects=effects,
        claims=tuple(_claim(claim) for claim in answer.claims),
        equivalents=tuple(_equivalents(recomputation)),
        responses=responses,
        no_responses="" if responses else _NO_RESPONSES,
        engine=_engine(answer),
    )


_NO_MARGINS = "There are no margins: they are stated only for a loop that is shown to be stable."
_NO_RESPONSES = "No response is drawn: none was computed for these gains."


def _routes(recomputation: Recomputation) -> Iterator[str]:
    """One sentence for each method, and why where it has no answer."""
    for name, analysis in (("continuous", recomputation.continuous), ("sampled", recomputation.sampled)):
        if analysis is None:
            continue
        for route in analysis.stability.routes:
            told = f"{route.method}, {name}: {route.verdict}"
            if route.unstable_roots is not None:
                told += f", unstable roots: {route.unstable_roots}"
            yield f"{told} ({route.reason})" if route.reason else told
        reason = analysis.stability.reason
        if reason and reason not in [route.reason for route in analysis.stability.routes]:
            yield reason
    for part in recomputation.not_computed:
        yield f"{part.replace('_', ' ')}: asked for and not computed"


def _limits(
    recomputation: Recomputation, analysis: Analysis | None, criteria: tuple[CriterionFinding, ...]
) -> Iterator[LimitRow]:
    """Every limit with its value; then the margins that nothing limits."""
    limited, behind = set(), worst_cases.without_scan(recomputation)
    for finding in criteria:
        name = quantity_name(finding.criterion)
        limited.add(name)
        over_the_box = name in wording.WORST_CASE_LABELS and finding.value is not None
        bound = "≥" if finding.criterion.endswith("_min") else "≤"
        yield LimitRow(
            name=_capital(wording.quantity_label(name)),
            value=_minus(_beside(name, finding)) + (behind if over_the_box else ""),
            limit=f"{bound} {wording.with_unit(name, finding.limit, _limit(finding.limit))}",
            outcome=SYMBOLS[finding.outcome],
            met=finding.outcome == "met",
        )
    if analysis is None or analysis.margins is None:
        return
    for name in MARGINS:
        if name not in limited:
            told = _told(analysis, name)
            yield LimitRow(name=told.name, value=told.value, limit="", outcome="", met=True)


def _over_the_box(recomputation: Recomputation, criteria: tuple[CriterionFinding, ...]) -> Iterator[LimitRow]:
    """Whether every model of the stated uncertainty is stable, and its worst sensitivity if nothing limits
    it.
    """
    worst = recomputation.worst_case
    if worst is None:
        return
    yield LimitRow(
        name="Stable for every model within the uncertainty",
        value=worst_cases.stable_throughout(recomputation, worst),
        limit="",
        outcome="",
        met=worst.stable_for_all is True and not not_stable_at_scan(recomputation),
    )
    name = "worst_case_max_sensitivity"
    limited = {quantity_name(finding.criterion) for finding in criteria}
    if worst.max_sensitivity and name not in limited and not not_stable_at_scan(recomputation):
        at_most = digits.three_digits(worst.max_sensitivity.at_most)
        label = _capital(wording.quantity_label(name))
        value = f"at most {at_most}{worst_cases.without_scan(recomputation)}"
        yield LimitRow(name=label, value=value, limit="", outcome="", met=True)


def _beside(name: str, finding: CriterionFinding) -> str:
    return wording.with_unit(name, finding.value, digits.beside_limit(finding.value, finding.limit))


def _limit(limit: float) -> str:
    """A limit as it was set; one that the service computed itself loses the noise of its last digits."""
    return digits.as_entered(float(f"{limit:.10g}"))


def _quantities(analysis: Analysis, names: tuple[str, ...]) -> tuple[Told, ...]:
    known = [(name, QUANTITIES[name].of(analysis)) for name in names]
    # figures of a scan have no meaning without one; they are left out, not printed as undefined
    return tuple(_told(analysis, name) for name, value in known if value is not None or name not in NOISE)


def _told(analysis: Analysis, name: str) -> Told:
    label = SHORT.get(name) or wording.quantity_label(name)
    for step in (" after a set-point step", " after a load step"):
        label = label.removesuffix(step)
    return Told(name=_capital(label), value=_minus(wording.told(name, QUANTITIES[name].of(analysis))))


def _further(recomputation: Recomputation, analysis: Analysis | None) -> Iterator[Told]:
    yield Told(name="Judged on the analysis", value=recomputation.judged_on)
    yield Told(name="Loop type", value=str(recomputation.loop_type))
    if analysis:
        yield from _stability(analysis)
    if analysis and analysis.margins:
        yield from _crossovers(analysis.margins)
    if recomputation.worst_case:
        yield from worst_cases.figures(recomputation, recomputation.worst_case)
    if recomputation.second_opinion:
        yield _second_opinion(recomputation.second_opinion)


def _stability(analysis: Analysis) -> Iterator[Told]:
    for name in ("decay_rate_per_s", "spectral_radius"):
        if QUANTITIES[name].of(analysis) is not None:
            yield _told(analysis, name)
    roots = [dominant_root(each) for each in analysis.stability.dominant_roots]
    if roots:
        yield Told(name="Dominant roots", value="; ".join(roots))


def dominant_root(dominant: DominantRoot) -> str:
    """A root with its damping; what float64 leaves of a real part of 0 is told as 0."""
    root, damping = dominant.root, dominant.damping_ratio
    if isinstance(root, tuple) and abs(damping) < ON_THE_AXIS:
        root, damping = (0.0, root[1]), 0.0
    return f"{_root(root)} rad/s (damping {_minus(digits.three_digits(damping))})"


def _crossovers(margins: Margins) -> Iterator[Told]:
    gain = [
        _minus(f"{digits.three_digits(each.rad_s)} rad/s ({digits.three_digits(each.phase_margin_deg)}°)")
        for each in margins.gain_crossovers
    ]
    phase = [
        f"{digits.three_digits(each.rad_s)} rad/s (factor {digits.three_digits(each.gain_factor)})"
        for each in margins.phase_crossovers
    ]
    for name, found in (("Gain crossovers", gain), ("Phase crossovers", phase)):
        more = f"; {len(found) - CROSSOVERS_MAX} more in the record" if len(found) > CROSSOVERS_MAX else ""
        yield Told(name=name, value=("; ".join(found[:CROSSOVERS_MAX]) or "none") + more)


def _second_opinion(opinion: SecondOpinion) -> Told:
    approximation = f" ({opinion.approximation})" if opinion.approximation else ""
    outcome = {"agrees": "agrees ", "differs": "", "not_available": "has none: "}[opinion.outcome]
    told = f"{opinion.library} {opinion.version}{approximation} {outcome}{opinion.note}"
    return Told(name="Second opinion, never a verdict", value=told)


def _sentences(findings: tuple[Finding, ...]) -> tuple[Sentence, ...]:
    return tuple(Sentence(weight=wording.WEIGHTS[each.weight], sentence=each.sentence) for each in findings)


def _claim(claim: ClaimFinding) -> ClaimRow:
    claimed = claim.claimed
    told = digits.WITHOUT_LIMIT if isinstance(claimed, str) else digits.as_entered(claimed)
    return ClaimRow(
        name=_capital(wording.quantity_label(claim.name)),
        claimed=_minus(wording.with_unit(claim.name, claimed, told)),
        recomputed=_minus(wording.told(claim.name, claim.recomputed)),
        outcome=f"{CLAIM_SYMBOLS[claim.outcome]} (tolerance {claim.tolerance})",
    )


def _equivalents(recomputation: Recomputation) -> Iterator[Told]:
    for each in recomputation.equivalent_gains:
        told = _terms(each.controller) if each.controller else "none"
        name = _capital(wording.FORM_NAMES[each.form])
        yield Told(name=name, value=f"{told} – {each.reason}" if each.reason else told)


def _terms(terms: EquivalentTerms) -> str:
    named = (
        ("proportional", terms.proportional),
        ("integral", terms.integral),
        ("derivative", terms.derivative),
        ("derivative filter", terms.derivative_filter),
    )
    parts = [f"{name} {_units(values)}" for name, values in named if values]
    if terms.gain is not None:
        parts.insert(0, f"gain k {digits.three_digits(terms.gain)}")
        parts.insert(1, "zeros " + ", ".join(_root(zero) for zero in terms.zeros_rad_s) + " rad/s")
    return "; ".join(parts)


def _units(values: tuple[TermValue, ...]) -> str:
    return " = ".join(f"{digits.three_digits(each.value)} {wording.UNITS[each.unit]}" for each in values)


def _root(root: float | tuple[float, float]) -> str:
    if not isinstance(root, tuple):
        return _minus(digits.three_digits(root))
    real, imaginary = root
    sign = "-" if imaginary < 0 else "+"
    return _minus(f"{digits.three_digits(real)} {sign} {digits.three_digits(abs(imaginary))}j")


def _minus(number: str) -> str:
    """A number with a true minus sign, which a smudge does not hide as easily as a hyphen."""
    return number.replace("-", "−")


def _engine(answer: RecomputationAnswer) -> str:
    engine = answer.engine
    return (
        f"Recomputed by this service, version {engine.service} "
        f"(Python {engine.python}, NumPy {engine.numpy}, SciPy {engine.scipy})."
    )


def _capital(label: str) -> str:
    return label[:1].upper() + label[1:]
