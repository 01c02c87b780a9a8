"""Log and antilog elements: transistors and diodes that turn a current into a voltage and back."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

from .conduction import Route
from .constraints import is_diode_like, junction_ends
from .feedback import Step
from .junctions import JunctionLoop
from .wiring import TRANSISTORS, Wiring


@dataclass(frozen=True, slots=True)
class LogTransistor:
    """A transistor that carries the current of a summing node inside the feedback of its amplifier.

    Attributes
    ----------
    part, amplifier : str
    summing_node : str
        Net of the collector, or of the held input where a diode-connected transistor does not end there.
    drive : str
        The terminal that the amplifier's output moves, ``emitter`` or ``base``.
    diode_connected : bool
        Collector tied to base.
    """

    part: str
    amplifier: str
    summing_node: str
    drive: Literal["emitter", "base"]
    diode_connected: bool


@dataclass(frozen=True, slots=True)
class LogDiode:
    """A diode that carries the current of a summing node inside the feedback of its amplifier."""

    part: str
    amplifier: str
    summing_node: str


@dataclass(frozen=True, slots=True)
class AntilogTransistor:
    """A transistor whose current follows a log voltage.

    Attributes
    ----------
    part, collector_net : str
    load : str
        What its collector feeds: a ``summing`` node, a ``resistor`` or a ``mirror``.
    drive : str
        Which of its terminals moves: ``base``, ``emitter`` or ``both``.
    amplifier : str, optional
        The amplifier of the summing node.
    """

    part: str
    collector_net: str
    load: Literal["summing", "resistor", "mirror"]
    drive: Literal["emitter", "base", "both"]
    amplifier: str | None


def log_elements(wiring: Wiring, routes: Iterable[Route]) -> tuple[tuple[LogTransistor, ...], tuple[LogDiode, ...]]:
    """Log transistors and log diodes, in the order of the file; a part counts once, by its shortest route."""
    transistors: dict[str, LogTransistor] = {}
    diodes: dict[str, LogDiode] = {}
    for route in routes:
        for step in _from_summing_node(wiring, route):
            part = wiring.design.parts[step.part]
            if part.kind == "diode":
                diodes.setdefault(step.part, LogDiode(step.part, route.amplifier, route.net))
            elif part.kind in TRANSISTORS and (found := _log_transistor(wiring, route, step.part, step.entry)):
                transistors.setdefault(step.part, found)
    return (
        tuple(transistors[ref] for ref in wiring.design.parts if ref in transistors),
        tuple(diodes[ref] for ref in wiring.design.parts if ref in diodes),
    )


def _from_summing_node(wiring: Wiring, route: Route) -> Iterator[Step]:
    """Steps from the summing node back as far as no resistor with a drop comes between."""
    for step in reversed(route.steps):
        if wiring.point(step.part, step.entry) != wiring.point(step.part, step.exit):
            if wiring.design.parts[step.part].kind not in ("diode", *TRANSISTORS):
                return
            yield step


def _log_transistor(wiring: Wiring, route: Route, ref: str, entry: str) -> LogTransistor | None:
    tied = is_diode_like(wiring, ref)
    collector = wiring.design.parts[ref].pins["C"]
    ends_there = wiring.point_of[collector] == wiring.point_of[route.net]
    if not tied and not ends_there:
        return None  # a common-base stage on the way
    return LogTransistor(
        part=ref,
        amplifier=route.amplifier,
        summing_node=collector if ends_there else route.net,
        drive="emitter" if entry == "E" else "base",
        diode_connected=tied,
    )


def antilog_transistors(
    wiring: Wiring,
    loops: Iterable[JunctionLoop],
    logs: Iterable[str],
    held: Mapping[str, str],
    levels: Mapping[str, float],
) -> tuple[AntilogTransistor, ...]:
    """Antilog transistors, in the order of the file.

    Parameters
    ----------
    wiring : Wiring
    loops : iterable of JunctionLoop
    logs : iterable of str
        Log transistors and diodes; they are not antilog.
    held : mapping of point to amplifier
    levels : mapping of point to float
        Fixed voltages of points.
    """
    loops = list(loops)
    taking_part = {ref for loop in loops if not _is_mirror(wiring, loop) for ref in loop.parts} - set(logs)
    return tuple(
        found for ref in wiring.design.parts if ref in taking_part for found in _antilog(wiring, ref, held, levels)
    )


def _is_mirror(wiring: Wiring, loop: JunctionLoop) -> bool:
    """Whether a loop is two transistors base to base, one with its collector tied to it."""
    if len(loop.parts) != 2 or loop.outputs or any(wiring.design.parts[r].kind not in TRANSISTORS for r in loop.parts):
        return False
    bases = {wiring.point(ref, "B") for ref in loop.parts}
    return len(bases) == 1 and any(is_diode_like(wiring, ref) for ref in loop.parts)


def _antilog(
    wiring: Wiring, ref: str, held: Mapping[str, str], levels: Mapping[str, float]
) -> Iterator[AntilogTransistor]:
    if wiring.design.parts[ref].kind not in TRANSISTORS or is_diode_like(wiring, ref):
        return
    moved = [name for name, pin in (("base", "B"), ("emitter", "E")) if wiring.point(ref, pin) not in levels]
    load = _load(wiring, ref, held)
    if load is None or not moved:
        return
    yield AntilogTransistor(
        part=ref,
        collector_net=wiring.design.parts[ref].pins["C"],
        load=load,
        drive="both" if len(moved) == 2 else "base" if moved == ["base"] else "emitter",
        amplifier=held.get(wiring.point(ref, "C")) if load == "summing" else None,
    )


def _load(wiring: Wiring, ref: str, held: Mapping[str, str]) -> Literal["summing", "resistor", "mirror"] | None:
    """Tell what a collector feeds; None where it goes to a supply or is not looked at."""
    point = wiring.point(ref, "C")
    if point in held:
        return "summing"
    if point in wiring.sourced:
        return None
    for other, pin in wiring.pins_at[point]:
        kind = wiring.design.parts[other].kind
        if other != ref and kind in TRANSISTORS and pin == "B" and junction_ends(wiring, other):
            return "mirror"
    return "resistor" if wiring.resistances_at.get(point) else None
