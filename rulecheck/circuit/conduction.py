"""Which junctions conduct in normal work, told from clamps; and the routes that carry log currents."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator, Mapping
from dataclasses import dataclass
from itertools import groupby

from .constraints import current_path, is_diode_like, junction_ends
from .feedback import FeedbackLoop, Step
from .sources import direction, forward_voltage
from .wiring import TRANSISTORS, Wiring

LEAST_FORWARD = 0.5  # V: what a junction needs to be taken as conducting


@dataclass(frozen=True, slots=True)
class Route:
    """The last stretch of a feedback loop, through which the current of the summing node itself flows.

    Attributes
    ----------
    amplifier : str
    net : str
        The held input's net.
    steps : tuple of Step
        Parts that carry the current, from the output's side to the net.
    """

    amplifier: str
    net: str
    steps: tuple[Step, ...]


@dataclass(frozen=True, slots=True)
class Conduction:
    """Junctions at work.

    Attributes
    ----------
    junctions : tuple of str
        Transistors and diodes that conduct, in the order of the file.
    log_routes : tuple of Route
        Feedback through junctions that carry the current of a summing node.
    idle : frozenset of str
        Amplifiers whose only feedback is through diodes that do not conduct: limiters in waiting.
    """

    junctions: tuple[str, ...]
    log_routes: tuple[Route, ...]
    idle: frozenset[str]


def candidates(wiring: Wiring) -> tuple[str, ...]:
    """List the transistors and diodes with a junction; not diodes antiparallel to a transistor's."""
    all_ends = {
        ref: ends for ref in wiring.parts("diode", *TRANSISTORS) if (ends := junction_ends(wiring, ref)) is not None
    }
    across = {ends[::-1] for ref, ends in all_ends.items() if not is_diode_like(wiring, ref)}
    return tuple(ref for ref, ends in all_ends.items() if not (is_diode_like(wiring, ref) and ends in across))


def conduction(
    wiring: Wiring, loops: Iterable[FeedbackLoop], held: Mapping[str, str], levels: Mapping[str, float]
) -> Conduction:
    """Sort junctions into those at work and those that stand by.

    Parameters
    ----------
    wiring : Wiring
    loops : iterable of FeedbackLoop
        Loops to held inputs.
    held : mapping of point to amplifier
    levels : mapping of point to float
        Fixed voltages of points.

    Notes
    -----
    In an amplifier's feedback a transistor takes precedence over diodes and resistors over diodes alone: the
    diodes are clamps then. Of opposite directions that of the current counts; where it is unknown the first,
    but none where resistors make a rectifier of them.
    Elsewhere a diode is at work if fixed voltages and sources bias it forward, if it leads a signal into a
    summing node, makes the reference of a mirror, or is the only way on for the current of its net.
    """
    known = dict.fromkeys(candidates(wiring))
    chosen: list[Route] = []
    in_feedback: set[str] = set()
    idle: set[str] = set()
    for amp, group in groupby(loops, key=lambda loop: loop.amplifier):
        routes = _routes(wiring, list(group))
        in_feedback |= {step.part for route in routes for step in route.steps}
        found = _at_work(wiring, routes, levels, known)
        chosen += found
        directions = {_direction(wiring, route) for route in routes}
        if not found and directions in ({1}, {-1}):
            idle.add(amp)
    working = {step.part for route in chosen for step in route.steps}
    at_work = {ref for ref in known if ref in working or (ref not in in_feedback and not is_diode_like(wiring, ref))}
    free = [ref for ref in known if ref not in in_feedback and is_diode_like(wiring, ref)]
    _add_needed(wiring, free, at_work, held, levels)
    return Conduction(tuple(ref for ref in known if ref in at_work), tuple(chosen), frozenset(idle))


def _routes(wiring: Wiring, loops: list[FeedbackLoop]) -> list[Route]:
    """Current-carrying stretches of an amplifier's DC loops, those through the fewest other amplifiers."""
    kinds = [[wiring.design.parts[ref].kind for ref in loop.parts] for loop in loops]
    direct = [(kind.count("op-amp"), loop) for kind, loop in zip(kinds, loops, strict=True) if "capacitor" not in kind]
    fewest = min((count for count, _ in direct), default=0)
    routes = [
        Route(loop.amplifier, loop.nets[-1], tuple(reversed(list(_carrying(wiring, loop.steps)))))
        for count, loop in direct
        if count == fewest
    ]
    return list(dict.fromkeys(routes))


def _carrying(wiring: Wiring, steps: tuple[Step, ...]) -> Iterator[Step]:
    """Walk from the input back to where the current comes from."""
    for step in reversed(steps):
        kind = wiring.design.parts[step.part].kind
        follows = kind in TRANSISTORS and step.exit == "E" and step.entry == "B"
        if kind == "op-amp" or follows:
            return
        yield step
        if kind in TRANSISTORS and step.entry == "B":
            return


