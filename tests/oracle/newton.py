"""Residuals of Kirchhoff's laws with complex-step derivatives, and the roads by which they are solved.

One call of the residual with a complex step on each unknown gives the Jacobian to full precision. An
amplifier at a limit is no special case: its unknown ``z`` is its output while inside the limits, and the
distance beyond them is added to the input difference, which makes the equation continuous, for the same
Newton steps.
"""

from __future__ import annotations

import math

import numpy as np

from .elements import STEP


class NoSolutionError(Exception):
    """Newton's method found no operating point."""


class Equations:
    """Elements, their unknowns by name, and the solution of their equations."""

    def __init__(self):
        self.elements, self.index, self.ground = [], {}, {"0"}
        self.scale_sources, self.gain_limit, self.shunt = 1.0, math.inf, 0.0

    def node(self, name):
        """A node by name, made known to the vector of unknowns."""
        if name not in self.ground and name not in self.index:
            self.index[name] = len(self.index)
        return name

    def v(self, name):
        """The unknown of that name in every trial vector; zero for ground."""
        return self.zero if name in self.ground else self.x[self.index[name]]

    def leave(self, node, current):
        """Count a current that leaves a node into an element."""
        if node not in self.ground:
            self.f[self.index[node]] += current

    def flow(self, a, b, current):
        """Count a current from one node through an element to another."""
        self.leave(a, current)
        self.leave(b, -current)

    def equation(self, name, value):
        """Set the equation that belongs to an extra unknown."""
        self.f[self.index[name]] += value

    def add(self, element, *extra):
        """Take an element in, with the unknowns that it brings."""
        for name in extra:
            self.node(name)
        self.elements.append(element)
        return element

    def residual(self, x):
        """Residual of every equation for every column of trial unknowns."""
        self.x, self.f, self.zero = x, np.zeros_like(x), np.zeros_like(x[0])
        for element in self.elements:
            element.stamp(self)
        if self.shunt:
            nodes = [row for name, row in self.index.items() if ":" not in name]
            self.f[nodes] += self.shunt * x[nodes]
        return self.f

    def jacobian(self, x):
        """Residual and Jacobian at one real vector, by one complex step per unknown."""
        n = len(x)
        trial = np.repeat(x[:, None], n + 1, axis=1).astype(complex)
        trial[np.arange(n), np.arange(1, n + 1)] += 1j * STEP
        f = self.residual(trial)
        return f[:, 0].real, f[:, 1:].imag / STEP

    def damping(self, x, step):
        """Share of a Newton step that keeps nodes in reach and every junction from running away forwards."""
        reach = 10.0 if self.gain_limit < math.inf else 1e3
        nodes = [row for name, row in self.index.items() if ":" not in name]
        share = min(1.0, reach / max(np.max(np.abs(step[nodes])), 1e-300))
        for element in self.elements:
            for p, n, sign in element.junctions() if hasattr(element, "junctions") else ():
                now = sign * (self.entry(x, p) - self.entry(x, n))
                move = sign * (self.entry(step, p) - self.entry(step, n))
                allowed = max(0.1, 0.5 - now)
                if move > allowed:
                    share = min(share, allowed / move)
        return share

    def entry(self, x, name):
        """One entry of a vector of unknowns; zero for ground."""
        return 0.0 if name in self.ground else x[self.index[name]]

    def newton(self, x, tries=400):
        """Newton's method from a start."""
        best = math.inf  # smallest full step so far: below 1e-9 it is rounding once it no longer falls
        for _ in range(tries):
            f, matrix = self.jacobian(x)
            rows = np.max(np.abs(matrix), axis=1)
            if not np.all(np.isfinite(matrix)) or np.any(rows == 0):
                raise NoSolutionError
            try:
                step = -np.linalg.solve(matrix / rows[:, None], f / rows)
            except np.linalg.LinAlgError:
                raise NoSolutionError from None
            share = self.damping(x, step)
            x = x + share * step
            size = np.max(np.abs(step) / (np.abs(x) + 1e-6))
            if share == 1.0 and size < 1e-9 and size >= best / 2:
                return x
            best = min(best, size) if share == 1.0 else math.inf
        raise NoSolutionError

    def staged(self, attribute, stages, x):
        """Newton's method while one property goes through its stages."""
        kept = getattr(self, attribute)
        try:
            for stage in stages:
                setattr(self, attribute, stage)
                x = self.newton(x)
        finally:
            setattr(self, attribute, kept)
        return self.newton(x)

    def solve(self, start=None):
        """The operating point, by the first road that arrives."""
        flat = np.zeros(len(self.index))
        roads = [
            lambda: self.newton(flat),
            lambda: self.staged("gain_limit", 10.0 ** np.arange(0, 10), flat),
            lambda: self.staged("shunt", 10.0 ** np.arange(-2, -16, -1.0), flat),
            lambda: self.staged("scale_sources", np.linspace(0.02, 1, 50), flat),
        ]
        if start is not None and len(start) == len(flat):
            roads.insert(0, lambda: self.newton(start))
        for road in roads:
            try:
                return road()
            except NoSolutionError:
                continue
        raise NoSolutionError
