"""What sets the current of a net: the inputs and references that reach it, and its direction."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping
from dataclasses import dataclass

from .constraints import current_path, is_diode_like
from .wiring import TRANSISTORS, Wiring, has_pins

STIFF_SOURCE = 10.0  # V: what a current source is good for where nothing takes its current


@dataclass(frozen=True, slots=True)
class CurrentSources:
    """What sets the current that flows into a net from outside its amplifier's feedback.

    Attributes
    ----------
    inputs : tuple of str
        Input nets and photodiodes; none means that the current is fixed.
    references : tuple of str
        Reference and supply nets, and sources.
    parts : tuple of str
        Parts between them and the net, the sources included.
    """

    inputs: tuple[str, ...]
    references: tuple[str, ...]
    parts: tuple[str, ...]


def current_sources(
    wiring: Wiring,
    levels: Mapping[str, str],
    start: str,
    own: Collection[str],
    amplifier: str | None,
    working: Collection[str],
) -> CurrentSources:
    """Trace what sets the current into a point, back through resistors, sources, amplifiers, junctions.

    Parameters
    ----------
    wiring : Wiring
    levels : mapping of point to point
        Held points with the points that set their levels.
    start : str
        The point asked about.
    own : collection of str
        Log transistors and diodes of the amplifier that holds it; they answer to the current.
    amplifier : str, optional
        The amplifier that holds it.
    working : collection of str
        Junctions that conduct.
    """
    seen = {start}
    queue = [start]
    parts: set[str] = set()
    names: set[str] = set()
    while queue:
        point = queue.pop()
        if point in wiring.known:
            names |= {wiring.known[point]} - {""}
            continue
        names |= _brought(wiring, point)
        for part, other, by_amplifier in _causes(wiring, point, working):
            if part in own or part == amplifier or _is_output_of(wiring, other, amplifier):
                continue
            parts |= {part} - {""}
            cause = other if by_amplifier or other == start else levels.get(other, other)
            if cause not in seen:
                seen.add(cause)
                queue.append(cause)
    return _sorted(wiring, names, parts)


def _sorted(wiring: Wiring, names: set[str], parts: set[str]) -> CurrentSources:
    design = wiring.design
    named = [name for name in [*design.nets, *design.parts] if name in names]
    inputs = [name for name in dict.fromkeys(named) if name in design.inputs]
    return CurrentSources(
        inputs=tuple(inputs),
        references=tuple(name for name in dict.fromkeys(named) if name not in inputs),
        parts=tuple(ref for ref in design.parts if ref in parts or ref in names),
    )


def _is_output_of(wiring: Wiring, point: str, amplifier: str | None) -> bool:
    return amplifier is not None and wiring.point(amplifier, "OUT") == point


def _brought(wiring: Wiring, point: str) -> set[str]:
    """Names of current drives and sources that stand on a point."""
    drives = {net for net in wiring.nets_at[point] if wiring.drives_current(net)}
    kinds = ("current-source", "voltage-source", "photodiode")
    return drives | {r for r, _ in wiring.pins_at.get(point, ()) if wiring.design.parts[r].kind in kinds}


def _causes(wiring: Wiring, point: str, working: Collection[str]) -> Iterator[tuple[str, str, bool]]:
    """Parts that lead a point, each with the point it is led from and whether it is an amplifier."""
    for resistance in wiring.resistances_at.get(point, ()):
        yield resistance.part, resistance.b if resistance.a == point else resistance.a, False
    for ref, pin in wiring.pins_at.get(point, ()):
        part = wiring.design.parts[ref]
        if part.kind == "op-amp" and pin == "OUT":
            for entry in ("IN+", "IN-"):
                if entry in part.pins:
                    yield ref, wiring.point(ref, entry), True
        elif part.kind == "voltage-source" and (points := wiring.two_points(ref)):
            yield ref, points[1] if points[0] == point else points[0], False
        elif ref in working and part.kind == "diode":
            yield from ((ref, end, False) for end in current_path(wiring, ref) if end != point)
        elif ref in working and pin != "B":
            yield ref, wiring.point(ref, "B"), False
            # A rail that an emitter stands on leads nothing: the base is referred to it.
            if pin == "C" and (emitter := wiring.point(ref, "E")) not in wiring.known:
                yield ref, emitter, False


def direction(wiring: Wiring, levels: Mapping[str, float], point: str, own: Collection[str]) -> int | None:
    """Tell the direction of the current that resistors, sources and collectors bring to a held point.

    Parameters
    ----------
    wiring : Wiring
    levels : mapping of point to float
        Fixed voltages, known points included.
    point : str
    own : collection of str
        Parts of the feedback itself.

    Returns
    -------
    int or None
        +1 into the point, -1 out of it, 0 where nothing is known or contributions disagree; None where an
        input takes the current through zero.
    """
    signs = set(_resistive_signs(wiring, levels, point))
    for net in wiring.nets_at[point]:
        if wiring.drives_current(net):
            signs.add(_side(wiring.design.nets[net].range, 0.0))
    for ref, pin in wiring.pins_at.get(point, ()):
        part = wiring.design.parts[ref]
        if ref in own:
            continue
        if part.kind in ("current-source", "photodiode") and (points := wiring.two_points(ref)):
            signs.add(1 if points[0] == point else -1)
        elif part.kind in TRANSISTORS and pin == "C" and has_pins(part, "B") and not is_diode_like(wiring, ref):
            signs.add(1 if part.kind == "pnp" else -1)
    if None in signs:
        return None
    return signs.pop() if len(signs) == 1 else 0


def _resistive_signs(wiring: Wiring, levels: Mapping[str, float], start: str) -> Iterator[int | None]:
    """Signs of the voltages that stand behind the resistors of a point."""
    level = levels.get(start)
    if level is None:
        return
    seen = {start}
    queue = [start]
    while queue:
        point = queue.pop()
        for resistance in wiring.resistances_at.get(point, ()):
            other = resistance.b if resistance.a == point else resistance.a
            if other in seen:
                continue
            seen.add(other)
            net = wiring.design.nets.get(wiring.known.get(other, ""))
            if net is not None and net.role == "input":
                yield _side(net.range, level)
            elif other in levels:
                if levels[other] != level:
                    yield 1 if levels[other] > level else -1
            elif not wiring.is_driven(other):
                queue.append(other)


def _side(span: tuple[float, float] | None, level: float) -> int | None:
    """Side of a level on which a range lies, a tenth of it left out of account; None for both."""
    if span is None:
        return 0
    above, below = max(span[1] - level, 0.0), max(level - span[0], 0.0)
    if above > 10.0 * below:
        return 1
    return -1 if below > 10.0 * above else None


def forward_voltage(wiring: Wiring, ends: tuple[str, str], levels: Mapping[str, float]) -> float:
    """Estimate the voltage that resistors and sources would put across two points if nothing joined them.

    Points that move with a signal count as at the other end's level: log voltages are small against supplies.

    Parameters
    ----------
    wiring : Wiring
    ends : (point, point)
        Of a diode, its anode first.
    levels : mapping of point to float
        Fixed voltages of points.

    Returns
    -------
    float
        In volts; 0 where neither end has a fixed level to go by.
    """
    if ends[0] in levels and ends[1] in levels:
        return levels[ends[0]] - levels[ends[1]]
    for sign, (here, there) in ((1.0, ends), (-1.0, ends[::-1])):
        if there in levels and not wiring.is_driven(here):
            return sign * (_unloaded(wiring, here, levels, levels[there]) - levels[there])
    return 0.0


def _unloaded(wiring: Wiring, point: str, levels: Mapping[str, float], rest: float) -> float:
    """Voltage of a point from its resistors and sources alone; the ends that move stand at `rest`."""
    conductance = current = 0.0
    for resistance in wiring.resistances_at.get(point, ()):
        other = resistance.b if resistance.a == point else resistance.a
        voltage = levels.get(other, _greatest(wiring, wiring.known.get(other), rest))
        conductance += float(1 / resistance.ohm)
        current += voltage / float(resistance.ohm)
    for ref, pin in wiring.pins_at.get(point, ()):
        if wiring.design.parts[ref].kind in ("current-source", "photodiode"):
            into = 1.0 if pin in ("P", "A", "0") else -1.0
            return rest + into * STIFF_SOURCE
    return current / conductance if conductance else rest


def _greatest(wiring: Wiring, name: str | None, rest: float) -> float:
    """The end of an input's range that is further from zero; `rest` for what is no input."""
    net = wiring.design.nets.get(name) if name else None
    span = net.range if net is not None else None
    return max(span, key=abs) if span is not None else rest
