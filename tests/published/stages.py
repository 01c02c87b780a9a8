"""The stages that log-domain circuits are made of, as tables of parts for the builder."""

from __future__ import annotations

from .builder import amplifier, resistor, transistor


def log_pair(common="GND", output="L", low="VN", high="VP", **first):
    """Two log transistors with joined emitters: ``V(L) = V_T ln(I(S1)/I(S2))`` above the common net.

    Currents come in at S1 and S2; `first` are parameters of the first transistor; the amplifier of the second
    drives `output`, from which a divider may lead to L.
    """
    return {
        "Q1": transistor("S1", "L", "T", **first),
        "U1": amplifier(common, "S1", "T", high=high, low=low),
        "Q2": transistor("S2", common, "T"),
        "U2": amplifier(common, "S2", output, high=high, low=low),
    }


def antilog_pair(base, scale, **last):
    """Two antilog transistors: ``V(OUT) = scale · I(S3) exp(V(base)/V_T)``; `last` is for the second."""
    return {
        "Q3": transistor("S3", "GND", "T2"),
        "U3": amplifier("GND", "S3", "T2"),
        "Q4": transistor("S4", base, "T2", **last),
        "U4": amplifier("GND", "S4", "OUT"),
        "R4": resistor("S4", "OUT", scale),
    }


def four_junctions(scale, **each):
    """The stacked multiplier and divider: ``V(OUT) = scale · I(S1) I(S2)/I(S3)``."""
    return {
        "Q1": transistor("S1", "GND", "A", **each),
        "U1": amplifier("GND", "S1", "A"),
        "Q2": transistor("S2", "A", "N", **each),
        "U2": amplifier("GND", "S2", "N"),
        "Q3": transistor("S3", "GND", "B", **each),
        "U3": amplifier("GND", "S3", "B"),
        "Q4": transistor("S4", "B", "N", **each),
        "U4": amplifier("GND", "S4", "OUT"),
        "R4": resistor("S4", "OUT", scale),
    }


def divider(top, tap, upper, lower, bottom="GND"):
    """Two resistors with a tap."""
    return {"RU": resistor(top, tap, upper), "RL": resistor(tap, bottom, lower)}
