"""The circuit around a finding as a wiring diagram: a vertical line a net, a row a part, a sign where they join.

Wires cross as ┼ and join only where the name of a pin stands, so that the stage can be drawn again from it.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from rulecheck.report.layout import quantity

if TYPE_CHECKING:
    from rulecheck.design.model import Design, Part

#: Nets that every stage shares; they are named at the pin instead of drawn, so that lines stay few.
SHARED = ("ground", "supply")
VALUES = (("resistor", "value", "ohm"), ("capacitor", "value", "F"), ("potentiometer", "value", "ohm"))
GAP = 2


@dataclass(frozen=True, slots=True)
class Row:
    """A part in the diagram: its words, the line of pins, and pins on nets that are not drawn."""

    ref: str
    head: str
    line: str
    elsewhere: str
    culprit: bool


@dataclass(frozen=True, slots=True)
class Diagram:
    """A wiring diagram: lines with the name of a net above its wire, and whether it is of the finding; the parts."""

    heads: tuple[tuple[str, bool], ...]
    rows: tuple[Row, ...]


def around(design: Design, parts: Iterable[str], nets: Iterable[str]) -> tuple[list[str], list[str]]:
    """Parts and nets within two steps of a finding, the nearest first.

    Parameters
    ----------
    design : Design
    parts, nets : iterable of str
        Of the finding. The way does not lead through ground and supplies.

    Returns
    -------
    list of str, list of str
        References of parts and names of nets; nets that only one of the parts is at are left out.
    """
    near = [ref for ref in dict.fromkeys(parts) if ref in design.parts]
    lines = [net for net in dict.fromkeys(nets) if net in design.nets and not _is_shared(design, net)]
    if not near:
        near = [ref for ref, part in design.parts.items() if set(part.pins.values()) & set(lines)]
    lines = list(dict.fromkeys(lines + [n for r in near for n in _own(design, r)]))
    beyond = [ref for ref, part in design.parts.items() if set(part.pins.values()) & set(lines)]
    refs = list(dict.fromkeys(near + beyond))
    outer = [net for ref in refs for net in _own(design, ref) if net not in lines]
    shared = [net for net in dict.fromkeys(outer) if sum(net in design.parts[r].pins.values() for r in refs) > 1]
    return refs, lines + shared


def diagram(design: Design, parts: Sequence[str], nets: Sequence[str]) -> Diagram:
    """The wiring diagram around a finding.

    Parameters
    ----------
    design : Design
    parts, nets : sequence of str
        Of the finding.
    """
    refs, drawn = around(design, parts, nets)
    refs = [*refs[: len(set(parts) & set(refs))], *_by_nets(design, refs[len(set(parts) & set(refs)) :], drawn)]
    width = max((len(_pins_at(design.parts[r], n)) for r in refs for n in drawn), default=1) + GAP
    heads = {ref: _words(design.parts[ref]) for ref in refs}
    margin = max(map(len, heads.values()), default=0)
    rows = []
    for ref in refs:
        part = design.parts[ref]
        away = [f"{pin} {net}" if not pin.isdigit() else net for pin, net in part.pins.items() if net not in drawn]
        rows.append(Row(ref, heads[ref].ljust(margin), _line(part, drawn, width), ", ".join(away), ref in parts))
    names = zip(_heads(drawn, width, margin), (net in nets for net in drawn), strict=True)
    return Diagram(tuple(names), tuple(rows))


def _is_shared(design: Design, net: str) -> bool:
    return design.nets[net].role in SHARED


def _own(design: Design, ref: str) -> list[str]:
    return [net for net in design.parts[ref].pins.values() if not _is_shared(design, net)]


def _by_nets(design: Design, refs: Sequence[str], drawn: Sequence[str]) -> list[str]:
    """Parts in the order of the nets they are at, so that what belongs together stands together."""

    def place(ref: str) -> list[int]:
        return sorted(drawn.index(net) for net in design.parts[ref].pins.values() if net in drawn)

    return sorted(refs, key=place)


def _words(part: Part) -> str:
    value = next((quantity(getattr(part, name).typ, unit) for kind, name, unit in VALUES if part.kind == kind), "")
    return f"{part.ref} {value or part.model or part.kind}".replace("ohm", "Ω")


def _pins_at(part: Part, net: str) -> str:
    """Pins of a part at a net, in brackets; a dot where pins have no names."""
    pins = [pin for pin, other in part.pins.items() if other == net]
    if not pins:
        return ""
    return "●" if all(pin.isdigit() for pin in pins) else "[" + ",".join(pins) + "]"


def _line(part: Part, drawn: Sequence[str], width: int) -> str:
    """The row of a part across the wires of all nets."""
    at = [number for number, net in enumerate(drawn) if net in part.pins.values()]
    text = ""
    for number, net in enumerate(drawn):
        across = bool(at) and at[0] < number < at[-1]
        sign = _pins_at(part, net) or ("┼" if across else "│")
        left = "─" if at and at[0] < number <= at[-1] else " "
        right = "─" if at and at[0] <= number < at[-1] else " "
        before = (width - len(sign)) // 2
        text += left * before + sign + right * (width - before - len(sign))
    return text


def _heads(drawn: Sequence[str], width: int, margin: int) -> list[str]:
    """Names of nets above their wires: each on a line of its own where the name would meet another wire."""
    lines = []
    for number, net in enumerate(drawn):
        centre = margin + 1 + number * width + (width - 1) // 2
        wires = [margin + 1 + n * width + (width - 1) // 2 for n in range(number)]
        line = [" "] * centre
        for wire in wires:
            line[wire] = "│"
        lines.append("".join(line) + f"┌ {net}")
    return lines
