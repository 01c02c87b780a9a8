"""Pairs of compared junctions: which are matched, in one package, and at one temperature."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Literal

import networkx as nx

from rulecheck.api import (
    Add,
    Design,
    Edit,
    Evidence,
    JunctionLoop,
    Part,
    Remove,
    Review,
    Set,
    format_quantity,
    join_key,
)

from ._words import percent

Pair = tuple[str, str]
Fault = Literal["polarity", "models", "packages", "unmatched", "unknown"]
GRAVITY: dict[Fault | None, int] = {None: 0, "unknown": 1, "unmatched": 2, "packages": 2, "models": 3, "polarity": 4}
LINK = "20 K/W"


def chosen_pairs(review: Review, loop: JunctionLoop) -> list[Pair]:
    """Pairs of the soundest pairing of a loop; none where its junctions do not cancel."""
    design = review.design

    def gravity(pairing: Iterable[Pair]) -> tuple[int, int]:
        split = sum(not is_together(design, pair) for pair in pairing)
        return sum(GRAVITY[fault_of(design, pair)] for pair in pairing), split

    return list(dict.fromkeys(min(loop.pairings, key=gravity, default=())))


def fault_of(design: Design, pair: Pair) -> Fault | None:
    """What keeps two junctions from being a matched pair; None where nothing does."""
    one, other = (design.parts[ref] for ref in pair)
    if one.kind != other.kind:
        return "polarity"
    if _make(one) != _make(other):
        return "models"
    group, limit = group_of(design, pair), mismatch_key(design, pair)
    if one.package != other.package:
        # A mismatch that the group states was measured; that of a model holds on one die only.
        selected = group is not None and design.matching[group].vbe_mismatch is not None
        return None if selected else "packages"
    if group is None and not (one.parameters.get("monolithic") and other.parameters.get("monolithic")):
        return "unmatched"
    return "unknown" if limit is None else None


def _make(part: Part) -> object:
    return part.model if part.model is not None else part.saturation_current


def group_of(design: Design, pair: Pair) -> str | None:
    """The matching group that both parts are in."""
    return next((name for name, group in design.matching.items() if set(pair) <= set(group.parts)), None)


def mismatch_key(design: Design, pair: Pair) -> str | None:
    """Key that states the mismatch of a pair; None where nothing does."""
    group = group_of(design, pair)
    if group is not None and design.matching[group].vbe_mismatch is not None:
        return join_key(("matching", group, "vbe_mismatch"))
    known = design.parts[pair[1]].parameters.get("vbe_mismatch") is not None
    return join_key(("parts", pair[1], "vbe_mismatch")) if known else None


def is_together(design: Design, pair: Pair) -> bool:
    """Whether two parts are in one package, or in ovens of one temperature."""
    one, other = (design.packages[design.parts[ref].package] for ref in pair)
    return one is other or (one.held_temperature is not None and one.held_temperature == other.held_temperature)


def is_linked(design: Design, pair: Pair) -> bool:
    """Whether thermal links join the packages of two parts."""
    return are_linked(design, (design.parts[pair[0]].package, design.parts[pair[1]].package))


def are_linked(design: Design, packages: Pair) -> bool:
    """Whether thermal links join two packages, over others too."""
    links = nx.Graph([entry.between for entry in design.thermal_links])
    one, other = packages
    return one in links and other in links and bool(nx.has_path(links, one, other))


def one_package(design: Design, pair: Pair) -> list[Edit]:
    """Edits that bring two parts into one package, the fuller one, or a new one if neither has other parts."""
    packages = [design.packages[design.parts[ref].package] for ref in pair]
    if packages[0] is packages[1]:
        return []
    home = max(packages, key=lambda package: (package.name not in design.parts, len(package.parts)))
    name = home.name if home.name not in design.parts else free_name(design.packages, "M")
    moved = [ref for ref in pair if design.parts[ref].package != name]
    edits: list[Edit] = [Set(join_key(("parts", ref, "package")), name) for ref in moved]
    return edits + _moved_links(design, {p.name for p in packages if len(p.parts) == 1} - {name}, name)


def _moved_links(design: Design, emptied: set[str], home: str) -> list[Edit]:
    """Edits that lead thermal links of emptied packages to the one their parts are in now."""
    edits: list[Edit] = []
    for index, entry in reversed(list(enumerate(design.thermal_links))):
        ends = [home if package in emptied else package for package in entry.between]
        if ends[0] == ends[1]:
            edits.append(Remove(join_key(("thermal_links", str(index)))))
        elif ends != list(entry.between):
            edits.append(Set(join_key(("thermal_links", str(index), "between")), ends))
    return edits


def link(packages: Iterable[str]) -> Add:
    """Edit that couples two packages thermally."""
    return Add("thermal_links", {"between": list(packages), "theta": LINK})


def free_name(names: Iterable[str], stem: str) -> str:
    """The first of stem1, stem2 ... that is not taken."""
    taken = set(names)
    return next(name for name in numbered(stem) if name not in taken)


def numbered(stem: str) -> Iterator[str]:
    """Names stem1, stem2, and so on."""
    number = 1
    while True:
        yield f"{stem}{number}"
        number += 1


def cost_words(output: str, error: float, reading: float) -> str:
    """What a change does to an output, in its units and of its reading."""
    share = f", {percent(error / reading)} of reading" if reading else ""
    return f"{output} moves by {format_quantity(abs(error), 'V', 3)}{share}"


def cost_evidence(ratio: float, over: object, basis: str) -> Evidence:
    """The error over its share as evidence."""
    return Evidence("error over its share", ratio, "1", 1.0, "<=", over=over, basis=basis)
