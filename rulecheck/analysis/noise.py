"""Noise at an output: density and RMS over a band, by source, from the transposed network.

One solution of the transposed network at a frequency gives the gains from all sources to the output at once.
The sources are those of `noise_sources`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import Array, ComplexArray, Index, IntArray
from ..errors import AnalysisError
from .bandwidth import settles
from .noise_sources import NoiseSources, noise_sources
from .small_signal import linearise
from .solution import Solution
from .stability import CircuitLoops, analyse_loops

if TYPE_CHECKING:
    from .operating_points import OperatingPoints

CHUNK = 1 << 21  # complex numbers held at once
DENSITY_PER_DECADE = 10
CELLS_PER_DECADE = 2
NODES, WEIGHTS = np.polynomial.legendre.leggauss(5)
RESONANT = 0.8  # damping ratio below which a natural frequency gets cells of its own
GRADING = 3.0 ** np.arange(10)
SHARPEST = 1e-4


@dataclass(frozen=True)
class Contribution:
    """Noise at the output from one source.

    Attributes
    ----------
    owner : str
        Part, or net for its load or source resistance.
    element : str
        Which of the owner's sources: a resistance by its parameter (of a potentiometer ``lower`` or ``upper``),
        ``collector current``, ``base current``, ``base-collector current``, ``junction current``,
        ``photocurrent``, ``voltage_noise``, ``current_noise IN+``, ``current_noise IN-``.
    rms : ndarray, shape (conditions,) [V]
    """

    owner: str
    element: str
    rms: Array


@dataclass(frozen=True)
class Noise:
    """Noise at an output over a band; arrays have the conditions first.

    Attributes
    ----------
    output : str
        Net.
    band : (float, float) [Hz]
    rms : ndarray, shape (conditions,) [V]
        NaN where the point did not converge or is not stable.
    contributions : tuple of Contribution
        Sorted by their largest value over the conditions.
    frequency : ndarray, shape (points,) [Hz]
        Of the densities, from end to end of the band.
    density : ndarray, shape (conditions, points) [V/√Hz]
    missing : mapping of str to tuple of str
        Amplifiers of the circuit about the output that lack noise parameters, and which.
    """

    output: str
    band: tuple[float, float]
    rms: Array
    contributions: tuple[Contribution, ...]
    frequency: Array
    density: Array
    missing: Mapping[str, tuple[str, ...]]

    def sorted_at(self, index: int) -> tuple[Contribution, ...]:
        """The contributions sorted by their value at one condition."""
        return tuple(sorted(self.contributions, key=lambda c: -float(np.nan_to_num(c.rms[index]))))


def noise(points: OperatingPoints, output: str, band: tuple[float, float]) -> Noise:
    """Noise at an output over a band, at every operating point.

    Each condition takes some hundred solutions of the transposed network, all of them in batches: give the
    conditions that are wanted, not the whole review grid.

    Parameters
    ----------
    points : OperatingPoints
    output : str
        Net; one that an ideal source holds is quiet.
    band : (float, float) [Hz]
        Low end above zero, high end above the low one.

    Returns
    -------
    Noise

    Raises
    ------
    AnalysisError
        Where the band is none.
    """
    if not 0 < band[0] < band[1] < np.inf:
        raise AnalysisError(f"no noise band: {band[0]:g} Hz to {band[1]:g} Hz", "it rises from above 0 Hz")
    frequency = np.geomspace(*band, int(np.ceil(np.log10(band[1] / band[0]) * DENSITY_PER_DECADE)) + 1)
    placed = next((p for p in points.placed if output in p.nets), None)
    if placed is None or placed.solution.network.nodes[placed.nets[output]] >= placed.solution.network.free:
        quiet = np.where(points.converged, 0.0, np.nan)
        return Noise(output, band, quiet, (), frequency, np.repeat(quiet[:, None], frequency.size, axis=1), {})
    network = _Transposed(placed.solution, placed.nets[output])
    rms = np.sqrt(network.power(band))[placed.index]
    here = {solved: name for name, solved in {**placed.nets, **placed.parts}.items()}
    contributions = [
        Contribution(here[owner], element, rms[:, i]) for i, (owner, element) in enumerate(network.sources.names)
    ]
    return Noise(
        output=output,
        band=band,
        rms=np.sqrt(np.sum(rms**2, axis=1)),
        contributions=tuple(sorted(contributions, key=lambda c: -float(np.nan_to_num(c.rms).max(initial=0.0)))),
        frequency=frequency,
        density=np.sqrt(network.density(frequency))[placed.index],
        missing={here[ref]: lacking for ref, lacking in network.sources.missing.items()},
    )


class _Transposed:
    """The transposed network about one output, and the powers that its sources have there."""

    def __init__(self, points: Solution, output: str) -> None:
        self.sources: NoiseSources = noise_sources(points)
        self.circuit: CircuitLoops = analyse_loops(linearise(points))
        self.where: IntArray = np.flatnonzero(settles(points, self.circuit))
        self.output = points.network.nodes[output]
        count = len(points.converged)
        self.level = np.stack([np.broadcast_to(v, (count,)) for v in self.sources.level], axis=1)
        self.incidence = np.stack(self.sources.incidence, axis=1)
        self.corner = np.array(self.sources.corner)

    def density(self, frequency: Array) -> Array:
        """Power density of all sources together, shape (conditions, frequencies) [V²/Hz]."""
        out = np.full((len(self.level), frequency.size), np.nan)
        rows, columns = np.repeat(self.where, frequency.size), np.tile(np.arange(frequency.size), self.where.size)
        for part in self._chunks(rows.size):
            out[rows[part], columns[part]] = self._powers(rows[part], frequency[columns[part]]).sum(axis=1)
        return out

    def power(self, band: tuple[float, float]) -> Array:
        """Power of each source over a band, shape (conditions, sources) [V²]."""
        out = np.full(self.level.shape, np.nan)
        out[self.where] = 0.0
        rows, low, high = self._cells(np.log(band))
        # Gauss' rule in the logarithm of frequency: df = f·d(ln f)
        middle, half = (low + high) / 2, (high - low) / 2
        frequency = np.exp(middle[:, None] + half[:, None] * NODES).ravel()
        weight = (half[:, None] * WEIGHTS).ravel() * frequency
        rows = np.repeat(rows, len(NODES))
        for part in self._chunks(rows.size):
            powers = self._powers(rows[part], frequency[part])
            np.add.at(out, rows[part], weight[part, None] * powers)
        return out

    def _chunks(self, count: int) -> Iterator[slice]:
        """Slices that bound the memory; each is one batch."""
        step = max(1, CHUNK // len(self.incidence) ** 2)
        return (slice(first, first + step) for first in range(0, count, step))

    def _powers(self, rows: Index, frequency: Array) -> Array:
        """Power density of each source at one frequency a row, shape (rows, sources) [V²/Hz]."""
        system = self.circuit.system
        s = 2j * np.pi * frequency[:, None, None]
        matrix: ComplexArray = system.conductance[rows] + s * system.capacitance[rows]
        unit = np.zeros((len(self.incidence), 1))
        unit[self.output] = 1.0
        gains = np.linalg.solve(matrix.transpose(0, 2, 1), unit)[..., 0] @ self.incidence
        flicker = 1 + self.corner / frequency[:, None]
        return np.abs(gains) ** 2 * self.level[rows] * flicker

    def _cells(self, ends: Array) -> tuple[IntArray, Array, Array]:
        """Cells to integrate over: condition, low and high end of each in the logarithm of frequency.

        A pair of natural frequencies lies off the real axis of that logarithm by the arc sine of its damping
        ratio; cells about a resonance grow with the distance from it, so that the rule is exact to some 1e-6.
        """
        common = np.linspace(ends[0], ends[1], int(np.ceil(np.ptp(ends) / np.log(10) * CELLS_PER_DECADE)) + 1)
        natural = self.circuit.modes.frequency[self.where]
        size = np.abs(natural)
        damping = np.clip(-natural.real / size, SHARPEST, 1.0)
        resonant = (natural.imag > 0) & (damping < RESONANT)
        own = np.where(resonant, np.log(size / (2 * np.pi)), ends[0])[..., None]
        step = np.where(resonant, np.arcsin(damping), 0.0)[..., None] * GRADING
        step = np.where(step < np.ptp(common[:2]), step, 0.0)
        graded = np.concatenate([own, own - step, own + step], axis=2)
        graded = graded.reshape(len(graded), graded.shape[1] * graded.shape[2])
        breaks = np.concatenate([np.broadcast_to(common, (len(graded), common.size)), graded], axis=1)
        breaks = np.sort(np.clip(breaks, *ends), axis=1)
        row, cell = np.nonzero(np.diff(breaks, axis=1) > 0)
        return self.where[row], breaks[row, cell], breaks[row, cell + 1]
