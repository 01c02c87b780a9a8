"""Edits of the design file that remedies are made of, with references and net names that are still free."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence

from rulecheck.api import Add, Design, Edit, Move, Set, format_quantity, join_key, split_key

DIGITS = 5
"""Of a value in an edit: E192 has three, and a value that is not preferred keeps what it says."""


def next_reference(design: Design, prefix: str, taken: Collection[str] = ()) -> str:
    """Reference after the last one of a letter, ``C7`` where the design goes up to C6.

    Parameters
    ----------
    design : Design
    prefix : str
        Letter of the kind: ``R``, ``C``, ``D``, ``Q``, ``U``.
    taken : collection of str
        References that edits of the same remedy add already.
    """
    names = {*design.parts, *design.unmounted, *taken}
    numbers = [int(n[len(prefix) :]) for n in names if n.startswith(prefix) and n[len(prefix) :].isdecimal()]
    return f"{prefix}{max(numbers, default=0) + 1}"


def new_net(design: Design, name: str, taken: Collection[str] = ()) -> str:
    """Name of a net that does not exist yet: `name`, or `name` with a number behind it."""
    names = {*design.nets, *design.parts, "ambient", *taken}
    numbered = (f"{name}_{number}" for number in range(2, len(names) + 3))
    return name if name not in names else next(n for n in numbered if n not in names)


def added_reference(edit: Edit) -> str:
    """Reference of the part that an edit adds, empty where it adds none."""
    path = split_key(edit.key)
    return path[1] if isinstance(edit, Add) and len(path) == 2 and path[0] == "parts" else ""


def add_part(design: Design, prefix: str, table: Mapping[str, object], before: Sequence[Edit] = ()) -> Add:
    """Add a part under the next free reference.

    Parameters
    ----------
    design : Design
    prefix : str
        Letter of its reference.
    table : mapping
        The part as the file has it.
    before : sequence of Edit
        Edits of the same remedy, whose references are taken.
    """
    name = next_reference(design, prefix, [added_reference(edit) for edit in before])
    return Add(join_key(("parts", name)), table)


def add_capacitor(
    design: Design, farad: float, nets: tuple[str, str], before: Sequence[Edit] = (), *,
    tolerance: str = "5 %", rating: float | None = None,
) -> Add:  # fmt: skip
    """Add a capacitor between two nets; `rating` [V] is its voltage rating."""
    table: dict[str, object] = {"kind": "capacitor", "value": quantity(farad, "F"), "tolerance": tolerance}
    if rating is not None:
        table["voltage"] = quantity(rating, "V")
    return add_part(design, "C", table | {"pins": list(nets)}, before)


def add_resistor(
    design: Design, ohm: float, nets: tuple[str, str], before: Sequence[Edit] = (), *,
    tolerance: str = "1 %", tempco: str = "100 ppm/K", package: str | None = None,
) -> Add:  # fmt: skip
    """Add a resistor between two nets."""
    table: dict[str, object] = {
        "kind": "resistor", "value": quantity(ohm, "ohm"), "tolerance": tolerance, "tempco": tempco,
        "pins": list(nets),
    }  # fmt: skip
    return add_part(design, "R", table if package is None else table | {"package": package}, before)


def add_diode(design: Design, model: str, anode: str, cathode: str, before: Sequence[Edit] = ()) -> Add:
    """Add a diode of a model from the net `anode` to the net `cathode`."""
    return add_part(design, "D", {"kind": "diode", "model": model, "pins": {"A": anode, "K": cathode}}, before)


def add_in_series(
    design: Design, ohm: float, ref: str, pin: str, before: Sequence[Edit] = (), *, tolerance: str = "1 %"
) -> list[Edit]:
    """Put a resistor between a pin and its net: the pin moves to a net of its own."""
    net = design.parts[ref].pins[pin]
    own = new_net(design, f"{net}_{ref}", [edit.to for edit in before if isinstance(edit, Move)])
    return [move(ref, pin, own), add_resistor(design, ohm, (net, own), before, tolerance=tolerance)]


def move(ref: str, pin: str, net: str) -> Move:
    """Connect a pin to another net."""
    return Move(join_key(("parts", ref, "pins", pin)), net)


def swap_pins(design: Design, ref: str, first: str, second: str) -> list[Edit]:
    """Exchange the nets of two pins."""
    pins = design.parts[ref].pins
    return [move(ref, first, pins[second]), move(ref, second, pins[first])]


def set_parameter(ref: str, name: str, value: object) -> Set:
    """Give a part's key a value as the file has it."""
    return Set(join_key(("parts", ref, name)), value)


def quantity(value: float, unit: str) -> str:
    """Text of a value for the file."""
    return format_quantity(value, unit, DIGITS)