def _at_work(wiring: Wiring, routes: list[Route], levels: Mapping[str, float], known: Collection[str]) -> list[Route]:
    """Choose the routes of one amplifier through junctions that conduct."""
    through = [r for r in routes if all(ref in known for ref in _junctions(wiring, r)) and _direction(wiring, r)]
    with_transistor = [r for r in through if not all(is_diode_like(wiring, ref) for ref in _junctions(wiring, r))]
    if with_transistor:
        through = [route for route in with_transistor if not _has_diode(wiring, route)] or with_transistor
    elif any(not _junctions(wiring, route) for route in routes):
        return []
    if not through:
        return []
    own = {step.part for route in routes for step in route.steps}
    wanted = direction(wiring, levels, wiring.point_of[routes[0].net], own)
    first = _direction(wiring, through[0])
    along = [route for route in through if _direction(wiring, route) == first]
    if len(along) == len(through):
        # A transistor of the wrong polarity is a fault and yet the log element; a diode limits in waiting.
        return through if wanted in (first, 0) or _has_transistor(wiring, through) else []
    if wanted == -first:
        return [route for route in through if route not in along]
    if not wanted and not with_transistor and any(len(r.steps) > len(_junctions(wiring, r)) for r in through):
        return []  # a rectifier: either branch conducts in its turn
    return along


def _has_transistor(wiring: Wiring, routes: list[Route]) -> bool:
    return any(wiring.design.parts[s.part].kind in TRANSISTORS for route in routes for s in route.steps)


def _junctions(wiring: Wiring, route: Route) -> list[str]:
    return [s.part for s in route.steps if wiring.design.parts[s.part].kind in ("diode", *TRANSISTORS)]


def _has_diode(wiring: Wiring, route: Route) -> bool:
    return any(is_diode_like(wiring, ref) for ref in _junctions(wiring, route))


def _direction(wiring: Wiring, route: Route) -> int:
    """Tell +1 where a route's junctions take current from the summing node, -1 where they bring it."""
    pins = wiring.design.parts
    signs = {
        1 if current_path(wiring, step.part)[0] == wiring.point_of[pins[step.part].pins[step.exit]] else -1
        for step in route.steps
        if step.part in _junctions(wiring, route)
    }
    return signs.pop() if len(signs) == 1 else 0


def _add_needed(
    wiring: Wiring,
    free: list[str],
    at_work: set[str],
    held: Mapping[str, str],
    levels: Mapping[str, float],
) -> None:
    """Add the diodes outside feedback that conduct; one may be needed only because another is."""
    all_ends = [ends for ref in free if (ends := junction_ends(wiring, ref))]
    single = [ref for ref in free if (ends := junction_ends(wiring, ref)) and ends[::-1] not in all_ends]
    grown = True
    while grown:
        added = {ref for ref in single if ref not in at_work and _is_needed(wiring, ref, at_work, held, levels)}
        at_work |= added
        grown = bool(added)


def _is_needed(
    wiring: Wiring, ref: str, at_work: set[str], held: Mapping[str, str], levels: Mapping[str, float]
) -> bool:
    ends = _series_ends(wiring, ref)
    if ends is None:
        return False
    if forward_voltage(wiring, ends, levels) > LEAST_FORWARD:
        return True
    if ends[0] in levels and ends[1] in levels:
        return False
    if any(here in held and not wiring.is_driven(here) for here in ends):
        return True  # it leads a signal into a summing node
    return _is_mirror(wiring, ref) or any(_goes_on(wiring, ref, point, at_work) for point in current_path(wiring, ref))


def _series_ends(wiring: Wiring, ref: str) -> tuple[str, str] | None:
    """Ends of the string of diodes in series that one belongs to; None where they oppose each other."""
    found = []
    for side, point in enumerate(current_path(wiring, ref)):
        seen = {ref}
        while (others := [r for r in wiring.carriers_at(point) if r not in seen]) and len(others) == 1:
            ends = current_path(wiring, others[0]) if _is_diode(wiring, others[0]) else None
            if ends is None or wiring.is_driven(point):
                break
            if ends[1 - side] != point:
                return None
            seen.add(others[0])
            point = ends[side]
        found.append(point)
    return found[0], found[1]


def _is_diode(wiring: Wiring, ref: str) -> bool:
    return ref in wiring.design.parts and junction_ends(wiring, ref) is not None and is_diode_like(wiring, ref)


def _is_mirror(wiring: Wiring, ref: str) -> bool:
    """Whether a transistor with collector tied to base leads the base of another of its kind."""
    part = wiring.design.parts[ref]
    if part.kind not in TRANSISTORS:
        return False
    others = (r for r, pin in wiring.pins_at.get(wiring.point(ref, "B"), ()) if pin == "B" and r != ref)
    return any(wiring.design.parts[r].kind == part.kind and not _is_diode(wiring, r) for r in others)


def _goes_on(wiring: Wiring, ref: str, point: str, at_work: set[str]) -> bool:
    """Whether a junction is the only way on for the current that one other part brings to a point."""
    if wiring.is_driven(point):
        return False
    others = [other for other in wiring.carriers_at(point) if other != ref]
    if len(others) != 1:
        return False
    return not _is_diode(wiring, others[0]) or others[0] in at_work
