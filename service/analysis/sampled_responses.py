"""What the loop does from scan to scan and in between: step responses, and the answer to noise at one scan.

The states go from scan to scan by one matrix, many scans at a time. Between two scans the plant answers a
held output, exactly, in polynomial pieces that part where the output held before gives way to the next.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from service.analysis import chebyshev
from service.analysis.errors import WorkBoundError
from service.analysis.exponentials import exponentials_less_one
from service.analysis.loop import ClosedLoopParts, Reals
from service.analysis.realisation import StateSpace, realise
from service.analysis.responses import Fading, Responses, by_size, divided, fastest, final_values
from service.analysis.sampled_states import (
    INPUTS,
    NEW,
    NOISE_INPUT,
    OLD,
    SETPOINT_INPUT,
    SPARED_NOISE_INPUT,
    SampledStates,
)
from service.analysis.scan import SampledPlant, Scanned, augmented

AT_REST = 23.0
"""A loop is at rest when its slowest root has died away by so many nepers (1e-10)."""

MAX_SCANS = 100_000
"""Work bound: a response of more scans than this is called too slow."""

MAX_STATES = 1_000_000
"""Work bound: states of one answer at all of its scans together."""

MAX_VALUES = 400_000
"""Work bound: values of one response at the nodes of all its pieces."""

MAX_EXPONENTIALS = 500_000
"""Work bound: entries of the matrices that lead from a scan to the nodes of its pieces."""

SCANS_AT_ONCE = 256
LONGEST_LINE = 24
"""With more past outputs under way than this the line is not made part of the state."""

SETPOINT_STEP, LOAD_STEP, NOISE_PULSE, SPARED_PULSE = range(4)
"""The four answers that are computed side by side; the last is that to noise which the derivative does not
see.
"""

NODES_FOR = ((0.02, 4), (0.2, 6), (1.0, 9), (math.inf, 16))
"""Largest abs λ·length of a piece for a mode λ of the plant, and the nodes that meet e^(λt) to some 1e-11."""


@dataclass(frozen=True, eq=False)
class Scans:
    """The four answers at `count` scans: `states` (count, n, 2) of the plant in both step responses;
    w[n−k−1] `old`, w[n−k] `new` and the controller's `output`, (count, 4) each. `complete`: at the end all
    is at rest.
    """

    states: Reals
    old: Reals
    new: Reals
    output: Reals
    complete: bool


def scans(states: SampledStates, log_radius: float) -> Scans:
    """The four answers until all is at rest; `log_radius` is ln of the loop's spectral radius, below 0."""
    # what lies at z = 0 is gone only after as many scans as there are states, and a last move follows
    wanted = AT_REST / -log_radius + states.order + states.plant.held_scans + 2.0
    most = min(MAX_SCANS, MAX_STATES // (len(states.plant.c) + 1))
    count = int(min(math.ceil(min(wanted, 1e9)), most))
    march = _by_states if states.plant.held_scans <= LONGEST_LINE else _by_inputs
    plant_states, output = march(states, count)
    held = output + _load()
    k, line = states.plant.whole_scans, states.plant.held_scans
    return Scans(
        states=plant_states[:count],
        old=_later(held, k + 1)[:count] if line > k else np.zeros((count, 4)),
        new=_later(held, k)[:count],
        output=output[:count],
        complete=wanted <= most,
    )


def between_scans(scanned: Scanned, plant: SampledPlant, found: Scans, space: StateSpace | None) -> Responses:
    """Set-point and load response in pieces, in the loop's own unit of time; `space`, if there is one, is the
    continuous loop's.
    """
    h = scanned.interval
    modes = by_size(np.array(scanned.parts.plant.poles_rad_s, complex))
    before = divided(plant.fraction * h, modes) if plant.fraction > 0 else []
    lengths = np.array(before + divided((1.0 - plant.fraction) * h, modes))
    nodes = _nodes(modes, float(lengths.max()))
    count = min(len(found.output), max(1, MAX_VALUES // (len(lengths) * nodes)))
    rows = _rows(scanned, plant, lengths, len(before), nodes)
    acting = found.old[:count, None, :2], found.new[:count, None, :2]
    known = np.concatenate([found.states[:count], *acting], axis=1)
    pv = (np.ascontiguousarray(np.moveaxis(known, 2, 0)) @ rows.T).reshape(2, count * len(lengths), nodes)
    starts = np.arange(count)[:, None] * h + np.concatenate([[0.0], np.cumsum(lengths)[:-1]])
    final_pv, final_output = final_values(_without_derivative(scanned.parts) if space is None else space)
    return Responses(
        start=starts.ravel(),
        length=np.tile(lengths, count),
        pv=pv,
        output=np.repeat(found.output[:count, :2].T, len(lengths), axis=1)[:, :, None],
        final_pv=final_pv,
        final_output=final_output,
        complete=found.complete and count == len(found.output),
    )


def _without_derivative(parts: ClosedLoopParts) -> StateSpace:
    """The continuous loop without the derivative, which plays no part in where it comes to rest."""
    feedback, setpoint = (replace(terms, kd_s=0.0, tf_s=0.0) for terms in (parts.feedback, parts.setpoint))
    space = realise(replace(parts, feedback=feedback, setpoint=setpoint))
    if space is None:
        raise AssertionError("a loop without derivative is realisable")
    return space


def _load() -> Reals:
    load = np.zeros(4)
    load[LOAD_STEP] = 1.0
    return load


def _later(values: Reals, scans_later: int) -> Reals:
    """The sequence so many scans later, zeros before it."""
    return np.concatenate([np.zeros((min(scans_later, len(values)), 4)), values])[: len(values)]


def _by_states(states: SampledStates, count: int) -> tuple[Reals, Reals]:
    """Plant states (≥ count, n, 2) and output (≥ count, 4) by powers of the closed loop's matrix."""
    a, b, u = states.closed()
    n, size = len(states.plant.c), len(a)
    # the constant inputs of the two steps are states, so that one matrix does it all
    matrix, row = np.zeros((size + 2, size + 2)), np.zeros(size + 2)
    matrix[:size, :size], matrix[:size, size], matrix[:size, size + 1] = a, b[:, 0], b[:, 3]
    matrix[size:, size:] = np.eye(2)
    row[:size], row[size], row[size + 1] = u[:size], u[size], u[size + 3]
    wanted = np.concatenate([np.eye(n, size + 2), row[None, :]])
    block = min(SCANS_AT_ONCE, 1 << max(0, (count - 1).bit_length()))
    rows, power = wanted[None], matrix
    while len(rows) < block:
        rows = np.concatenate([rows, rows @ power])
        power = power @ power
    flat = rows.reshape(-1, size + 2)
    # a pulse of noise at the first scan: what it leaves behind starts a scan later
    start = np.zeros((size + 2, 4))
    start[size, SETPOINT_STEP] = start[size + 1, LOAD_STEP] = 1.0
    first = np.zeros((1, n + 1, 4))
    first[0, n] = row @ start
    first[0, n, NOISE_PULSE], first[0, n, SPARED_PULSE] = u[size + 1], u[size + 2]
    start = matrix @ start
    start[:size, NOISE_PULSE], start[:size, SPARED_PULSE] = b[:, 1], b[:, 2]
    parts, outputs, done = [first[:, :n, :2]], [first[:, n]], 1
    while done < count:
        found = (flat @ start).reshape(block, n + 1, 4)
        parts.append(found[:, :n, :2].copy())
        outputs.append(found[:, n].copy())
        start = power @ start
        done += block
    return np.concatenate(parts), np.concatenate(outputs)


def _by_inputs(states: SampledStates, count: int) -> tuple[Reals, Reals]:
    """The same where the dead time is many scans: what acts in the next scans is known at their start."""
    m, n, k = states.order, len(states.plant.c), states.plant.whole_scans
    block = min(k, 48)
    rows = _rows_of_known_inputs(states, block)
    state = np.zeros((m, 4))
    # with a dead time beyond the last scan no output ever arrives, however far beyond it lies
    line = min(k, count + block)
    held = np.zeros((line + 1 + count + block, 4))  # w from scan −line−1 on
    steps = np.zeros((2, 4))
    steps[0, SETPOINT_STEP] = 1.0
    plant_states, outputs = [], []
    for begin in range(0, count, block):
        pulse = np.zeros((2, 4))
        if begin == 0:
            pulse[0, NOISE_PULSE] = pulse[1, SPARED_PULSE] = 1.0
        known = np.concatenate([state, held[begin : begin + block + 1], steps[:1], pulse])
        found = (rows @ known).reshape(block + 1, m + 1, 4)
        plant_states.append(found[:-1, :n, :2].copy())
        outputs.append(found[:-1, m].copy())
        state = found[-1, :m]
        held[begin + line + 1 : begin + line + 1 + block] = found[:-1, m] + _load()
    return np.concatenate(plant_states), np.concatenate(outputs)


def _rows_of_known_inputs(states: SampledStates, block: int) -> Reals:
    """From (states, w[−k−1] … w[−k−1+block], set point, both pulses of noise at the first scan) to states and
    output at the scans 0 … block, shape ((block + 1)·(m + 1), m + block + 4).
    """
    m = states.order
    known = m + block + 4
    own = np.zeros((INPUTS, known))
    own[SETPOINT_INPUT, -3] = own[NOISE_INPUT, -2] = own[SPARED_NOISE_INPUT, -1] = 1.0
    at = np.eye(m, known)
    rows = np.zeros((block + 1, m + 1, known))
    for index in range(block + 1):
        own[OLD], own[NEW] = 0.0, 0.0
        own[OLD, m + index] = 1.0
        if index < block:
            own[NEW, m + index + 1] = 1.0
        rows[index, :m] = at
        rows[index, m] = states.output[:m] @ at + states.output[m:] @ own
        at = states.forward[:, :m] @ at + states.forward[:, m:] @ own
        own[NOISE_INPUT], own[SPARED_NOISE_INPUT] = 0.0, 0.0
    return rows.reshape(-1, known)


def _nodes(modes: Fading, longest: float) -> int:
    reach = fastest(modes, 0.0) * longest
    return next(nodes for limit, nodes in NODES_FOR if reach < limit)


def _rows(scanned: Scanned, plant: SampledPlant, lengths: Reals, before: int, nodes: int) -> Reals:
    """From (x, old, new) at a scan to PV at the nodes of its pieces, shape (pieces·nodes, n + 2).

    Raises WorkBoundError where they are too many for a plant of this order.
    """
    a, b, c, d = scanned.plant
    n = len(a)
    if len(lengths) * nodes * (n + 1) ** 2 > MAX_EXPONENTIALS:
        raise WorkBoundError("too many pieces in a scan")
    matrix = augmented(a, b)
    to_nodes = exponentials_less_one(matrix, (lengths[:, None] * chebyshev.points(nodes)).ravel())
    to_nodes = to_nodes.reshape(len(lengths), nodes, n + 1, n + 1) + np.eye(n + 1)
    rows = np.zeros((len(lengths), nodes, n + 2))
    at = np.eye(n, n + 2)
    for index in range(len(lengths)):
        acting = n if index < before else n + 1
        inside = to_nodes[index, :, :n, :n] @ at
        inside[:, :, acting] += to_nodes[index, :, :n, n]
        rows[index] = c @ inside
        rows[index, :, acting] += d
        at = inside[-1]
    return rows.reshape(-1, n + 2)
