"""What a design file names, read leniently, so that one error does not make every name beside it unknown."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any


@dataclass(frozen=True)
class Names:
    """Names by what they stand for.

    Attributes
    ----------
    pins : mapping of net to key path
        All nets named on pins of mounted parts, with the first pin.
    roles : mapping of net to role
        Nets with a table.
    inputs : mapping of str to unit
        Input nets and mounted photodiodes, with the unit of their source value.
    potentiometers : frozenset of str
        Mounted ones.
    parts : mapping of str to kind
        Unmounted ones too.
    packages : frozenset of str
    constants : mapping of str to tuple of str
        Names of constants by requirement.
    """

    pins: Mapping[str, tuple[str, ...]]
    roles: Mapping[str, object]
    inputs: Mapping[str, str]
    potentiometers: frozenset[str]
    parts: Mapping[str, object]
    packages: frozenset[str]
    constants: Mapping[str, tuple[str, ...]]

    @cached_property
    def nets(self) -> Mapping[str, None]:
        """All nets, those with a table first; a mapping only to find them fast."""
        return dict.fromkeys([*self.roles, *self.pins])

    def with_role(self, role: str) -> list[str]:
        """Nets of a role."""
        return [net for net, found in self.roles.items() if found == role]

    @property
    def requirements(self) -> Mapping[str, tuple[str, ...]]:
        """All requirements."""
        return self.constants

    @cached_property
    def in_laws(self) -> list[str]:
        """Names that a law may use besides its constants."""
        return [*self.inputs, *self.with_role("reference"), *self.potentiometers, "ambient"]


def find_names(data: Mapping[str, Any]) -> Names:
    """Names in the parsed tables of a design."""
    nets, parts = entries(data, "nets"), entries(data, "parts")
    mounted = {ref: part for ref, part in parts.items() if part.get("mounted", True) is not False}
    inputs = {net: "A" if t.get("drive") == "current" else "V" for net, t in nets.items() if t.get("role") == "input"}
    inputs |= {ref: "A" for ref, part in mounted.items() if part.get("kind") == "photodiode"}
    packages = [part.get("package", ref) for ref, part in parts.items()]
    return Names(
        pins=_first_pins(mounted),
        roles={net: table.get("role") for net, table in nets.items()},
        inputs=inputs,
        potentiometers=frozenset(ref for ref, part in mounted.items() if part.get("kind") == "potentiometer"),
        parts={ref: part.get("kind") for ref, part in parts.items()},
        packages=frozenset([*entries(data, "packages"), *(p for p in packages if isinstance(p, str))]),
        constants={name: tuple(_table(table, "constants")) for name, table in entries(data, "requirements").items()},
    )


def entries(data: Mapping[str, Any], key: str) -> dict[str, Mapping[str, Any]]:
    """Those entries of a table that are tables."""
    return {name: entry for name, entry in _table(data, key).items() if isinstance(entry, Mapping)}


def _table(data: Mapping[str, Any], key: str) -> Mapping[str, Any]:
    table = data.get(key)
    return table if isinstance(table, Mapping) else {}


def _first_pins(parts: Mapping[str, Mapping[str, Any]]) -> dict[str, tuple[str, ...]]:
    found: dict[str, tuple[str, ...]] = {}
    for ref, part in parts.items():
        for pin, net in _pins(part.get("pins")):
            if isinstance(net, str):
                found.setdefault(net, ("parts", ref, "pins", pin))
    return found


def _pins(pins: object) -> Iterator[tuple[str, object]]:
    if isinstance(pins, Mapping):
        yield from pins.items()
    elif isinstance(pins, list):
        yield from ((str(index), net) for index, net in enumerate(pins))
