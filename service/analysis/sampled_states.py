"""The closed loop from scan to scan as a state space, every state that it has.

    ξ⁺ = F·(ξ, w[n−k−1], w[n−k], SP, e),   u = U·(ξ, w[n−k−1], w[n−k], SP, e),   w = u + load

ξ: the plant's states, the measurement filter's, the integral's and the derivative's; e: noise on the measured
value. The past outputs that are still under way in the dead time form a line of their own behind ξ.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.analysis.loop import Reals
from service.analysis.scan import SampledPlant, Scanned, Section

OLD, NEW, SETPOINT_INPUT, NOISE_INPUT, SPARED_NOISE_INPUT = range(5)
"""Columns behind the states: w[n−k−1], w[n−k], set point, noise, noise that the derivative is spared."""

INPUTS = 5


@dataclass(frozen=True, eq=False)
class SampledStates:
    """`forward` (m, m + 5) and `output` (m + 5,) as above."""

    forward: Reals
    output: Reals
    plant: SampledPlant

    @property
    def order(self) -> int:
        """Number of states, the past outputs not included."""
        return len(self.forward)

    def closed(self) -> tuple[Reals, Reals, Reals]:
        """States and past outputs together: z⁺ = A·z + B·(SP, e, e′, load), u = c·z + d·(SP, e, e′, load).

        Returns A (N, N), B (N, 4) and the row (c, d) of u, (N + 4,).
        """
        m, line, k = self.order, self.plant.held_scans, self.plant.whole_scans
        size = m + line
        # each of the inputs as a row over (states, line, SP, e, e′, load)
        own = np.zeros((INPUTS, size + 4))
        own[SETPOINT_INPUT, size] = own[NOISE_INPUT, size + 1] = own[SPARED_NOISE_INPUT, size + 2] = 1.0
        if line > k:
            own[OLD, size - 1] = 1.0
        if k > 0:
            own[NEW, m + k - 1] = 1.0
        u = np.concatenate([self.output[:m], np.zeros(line + 4)]) + self.output[m:] @ own
        w = u.copy()
        w[size + 3] += 1.0
        if k == 0:
            own[NEW] = w
        rows = np.zeros((size, size + 4))
        rows[:m, :m] = self.forward[:, :m]
        rows[:m] += self.forward[:, m:] @ own
        if line:
            rows[m] = w
            rows[m + 1 :, m : size - 1] = np.eye(line - 1)
        return rows[:, :size], rows[:, size:], u


def sampled_states(scanned: Scanned, plant: SampledPlant, *, with_spared_noise: bool) -> SampledStates:
    """The loop's states at its scans; with the filter of the noise that the derivative is spared, or
    without.
    """
    parts = scanned.parts
    feedback, setpoint, spared = parts.feedback, parts.setpoint, parts.without_derivative
    n = len(plant.c)
    filtered, integrates = parts.measurement_filter > 0, feedback.ki_per_s != 0
    derivative = feedback.kd_s != 0 or setpoint.kd_s != 0
    m = n + filtered + integrates + derivative + (filtered and with_spared_noise)
    forward, measured = np.zeros((m, m + INPUTS)), np.zeros(m + INPUTS)
    forward[:n, :n] = plant.phi_less_one + np.eye(n)
    forward[:n, m + OLD], forward[:n, m + NEW] = plant.gamma1, plant.gamma0
    measured[:n], measured[m + OLD], measured[m + NOISE_INPUT] = plant.c, plant.d, 1.0
    wanted, noise = np.zeros(m + INPUTS), np.zeros(m + INPUTS)
    wanted[m + SETPOINT_INPUT] = 1.0
    if with_spared_noise:
        noise[m + SPARED_NOISE_INPUT] = 1.0
    if filtered:
        lag = scanned.lag(parts.measurement_filter)
        measured = _through(lag, forward, n, measured)
        noise = _through(lag, forward, m - 1, noise) if with_spared_noise else noise
    output = setpoint.kp * wanted - feedback.kp * measured - spared.kp * noise
    if integrates:
        error = feedback.ki_per_s * (wanted - measured - noise)
        output = output + _through(scanned.integrator(), forward, n + filtered, error)
    if derivative:
        rate = setpoint.kd_s * wanted - feedback.kd_s * measured - spared.kd_s * noise
        row = n + filtered + integrates
        output = output + _through(scanned.differentiator(feedback.tf_s), forward, row, rate)
    return SampledStates(forward, parts.direction * output, plant)


def _through(section: Section, forward: Reals, state: int, signal: Reals) -> Reals:
    """A signal (a row over states and inputs) behind a section whose state is the row `state` of
    `forward`.
    """
    forward[state] = section.gain_of_state * signal
    forward[state, state] += section.a
    behind = section.b0 * signal
    behind[state] += 1.0
    return behind
