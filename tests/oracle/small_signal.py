"""The linear network at an operating point: natural frequencies, return ratios and margins."""

from __future__ import annotations

import math

import numpy as np
import scipy.linalg
import scipy.optimize

from .elements import STEP, Junction


class Linear:
    """Matrices G and C at an operating point, with the poles of the amplifiers as further unknowns."""

    def __init__(self, point):
        self.network = network = point.network
        n = len(network.index)
        self.active = [ref for ref, state in point.states().items() if state == "linear"]
        size = n + len(self.active)
        self.g, self.c = np.zeros((size, size)), np.zeros((size, size))
        self.g[:n, :n] = network.jacobian(point.x)[1]
        network.residual(point.x[:, None].astype(complex))
        for a, b, value in self.capacitors():
            self.capacitor(a, b, value)
        self.pole_row = {ref: n + k for k, ref in enumerate(self.active)}
        for ref in self.active:
            self.poles(ref)

    def capacitors(self):
        """Every capacitance between two nodes, those of the devices included."""
        yield from self.network.capacitances
        for q in self.network.transistors.values():
            p = q.p
            yield q.b, q.e, p.emitter_capacitance + p.transit_time * q.diffusion(self.network)
            yield q.b, q.c, p.collector_capacitance
        for element in self.network.elements:
            if isinstance(element, Junction) and hasattr(element, "transit_time"):
                v = self.network.v(element.anode) - self.network.v(element.cathode)
                slope = element.current(v + 1j * STEP).imag[0] / STEP
                yield element.anode, element.cathode, element.fixed_capacitance + element.transit_time * slope

    def capacitor(self, a, b, value):
        """Add a capacitance between two nodes."""
        rows = [self.network.index.get(name) if name not in self.network.ground else None for name in (a, b)]
        for i, row in enumerate(rows):
            for j, column in enumerate(rows):
                if row is not None and column is not None:
                    self.c[row, column] += value if i == j else -value

    def poles(self, ref):
        """Turn the constant gain of an amplifier into one with two poles."""
        p, z, y = self.network.amplifiers[ref].p, self.network.index[f"z:{ref}"], self.pole_row[ref]
        # the gain row is z/A0 - d; its z becomes the output y of the first pole
        self.g[z, y], self.g[z, z] = self.g[z, z], 0.0
        self.c[z, y] = 1 / (2 * math.pi * p.gain_bandwidth)
        self.g[y, z], self.g[y, y] = 1.0, -1.0
        self.c[y, z] = 1 / (2 * math.pi * p.second_pole)

    def natural_frequencies(self):
        """Finite natural frequencies in 1/s."""
        rows = np.max(np.abs(self.g), axis=1)
        g, c = self.g / rows[:, None], self.c / rows[:, None]
        top = 1e4 * 2 * math.pi * max((a.p.gain_bandwidth for a in self.network.amplifiers.values()), default=1e9)
        # unit of time near the fastest pole keeps the pencil balanced
        alpha, beta = scipy.linalg.eig(-g, c * top, right=False, homogeneous_eigvals=True)
        finite = np.abs(beta) > 1e-13 * np.hypot(np.abs(alpha), np.abs(beta))
        values = alpha[finite] / beta[finite] * top
        return values[np.abs(values) < top]

    def rightmost(self):
        """Largest real part."""
        return float(np.max(self.natural_frequencies().real))

    def least_damping(self):
        """Least damping ratio over complex pairs, 1 where there is none."""
        fastest = max((a.p.gain_bandwidth for a in self.network.amplifiers.values()), default=math.inf)
        values = self.natural_frequencies()
        pairs = values[(np.abs(values.imag) > 1e-7 * np.abs(values)) & (np.abs(values) < 200 * math.pi * fastest)]
        return float(np.min(-pairs.real / np.abs(pairs))) if len(pairs) else 1.0

    def return_ratio(self, ref, frequency):
        """Return ratio of an amplifier's source at each frequency, all other amplifiers active."""
        s = 2j * math.pi * np.atleast_1d(np.asarray(frequency, dtype=float))
        z, y = self.network.index[f"z:{ref}"], self.pole_row[ref]
        matrix = self.g + s[:, None, None] * self.c
        forward = matrix[:, y, z].copy()
        matrix[:, y, :] = 0.0
        matrix[:, y, z] = 1.0
        scale = np.max(np.abs(matrix), axis=2, keepdims=True)
        drive = np.zeros((len(s), len(self.g), 1), dtype=complex)
        drive[:, y, 0] = 1.0
        response = np.linalg.solve(matrix / scale, drive / scale)
        return -response[:, y, 0] / forward

    def margins(self, ref, low=1e-3, high=1e11, per_decade=60):
        """DC return ratio, least phase margin with its crossover, gain margin and modulus margin."""
        grid = np.logspace(math.log10(low), math.log10(high), int(per_decade * math.log10(high / low)) + 1)
        t = self.return_ratio(ref, grid)
        dc = float(self.return_ratio(ref, 0.0)[0].real)
        phase = np.unwrap(np.angle(np.concatenate([[dc], t])))[1:]
        above = np.abs(t) > 1
        crossings = [self.crossing(ref, grid, k, phase[k]) for k in np.flatnonzero(above[:-1] != above[1:])]
        margin, crossover = min(crossings, default=(None, None))
        return {
            "dc_return_ratio": dc,
            "phase_margin": margin,
            "crossover": crossover,
            "modulus_margin": self.modulus_margin(ref, grid, t),
            "gain_margin": self.gain_margin(ref, grid, phase),
        }

    def crossing(self, ref, grid, k, phase):
        """Phase margin and frequency of the unity crossing after one grid point."""

        def excess(x):
            return math.log(abs(self.return_ratio(ref, math.exp(x))[0]))

        hair = 1e-9  # a crossing on a grid point itself may fall to either side by rounding
        low, high = math.log(grid[k]) - hair, math.log(grid[k + 1]) + hair
        f = math.exp(scipy.optimize.brentq(excess, low, high, xtol=1e-13))
        before, after = self.return_ratio(ref, [grid[k], f])
        return 180 + math.degrees(phase + np.angle(after / before)), f

    def modulus_margin(self, ref, grid, t):
        """Least distance of the return ratio from -1."""
        k = int(np.argmin(np.abs(1 + t)))
        ends = math.log(grid[max(k - 1, 0)]), math.log(grid[min(k + 1, len(grid) - 1)])
        found = scipy.optimize.minimize_scalar(
            lambda x: abs(1 + self.return_ratio(ref, math.exp(x))[0]), bounds=ends, method="bounded",
            options={"xatol": 1e-9},
        )  # fmt: skip
        return min(float(found.fun), abs(1 + t[k]))

    def gain_margin(self, ref, grid, phase):
        """Gain margin in dB where the phase first passes -180 degrees."""
        past = np.flatnonzero((phase[:-1] > -math.pi) & (phase[1:] <= -math.pi))
        if not len(past):
            return None

        k = int(past[0])
        start = self.return_ratio(ref, grid[k])[0]

        def beyond(x):
            return phase[k] + np.angle(self.return_ratio(ref, math.exp(x))[0] / start) + math.pi

        f = math.exp(scipy.optimize.brentq(beyond, math.log(grid[k]), math.log(grid[k + 1]), xtol=1e-13))
        return -20 * math.log10(abs(self.return_ratio(ref, f)[0]))
