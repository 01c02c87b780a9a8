"""Natural frequencies and return ratios of the linearised circuit, at every operating point.

The pencil ``G + s·C`` is reduced to the columns that C touches: with ``N = G⁻¹C`` its natural frequencies
are ``s = −1/μ`` for the eigenvalues μ of N there, and every transfer function is a sum over them.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from ..devices.constants import AnyArray, Array, BoolArray, ComplexArray, Index, IntArray
from .margins import Margins
from .small_signal import SmallSignal

FASTEST = 1e14
"""Natural frequencies above this [1/s] are of algebraic constraints and rounding, not of the circuit."""
SLOWEST_SHARE = 1e-14
DAMPING_SPAN = 100.0
"""Damping is judged below this many times the largest gain-bandwidth."""
TAKES_PART = 0.2
RINGING = 0.5  # damping ratio below which a doubtful mode matters
UNBOUNDED = 1e-100


@dataclass(frozen=True)
class Modes:
    """Natural modes of each condition.

    Attributes
    ----------
    frequency : ndarray of complex, shape (conditions, modes) [1/s]
        NaN where a mode is at infinity.
    mu : ndarray of complex, shape (conditions, modes) [s]
        Eigenvalues of ``G⁻¹C``.
    right, left : ndarray of complex, shape (conditions, modes, modes)
    columns : ndarray of int, shape (modes,)
        Unknowns that carry the state.
    response : ndarray, shape (conditions, unknowns, modes)
        ``G⁻¹C`` on those columns.
    """

    frequency: ComplexArray
    mu: ComplexArray
    right: ComplexArray
    left: ComplexArray
    columns: IntArray
    response: Array


def find_modes(system: SmallSignal) -> Modes:
    """Eigenvalues and eigenvectors of the reduced network, all conditions at once.

    Parameters
    ----------
    system : SmallSignal

    Returns
    -------
    Modes
    """
    columns = np.flatnonzero(np.any(system.capacitance != 0, axis=(0, 1)))
    response = np.linalg.solve(system.conductance, system.capacitance[:, :, columns])
    mu, right = np.linalg.eig(response[:, columns, :])
    mu, right = mu.astype(complex), right.astype(complex)
    left = _inverse(right)
    frequency = _genuine(system, mode_frequencies(mu), mu, response.astype(complex) @ right)
    return Modes(frequency, mu, right, left, columns, response)


DOUBTFUL_SHARE = 1e-8
"""An eigenvalue of ``G⁻¹C`` this small beside the largest may be rounding of one at zero, a mode at infinity."""
NEAR = 1e-3


def _genuine(system: SmallSignal, frequency: ComplexArray, mu: ComplexArray, vectors: ComplexArray) -> ComplexArray:
    """Natural frequencies without those that rounding made of modes at infinity.

    A doubtful one that would be unstable or ring is looked at in the pencil itself: with ``M = G + s·C`` the
    nearest natural frequency to s is ``s − 1/ν`` for the largest eigenvalue ν of ``M⁻¹C``, found by iteration.
    Where it is not near, s is none.
    """
    size = np.abs(mu)
    small = size < DOUBTFUL_SHARE * size.max(axis=1, keepdims=True, initial=0.0)
    doubtful = small & np.isfinite(frequency) & (frequency.real > -RINGING * np.abs(frequency))
    rows, modes = np.nonzero(doubtful)
    if not rows.size:
        return frequency
    s = frequency[rows, modes]
    matrix = system.conductance[rows] + s[:, None, None] * system.capacitance[rows]
    x = vectors[rows, :, modes][..., None]
    capacitance = system.capacitance[rows].astype(complex)
    nu = np.zeros(len(rows), complex)
    with np.errstate(all="ignore"):
        for _ in range(3):
            x = x / np.linalg.norm(x, axis=1, keepdims=True)
            there = np.linalg.solve(matrix, capacitance @ x)
            nu = np.sum(np.conj(x) * there, axis=(1, 2))
            x = there
        far = ~(np.abs(1 / nu) < NEAR * np.abs(s))
    kept = frequency.copy()
    kept[rows[far], modes[far]] = np.nan
    return kept


def mode_frequencies(mu: ComplexArray) -> ComplexArray:
    """Natural frequencies of eigenvalues of ``G⁻¹C``, modes last [1/s]; NaN where one is at infinity."""
    size = np.abs(mu)
    largest = size.max(axis=-1, keepdims=True, initial=0.0)
    finite = (size > 1 / FASTEST) & (size > SLOWEST_SHARE * largest)
    return np.where(finite, -1 / np.where(finite, mu, 1), np.nan)


def _inverse(right: ComplexArray) -> ComplexArray:
    try:
        return np.linalg.inv(right)
    except np.linalg.LinAlgError:
        # exactly defective somewhere: the least disturbance that makes the vectors independent
        nudge = 1e-12 * np.random.default_rng(0).standard_normal(right.shape[1:])
        return np.linalg.inv(right + nudge)


@dataclass(frozen=True)
class ReturnRatio:
    """Return ratio T of one amplifier's controlled source, all others active, as a function of frequency.

    The response of the internal output to a disturbance added to it is ``u = u_0 − s·Σ a_i/(1 + s·μ_i)``;
    then ``T = −u/(1 + u)``. `dc` is T at zero frequency.
    """

    start: Array
    weight: ComplexArray
    mu: ComplexArray
    dc: Array

    def at(self, frequency: Array, index: Index = slice(None)) -> ComplexArray:
        """T at frequencies [Hz] of shape (conditions, points), or one per chosen condition."""
        s = 2j * np.pi * frequency
        weight, mu, start = self.weight[index], self.mu[index], self.start[index]
        if s.ndim > weight.ndim - 1:
            weight, mu, start = weight[:, None, :], mu[:, None, :], start[:, None]
        u = start - s * np.sum(weight / (1 + s[..., None] * mu), axis=-1)
        left = 1 + u
        # it rounds to 0 where T is beyond the reach of the arithmetic, as with ideal amplifiers at DC
        ratio: ComplexArray = -u / np.where(left == 0, UNBOUNDED, left)
        return ratio


def return_ratio(system: SmallSignal, modes: Modes, amplifier: int) -> ReturnRatio:
    """Return ratio of one amplifier (its index) at all conditions; saturated ones give 0."""
    size = system.conductance.shape[-1]
    disturbance = np.zeros((len(system.conductance), size, 1))
    disturbance[:, system.output_rows[amplifier]] = 1
    at_dc = np.linalg.solve(system.conductance, disturbance)[..., 0]
    u = system.internal_columns[amplifier]
    inner = np.einsum("nij,nj->ni", modes.left, at_dc[:, modes.columns].astype(complex))
    outer = np.einsum("nj,nji->ni", modes.response[:, u, :].astype(complex), modes.right)
    return ReturnRatio(at_dc[:, u], inner * outer, modes.mu, _dc(system, disturbance, amplifier))


def _dc(system: SmallSignal, disturbance: Array, amplifier: int) -> Array:
    """Return ratio at zero frequency, with the source itself dead: ``1 + u`` would cancel at high gains."""
    u = system.internal_columns[amplifier]
    dead = system.conductance.copy()
    dead[:, system.output_rows[amplifier], u] += system.linear[:, amplifier]
    try:
        return -np.linalg.solve(dead, disturbance)[:, u, 0]
    except np.linalg.LinAlgError:
        # a network that only this amplifier holds together: its return ratio has no bound
        response = np.linalg.solve(system.conductance, disturbance)[:, u, 0]
        return -response / (1 + response)


@dataclass
class CircuitLoops:
    """Stability figures of one circuit at every operating point; arrays over conditions, NaN where there is none.

    Attributes
    ----------
    rightmost : ndarray [1/s]
        Largest real part of a natural frequency.
    least_damping : ndarray
        Least damping ratio of a complex pair; 1 where there is none.
    damping_frequency : ndarray [Hz]
        Where it is.
    """

    system: SmallSignal
    modes: Modes
    rightmost: Array
    least_damping: Array
    damping_frequency: Array
    _critical: AnyArray
    _margins: dict[str, Margins] = field(default_factory=dict)

    def margins(self, amplifier: str) -> Margins:
        """All margins of one amplifier, computed when first asked."""
        if amplifier not in self._margins:
            index = self.system.amplifiers.index(amplifier)
            ratio = return_ratio(self.system, self.modes, index)
            judged = self.system.linear[:, index] & self.system.converged
            self._margins[amplifier] = Margins(ratio, self.modes.frequency, judged, self.system.widest)
        return self._margins[amplifier]

    @cached_property
    def participation(self) -> BoolArray:
        """Which amplifiers take part in the critical mode, shape (conditions, amplifiers)."""
        rows = np.arange(len(self._critical))
        if not self.modes.columns.size:
            return np.zeros((len(rows), len(self.system.amplifiers)), bool)
        right = self.modes.right[rows, :, self._critical]
        share = np.abs(right * self.modes.left[rows, self._critical, :])
        place = {int(c): i for i, c in enumerate(self.modes.columns)}
        own = np.zeros((len(rows), len(self.system.amplifiers)))
        for i in range(own.shape[1]):
            for column in (self.system.state_columns[i], self.system.internal_columns[i]):
                if int(column) in place:
                    own[:, i] += share[:, place[int(column)]]
        most = own.max(axis=1, keepdims=True, initial=0.0)
        taking_part: BoolArray = (own >= TAKES_PART * most) & (most > 0)
        return taking_part


def analyse_loops(system: SmallSignal) -> CircuitLoops:
    """Natural frequencies at every operating point, and loops to ask margins of.

    Parameters
    ----------
    system : SmallSignal

    Returns
    -------
    CircuitLoops
    """
    system = _stand_in(system)
    modes = find_modes(system)
    rightmost, damping, frequency, critical = _judge(modes, 2 * np.pi * system.widest * DAMPING_SPAN)
    blank = [np.where(system.converged, a, np.nan) for a in (rightmost, damping, frequency)]
    return CircuitLoops(system, modes, blank[0], blank[1], blank[2], critical)


def _stand_in(system: SmallSignal) -> SmallSignal:
    """Give points that did not converge a harmless matrix, so that they do not stop the batch."""
    if system.converged.all():
        return system
    solved = system.converged[:, None, None]
    harmless = np.eye(system.conductance.shape[-1])
    return replace(
        system,
        conductance=np.where(solved, system.conductance, harmless),
        capacitance=np.where(solved, system.capacitance, harmless),
    )


def damping_of(frequency: ComplexArray, fastest: float) -> Array:
    """Least damping ratio of natural frequencies, modes last: 1 without complex pairs below `fastest` [1/s].

    A mode in the right half-plane counts with its (negative) ratio, real ones too.
    """
    ratio = _ratios(frequency, fastest)
    size = np.abs(frequency)
    unstable = np.isfinite(size) & (frequency.real > 0)
    real = np.where(unstable, -frequency.real / np.where(unstable, size, 1), np.inf)
    least: Array = np.minimum(np.minimum(ratio, real).min(axis=-1, initial=np.inf), 1.0)
    return least


def _ratios(s: ComplexArray, fastest: float) -> Array:
    """Damping ratios of complex pairs below `fastest`, infinite elsewhere."""
    size = np.abs(s)
    pair = np.isfinite(size) & (np.abs(s.imag) > 1e-9 * size) & (size < fastest)
    return np.where(pair, -s.real / np.where(pair, size, 1), np.inf)


def _judge(modes: Modes, fastest: float) -> tuple[Array, Array, Array, AnyArray]:
    s = modes.frequency
    if not s.shape[1]:  # nothing stores energy
        none = np.full(len(s), np.nan)
        return none, np.ones(len(s)), none, np.zeros(len(s), dtype=int)
    size = np.abs(s)
    real = np.where(np.isfinite(size), s.real, -np.inf)
    rightmost = real.max(axis=1, initial=-np.inf)
    ratio = _ratios(s, fastest)
    worst = ratio.argmin(axis=1)
    rows = np.arange(len(s))
    damping = np.minimum(ratio[rows, worst], 1.0)
    frequency = np.where(np.isfinite(ratio[rows, worst]), size[rows, worst] / (2 * np.pi), np.nan)
    # a real mode in the right half-plane is worse than any pair
    critical = np.where((rightmost > 0) & (damping > 0), real.argmax(axis=1), worst)
    return np.where(np.isfinite(rightmost), rightmost, np.nan), damping, frequency, critical
