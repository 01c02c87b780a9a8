"""What a junction loop says of its currents, in words."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from rulecheck.units import format_quantity

from .pairings import Junction, is_balanced

DIGITS = 3


def product_law(
    junctions: Sequence[Junction],
    ideality: Mapping[str, float],
    rest: Mapping[str, float],
    units: Mapping[str, str],
) -> str:
    """Law of a closed loop, such as ``I(Q1)·I(Q4)^0.333 = I(Q2)·I(Q3)^0.333``.

    Parameters
    ----------
    junctions : sequence of Junction
    ideality : mapping of part to float
        Emission coefficients.
    rest : mapping of term to float
        Voltages that the junction voltages add up to, clockwise, as coefficients of terms.
    units : mapping of term to str
        Unit of each coefficient, ``1`` or ``ohm``.
    """
    if not rest:
        scale = ideality[junctions[0].part]
        return f"{_product(junctions, 1, ideality, scale)} = {_product(junctions, -1, ideality, scale)}"
    left, right = _product(junctions, 1, ideality), _product(junctions, -1, ideality)
    drive = _sum(rest, units, lead="")
    factor = f"exp(q/kT·{drive})" if len(rest) == 1 and min(rest.values()) > 0 else f"exp(q/kT·({drive}))"
    return f"{left} = {factor}" if right == "1" else f"{left} = {right}·{factor}"


def output_law(
    output: str,
    gain: float,
    junctions: Sequence[Junction],
    ideality: Mapping[str, float],
    rest: Mapping[str, float],
    units: Mapping[str, str],
) -> str:
    """Law of a log output, such as ``VOUT = 16.9·kT/q·ln(I(Q2)/I(Q1))``.

    Parameters
    ----------
    output : str
    gain : float
        Volts at the output per volt across the first junction.
    junctions, ideality, units
        As in `product_law`.
    rest : mapping of term to float
        What else adds to the output.
    """
    scale = ideality[junctions[0].part]
    slope = _figure(abs(gain) * scale)
    size = f"{slope}·" if slope != "1" else ""
    over = 1 if gain > 0 else -1
    above, below = _product(junctions, over, ideality, scale), _product(junctions, -over, ideality, scale)
    sign = "−" if above == "1" else ""
    ratio = f"{above}/{_grouped(below)}" if "1" not in (above, below) else below if above == "1" else above
    return f"{output} = {sign}{size}kT/q·ln({ratio}){_sum(rest, units, lead=' ')}"


def _grouped(product: str) -> str:
    return f"({product})" if "·" in product or "/" in product else product


def _product(junctions: Sequence[Junction], turn: int, ideality: Mapping[str, float], scale: float = 1.0) -> str:
    """Product of the currents of one turn; over the saturation currents where these do not cancel."""
    cancels = is_balanced(junctions)
    factors = []
    for junction in junctions:
        if junction.turn == turn:
            ref, exponent = junction.part, _figure(junction.weight * ideality[junction.part] / scale)
            current = f"I({ref})" if cancels else f"I({ref})/I_S({ref})"
            raised = f"{current}^{exponent}" if cancels else f"({current})^{exponent}"
            factors.append(current if exponent == "1" else raised)
    return "·".join(factors) or "1"


def _sum(terms: Mapping[str, float], units: Mapping[str, str], lead: str) -> str:
    """Terms with their signs; `lead` stands before each sign, and an empty one leaves out a leading plus."""
    text = ""
    for term, value in terms.items():
        sign = "+" if value > 0 else "−"
        size = format_quantity(abs(value), units[term], DIGITS)
        factor = term if size == "1" and units[term] == "1" else f"{size}·{term}"
        if not text and not lead:
            text = factor if value > 0 else f"−{factor}"
        else:
            text += f" {sign} {factor}"
    return text


def _figure(value: float) -> str:
    return format_quantity(value, "1", DIGITS)
