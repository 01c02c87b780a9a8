"""Compared junctions: which clockwise junction of a loop stands against which anticlockwise one."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import islice

BALANCE = 0.05  # of the weight: cancelling to within it counts as cancelling; E24 ratios come closer
MOST_TRIED = 5_000

Pairing = tuple[tuple[str, str], ...]


@dataclass(frozen=True, slots=True)
class Junction:
    """A junction of a loop.

    Attributes
    ----------
    part : str
    turn : int
        +1 clockwise, -1 anticlockwise; the first of a loop in the file is clockwise.
    weight : float
        What its voltage counts in the loop for, from the resistor ratios, the first junction's being 1.
    """

    part: str
    turn: int
    weight: float


def is_balanced(junctions: Sequence[Junction]) -> bool:
    """Whether clockwise and anticlockwise weights cancel, to within what resistor values come in."""
    clockwise = sum(j.weight for j in junctions if j.turn > 0)
    anticlockwise = sum(j.weight for j in junctions if j.turn < 0)
    return min(clockwise, anticlockwise) > 0 and abs(clockwise - anticlockwise) <= BALANCE * max(
        clockwise, anticlockwise
    )


def complete_pairings(junctions: Sequence[Junction]) -> tuple[Pairing, ...]:
    """All ways to set clockwise junctions against anticlockwise ones in the fewest pairs.

    A junction of double weight stands against two of single weight. There are none where the weights do not
    cancel.

    Parameters
    ----------
    junctions : sequence of Junction

    Returns
    -------
    tuple of pairings
        Each a tuple of (clockwise part, anticlockwise part), in the order of the loop.
    """
    if not is_balanced(junctions):
        return ()
    clockwise = tuple((j.part, j.weight) for j in junctions if j.turn > 0)
    anticlockwise = tuple((j.part, j.weight) for j in junctions if j.turn < 0)
    nothing = BALANCE * min(weight for _, weight in clockwise + anticlockwise)
    place = {j.part: i for i, j in enumerate(junctions)}
    tried = islice(_spent(clockwise, anticlockwise, nothing), MOST_TRIED)
    found = dict.fromkeys(tuple(sorted(pairs, key=lambda p: (place[p[0]], place[p[1]]))) for pairs in tried)
    fewest = min(map(len, found), default=0)
    return tuple(pairing for pairing in found if len(pairing) == fewest)


def _spent(
    clockwise: tuple[tuple[str, float], ...], anticlockwise: tuple[tuple[str, float], ...], nothing: float
) -> Iterator[Pairing]:
    """Ways to spend the weights on each other, equal weights first."""
    if not clockwise or not anticlockwise:
        yield ()
        return
    part, weight = clockwise[0]
    for index in sorted(range(len(anticlockwise)), key=lambda i: abs(anticlockwise[i][1] - weight)):
        other, other_weight = anticlockwise[index]
        shared = min(weight, other_weight)
        left = ((part, weight - shared), *clockwise[1:])
        right = (*anticlockwise[:index], (other, other_weight - shared), *anticlockwise[index + 1 :])
        rests = [tuple((p, w) for p, w in side if w > nothing) for side in (left, right)]
        for pairing in _spent(rests[0], rests[1], nothing):
            yield ((part, other), *pairing)
