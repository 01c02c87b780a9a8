"""Everything computed about one design, each part when it is first asked for."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from ..circuit.graph import build_graph
from ..circuit.structure import Structure, find_structure
from ..devices.constants import Array
from ..errors import AnalysisError
from .compensation import Compensation
from .conditions import Conditions, Row, corners_at, end_conditions, fault_scenarios, review_grid, typical_row
from .islands import Piece, cut, solve_pieces
from .loops import Loops
from .operating_points import OperatingPoints, Worst
from .transfer import EXPONENT_STEP, Transfer, compare, dimension_fault, trim_positions
from .values import Overrides

if TYPE_CHECKING:
    import networkx as nx

    from ..design.model import Design, Requirement
    from ..findings import Edit
    from .budget import Budget
    from .latching import Latching
    from .noise import Noise
    from .samples import Samples, Sampling

DEFAULT_SHARE = 0.005
"""Allowed error as a share of reading where no requirement says."""
SHARE = 0.25


class Review:
    """A design and its analyses, as rules see them.

    Parameters
    ----------
    design : Design
    conditions : Conditions, optional
        In place of the review grid.
    cache : dict, optional
        Solutions shared between reviews of nearly equal designs, such as those of a design and of its
        remedies; they are found by what they depend on.
    seeks_remedies : bool
        False where a remedy is being tried: whether a finding stays is asked, not how to cure it, and
        rules spare themselves the search for remedies.
    sampling : Sampling, optional
        How many samples are drawn, from which seed; None where none are asked for.
    """

    def __init__(
        self,
        design: Design,
        conditions: Conditions | None = None,
        cache: dict[Any, Any] | None = None,
        *,
        seeks_remedies: bool = True,
        sampling: Sampling | None = None,
    ) -> None:
        self.design = design
        self.seeks_remedies = seeks_remedies
        self.sampling = sampling
        self._given = conditions
        self._cache: dict[Any, Any] = {} if cache is None else cache

    @cached_property
    def circuit(self) -> nx.MultiGraph[Any]:
        """The graph of parts and nets, frozen."""
        return build_graph(self.design)

    @cached_property
    def structure(self) -> Structure:
        """Feedback loops, summing nodes, log and antilog transistors, junction loops."""
        return find_structure(self.design, self.circuit)

    @cached_property
    def typical(self) -> Row:
        """Every quantity at its typ, trims set."""
        return typical_row(self.design) | trim_positions(self.design, self.solve)

    @cached_property
    def conditions(self) -> Conditions:
        """The review grid, or the conditions given."""
        return review_grid(self.design, self.typical) if self._given is None else self._given

    @cached_property
    def operating_points(self) -> OperatingPoints:
        """Operating points at all review conditions."""
        return self.solve(self.conditions)

    @cached_property
    def faults(self) -> OperatingPoints:
        """Operating points of the fault scenarios, with input clamps in place."""
        return self.solve(fault_scenarios(self.design, self.typical), with_clamps=True)

    @cached_property
    def loops(self) -> Loops:
        """Natural frequencies and margins at all review conditions."""
        return Loops(self.operating_points, self._cache)

    def loops_with(self, values: Overrides) -> Loops:
        """Loops at the same operating points with capacitances or poles changed; see `linearise`."""
        return Loops(self.operating_points, self._cache, values)

    def edited(self, edits: Sequence[Edit]) -> Review:
        """The review of this design after edits of its file, in memory.

        Raises
        ------
        EditError, DesignError
            Where an edit does not fit, or the design is not valid any more.
        """
        from ..design.edit import apply_edits
        from ..design.load import load_text

        return Review(load_text(apply_edits(self.design.text, edits), self.design.path), cache=self._cache)

    @cached_property
    def transfer(self) -> Mapping[str, Transfer]:
        """Output against law, by requirement that has one."""
        return {
            name: compare(r, self.operating_points, self.solve, self.typical)
            for name, r in self.design.requirements.items()
            if r.law is not None
        }

    @cached_property
    def budget(self) -> Mapping[str, Budget]:
        """Error budget by requirement that has a law."""
        from .budget import budget

        return {name: budget(self, r) for name, r in self.design.requirements.items() if r.law is not None}

    @cached_property
    def samples(self) -> Mapping[str, Samples]:
        """Samples by requirement that has a law; none where none were asked for, or nothing is judged.

        Of the review grid some conditions are sampled, of conditions that were given all.
        """
        from .samples import draw_all

        return {} if self.sampling is None else draw_all(self, self.sampling, everywhere=self._given is not None)

    @cached_property
    def latching(self) -> Latching:
        """Second operating points at the corners of the review."""
        from .latching import find_latching

        return find_latching(self)

    def bandwidth_of(self, requirement: Requirement) -> tuple[OperatingPoints, Array]:
        """Operating points and -3 dB bandwidth [Hz] at the point a requirement asks it for, over ambient and supplies.

        Raises
        ------
        AnalysisError
            Where the requirement asks for none.
        """
        from .bandwidth import bandwidth

        asked = requirement.bandwidth
        if asked is None:
            raise AnalysisError(f"requirement {requirement.name} asks for no bandwidth")
        points = self.solve(corners_at(self.design, {**self.typical, **asked.at}))
        return points, bandwidth(points, asked.input, requirement.output)

    def noise_of(self, requirement: Requirement) -> tuple[OperatingPoints, Noise]:
        """Operating points and output noise over ambient at the ends and the middle of the inputs' ranges.

        Raises
        ------
        AnalysisError
            Where the requirement asks for none.
        """
        from .noise import noise

        if requirement.noise is None:
            raise AnalysisError(f"requirement {requirement.name} has no limit of noise")
        points = self.solve(end_conditions(self.design, self.typical))
        return points, noise(points, requirement.output, requirement.noise.bandwidth)

    def solve(
        self, conditions: Conditions, *, with_clamps: bool = False, overrides: Overrides | None = None,
        temperatures: Mapping[str, Array] | None = None,
    ) -> OperatingPoints:  # fmt: skip
        """Operating points of this design at any conditions; see `islands.solve_pieces`."""
        changed, imposed = dict(overrides or {}), dict(temperatures or {})
        apart = frozenset(imposed) | {ref for ref, _ in changed}
        pieces = self._pieces if not apart else cut(self.design, self.circuit, apart)
        placed = solve_pieces(
            pieces, conditions, with_clamps=with_clamps, overrides=changed, temperatures=imposed, cache=self._cache
        )
        return OperatingPoints(self.design, conditions, placed)

    @cached_property
    def _pieces(self) -> tuple[Piece, ...]:
        return cut(self.design, self.circuit)

    def re_solve(
        self, *, values: Overrides | None = None, temperatures: Mapping[str, Array] | None = None,
        vbe_offsets: Mapping[str, float] | None = None,
    ) -> OperatingPoints:  # fmt: skip
        """Operating points at the review conditions with something changed.

        Parameters
        ----------
        values : mapping of (part reference, parameter) to float or ndarray
            Parameters in place of their nominal.
        temperatures : mapping of str to ndarray, shape (conditions,) [K]
            Part temperatures imposed.
        vbe_offsets : mapping of str to float [V]
            Added to base-emitter voltages.

        Returns
        -------
        OperatingPoints
        """
        changed = dict(values or {}) | {(ref, "mismatch"): v for ref, v in (vbe_offsets or {}).items()}
        return self.solve(self.conditions, overrides=changed, temperatures=temperatures)

    def allowed_error(self, net: str) -> Array:
        """Error allowed at an output net at each condition, in its units.

        What the requirement with a law allows (the least, of several); NaN outside its range, and
        everywhere where there is none.
        """
        rows = [
            np.where(t.judged, t.allowed, np.nan)
            for t in self.transfer.values()
            if t.requirement.output == net
            and t.requirement.has_accuracy
            and dimension_fault(self.design, t.requirement) is None
        ]
        blank = np.full(self.conditions.size, np.nan)
        return np.fmin.reduce(rows) if rows else blank

    def share(self, net: str) -> Array:
        """Error that one cause may take of an output net, at each condition, in its units.

        A quarter of what the requirement allows. Without a requirement half a percent of reading, or
        for an output that crosses zero half a percent of the input, through the log slope.

        Parameters
        ----------
        net : str

        Returns
        -------
        ndarray, shape (conditions,)
            NaN outside the requirement's range.
        """
        allowed = self.allowed_error(net)
        if np.isfinite(allowed).any():
            return SHARE * allowed
        output = self.operating_points.voltage(net)
        if np.nanmin(output) * np.nanmax(output) > 0:
            return DEFAULT_SHARE * np.abs(output)
        slopes = [np.abs(self.log_slope(net, name)) for name in self.design.inputs]
        return DEFAULT_SHARE * np.fmax.reduce(slopes) if slopes else np.full(output.shape, np.nan)

    def log_slope(self, net: str, source: str) -> Array:
        """Change of a net's voltage for a change of one in the logarithm of an input, at each condition [V]."""
        x = self.conditions.values[source]
        if not np.any(x):
            return np.full(x.shape, np.nan)
        up, down = (
            self.solve(Conditions({**self.conditions.values, source: x * np.exp(step)}))
            for step in (EXPONENT_STEP, -EXPONENT_STEP)
        )
        return np.where(x == 0, np.nan, (up.voltage(net) - down.voltage(net)) / (2 * EXPONENT_STEP))

    def cost(self, changed: OperatingPoints) -> list[Cost]:
        """What a change of parameters or temperatures does to each output, against its share.

        Parameters
        ----------
        changed : OperatingPoints
            Of this design at the review conditions, from `re_solve`.

        Returns
        -------
        list of Cost
            One an output net, the dearest first.
        """
        points = self.operating_points
        costs = []
        for net in (n for n, entry in self.design.nets.items() if entry.role == "output"):
            error, share = changed.voltage(net) - points.voltage(net), self.share(net)
            with np.errstate(all="ignore"):
                ratio = np.abs(error) / share
            if np.isfinite(ratio).any():
                costs.append(Cost(net, error, share, ratio, points.worst(ratio)))
        return sorted(costs, key=lambda c: -c.worst.value)

    def required_capacitors(
        self, amplifiers: Sequence[str], damping: float = 0.3, margin: float = 45.0
    ) -> Compensation | None:
        """Least compensation capacitors of loops searched together; see `compensation.required_capacitors`."""
        return self.loops.required_capacitors(amplifiers, damping, margin)


@dataclass(frozen=True)
class Cost:
    """What a change does to one output.

    Attributes
    ----------
    output : str
        Net.
    error : ndarray, shape (conditions,)
        Change of the output, in its units.
    share : ndarray
        What one cause may take.
    ratio : ndarray
        abs(error) over share; NaN where the output is not judged.
    worst : Worst
        Of the ratio.
    """

    output: str
    error: Array
    share: Array
    ratio: Array
    worst: Worst
