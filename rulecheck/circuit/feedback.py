"""Feedback loops: the ways from an amplifier's output back to its inputs; and the summing nodes they hold."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Literal

from .surrogate import Feedback
from .wiring import TRANSISTORS, Wiring, ends, has_pins

LONGEST_PATH = 16  # parts; the longest sensible loop through two amplifiers and their log transistors has ten
MOST_PATHS = 64  # an amplifier and input
MOST_STEPS = 20_000  # an amplifier
TWO_TERMINAL = ("resistor", "capacitor", "diode", "voltage-source")

Input = Literal["IN-", "IN+"]


@dataclass(frozen=True, slots=True)
class Step:
    """One part of a path, entered at one pin and left at another."""

    part: str
    entry: str
    exit: str


@dataclass(frozen=True, slots=True)
class FeedbackLoop:
    """One way from an amplifier's output to one of its inputs.

    Attributes
    ----------
    amplifier : str
    input : str
        ``IN-`` or ``IN+``.
    parts : tuple of str
        Parts on the way from the output; empty where the input stands on the output's net.
    nets : tuple of str
        Nets on the way, the output's first and the input's last.
    steps : tuple of Step
        The parts with the pins they are entered and left at.
    """

    amplifier: str
    input: Input
    parts: tuple[str, ...]
    nets: tuple[str, ...]
    steps: tuple[Step, ...] = field(default=(), repr=False)


@dataclass(frozen=True, slots=True)
class SummingNode:
    """A net at an amplifier's input, held at the level of the other input by negative feedback.

    Attributes
    ----------
    net : str
        The input's net, or the one where the currents meet, if a resistor without current lies between.
    amplifier, input : str
    level_net : str
        Net of the other input.
    """

    net: str
    amplifier: str
    input: Input
    level_net: str


def summing_nodes(wiring: Wiring, feedback: Iterable[Feedback]) -> tuple[SummingNode, ...]:
    """Nets that negative feedback holds, in the order of the amplifiers in the file."""
    found = []
    for loop in feedback:
        if loop.sign <= 0:
            continue
        pins = wiring.design.parts[loop.amplifier].pins
        held: Input = "IN-" if loop.input == "IN-" else "IN+"
        level = pins["IN+" if held == "IN-" else "IN-"]
        point = wiring.point_of[pins[held]]
        if point in wiring.sourced:
            continue
        joined = [net for net in wiring.nets_at[point] if net != pins[held] and wiring.passes_current(net)]
        for net in (pins[held], *joined):
            found.append(SummingNode(net=net, amplifier=loop.amplifier, input=held, level_net=level))
    return tuple(found)


def feedback_loops(wiring: Wiring, held: Mapping[str, str]) -> tuple[FeedbackLoop, ...]:
    """Loops of all amplifiers, shortest first for each, the amplifiers in the order of the file.

    Parameters
    ----------
    wiring : Wiring
    held : mapping of point to amplifier
        Points that negative feedback holds. A signal goes on from there only through that amplifier.

    Returns
    -------
    tuple of FeedbackLoop

    Notes
    -----
    A path ends at nets of ground, supplies, references and inputs, and at outputs of other amplifiers, which
    nothing but that amplifier moves. It takes a transistor from base to collector or emitter and from emitter
    to collector. The search is breadth first and bounded in length and number.
    """
    return tuple(loop for amp in wiring.amplifiers() for loop in _Search(wiring, held, amp).run())


class _Search:
    """Breadth-first search for the loops of one amplifier."""

    def __init__(self, wiring: Wiring, held: Mapping[str, str], amplifier: str) -> None:
        self.wiring = wiring
        self.held = held
        self.amplifier = amplifier
        self.pins = wiring.design.parts[amplifier].pins

    def run(self) -> Iterator[FeedbackLoop]:
        start = self.pins["OUT"]
        if self.wiring.point_of[start] in self.wiring.sourced:
            return
        queue: deque[tuple[tuple[str, ...], tuple[Step, ...]]] = deque([((start,), ())])
        counts: dict[Input, int] = {"IN-": 0, "IN+": 0}
        for _ in range(MOST_STEPS):
            if not queue:
                return
            nets, steps = queue.popleft()
            for pin in counts:
                arrived = nets[-1] == self.pins[pin] and self.wiring.point_of[nets[-1]] not in self.wiring.sourced
                if arrived and counts[pin] < MOST_PATHS:
                    counts[pin] += 1
                    yield FeedbackLoop(self.amplifier, pin, tuple(dict.fromkeys(s.part for s in steps)), nets, steps)
            if len(steps) < LONGEST_PATH and (len(nets) == 1 or self._passes(nets[-1], steps)):
                queue.extend(self._longer(nets, steps))

    def _passes(self, net: str, steps: tuple[Step, ...]) -> bool:
        """Whether a signal goes on from a net that it has reached."""
        point = self.wiring.point_of[net]
        if point in self.wiring.sourced:
            return False
        return steps[-1].exit == "OUT" or not self.wiring.is_driven(point) or self._is_along(steps[-1])

    def _longer(
        self, nets: tuple[str, ...], steps: tuple[Step, ...]
    ) -> Iterator[tuple[tuple[str, ...], tuple[Step, ...]]]:
        holder = self.held.get(self.wiring.point_of[nets[-1]]) if len(nets) > 1 else None
        through = bool(steps) and steps[-1].exit == "OUT"
        for step in self._steps_from(nets[-1]):
            if holder is not None and not through and step.part != holder and not self._is_along(step):
                continue
            net = self.wiring.design.parts[step.part].pins[step.exit]
            if net not in nets and all(_way(step) != _way(other) for other in steps):
                yield (*nets, net), (*steps, step)

    def _is_along(self, step: Step) -> bool:
        """Whether a step stays on its point, through a link or a resistor without current."""
        return self.wiring.point(step.part, step.entry) == self.wiring.point(step.part, step.exit)

    def _steps_from(self, net: str) -> Iterator[Step]:
        for ref, pin in self.wiring.pins_on.get(net, ()):
            if ref == self.amplifier:
                continue
            for exit_pin in exits(self.wiring, ref, pin):
                yield Step(ref, pin, exit_pin)


def _way(step: Step) -> tuple[str, ...]:
    """What a path takes once: a part, of a potentiometer the half."""
    is_half = "WIPER" in (step.entry, step.exit)
    return (step.part, *sorted((step.entry, step.exit))) if is_half else (step.part,)


def exits(wiring: Wiring, ref: str, pin: str) -> tuple[str, ...]:
    """Pins of a part at which a signal that enters at `pin` comes out."""
    part = wiring.design.parts[ref]
    if part.kind in TWO_TERMINAL:
        return tuple(other for other in part.pins if other != pin) if ends(part) else ()
    if part.kind == "potentiometer":
        if pin == "WIPER" or "WIPER" not in part.pins:
            return tuple(other for other in part.pins if other != pin)
        return ("WIPER",)
    if part.kind in TRANSISTORS and has_pins(part, "C", "B", "E"):
        tied = part.pins["C"] == part.pins["B"]
        ways = {"C": ("E",), "E": ("C",)} if tied else {"B": ("C", "E"), "E": ("C",)}
        return ways.get(pin, ())
    if part.kind == "op-amp" and pin in ("IN+", "IN-") and "OUT" in part.pins:
        return ("OUT",)
    return ()
