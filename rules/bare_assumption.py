"""Data that verdicts rest on and that nobody has stated."""

from __future__ import annotations

from collections.abc import Iterable

from rulecheck.api import Design, Finding, Part, Remedy, Review, Rule, Severity, join_key

Keys = tuple[str, ...]
CONFORMITY = ("log_range", "early_voltage", "bulk_emitter_resistance")
HEAT = ("theta_ja",)
MOST_NAMED = 4

#: What the verdicts of rules rest on: by rule and kind of part, the keys of the part or its model.
RESTS_ON: dict[str, dict[str, Keys]] = {
    "dissipation": {"transistor": ("junction", *HEAT), "resistor": ("power",)},
    "drive-level": {"transistor": ("log_range", "collector_current")},
    "input-protection": {"op-amp": ("input_current", "input_clamps"), "diode": ("reverse_leakage",)},
    "junction-reverse": {
        "transistor": ("emitter_base_breakdown", "collector_emitter_breakdown", "collector_current"),
        "diode": ("reverse_voltage", "forward_current"), "photodiode": ("reverse_voltage",),
    },
    "loop-stability": {
        "transistor": ("emitter_capacitance", "collector_capacitance"), "photodiode": ("capacitance",),
        "op-amp": ("second_pole", "output_resistance"),
    },
    "matched-pair": {"transistor": ("vbe_mismatch",)},
    "noise": {"op-amp": ("voltage_noise", "current_noise")},
    "output-swing": {"op-amp": ("output_current",)},
    "reference-current": {"transistor": CONFORMITY, "op-amp": ("bias_current",)},
    "shared-temperature": {"transistor": HEAT},
    "signal-current": {"transistor": CONFORMITY, "op-amp": ("bias_current",), "photodiode": ("dark_current",)},
    "supply-rating": {"op-amp": ("supply",)},
    "transfer-law": {"op-amp": ("offset_voltage",), "resistor": ("tolerance", "tempco")},
    "voltage-rating": {"capacitor": ("voltage",)},
}  # fmt: skip


class BareAssumption(Rule):
    """Data that are absent or defaulted, and on which the verdict of a rule in force rests.

    A default stands for "as good as can be": no leakage, no second pole, no limit. A verdict that rests on one
    is an assumption, not a result. Each model is named once, with what it leaves out and the rules that want it;
    parts without a model once a kind. What no requirement of the design asks for is not wanted.
    """

    name = "bare-assumption"
    title = "Verdict that rests on a datum nobody has stated"
    source = "common practice, no source"
    default_severity = Severity.OBSERVATION
    needs = ()

    def check(self, review: Review, settings: object) -> Iterable[Finding]:
        """Gather what is left out by model, or by kind of part where there is none."""
        design = review.design
        wanted = _wanted(design)
        left_out: dict[tuple[str, str], dict[str, list[str]]] = {}
        for ref, part in design.parts.items():
            of = ("model", part.model) if part.model is not None else ("kind", part.kind)
            for key in wanted.get(_kind(part), ()):
                if not _is_stated(design, part, key):
                    left_out.setdefault(of, {}).setdefault(key, []).append(ref)
        for (what, name), keys in left_out.items():
            kind = _kind(design.parts[next(iter(keys.values()))[0]])
            yield _finding(what, name, keys, wanted[kind])


def _kind(part: Part) -> str:
    return "transistor" if part.kind in ("npn", "pnp") else part.kind


def _wanted(design: Design) -> dict[str, dict[str, set[str]]]:
    """Rules in force that rest on each key, by kind of part and key."""
    wanted: dict[str, dict[str, set[str]]] = {}
    for rule, kinds in RESTS_ON.items():
        if design.rule_settings.get(rule, {}).get("enabled", True) and _has_work(design, rule):
            for kind, keys in kinds.items():
                for key in keys:
                    wanted.setdefault(kind, {}).setdefault(key, set()).add(rule)
    return wanted


def _has_work(design: Design, rule: str) -> bool:
    """Whether a rule about requirements has one to judge."""
    requirements = design.requirements.values()
    if rule == "noise":
        return any(requirement.noise is not None for requirement in requirements)
    return rule != "transfer-law" or any(requirement.has_accuracy for requirement in requirements)


def _is_stated(design: Design, part: Part, key: str) -> bool:
    """Whether the part, its model, or what stands for either in the design states a key."""
    if key in part.given:
        return True
    if key == "theta_ja":
        return design.packages[part.package].theta_ja is not None
    if key == "vbe_mismatch":
        groups = [group for group in design.matching.values() if part.ref in group.parts]
        return all(group.vbe_mismatch is not None for group in groups)
    return key == "input_current" and part.input_clamps == "none"


def _finding(what: str, name: str, left_out: dict[str, list[str]], wanted: dict[str, set[str]]) -> Finding:
    refs = list(dict.fromkeys(ref for users in left_out.values() for ref in users))
    rules = sorted(set.union(*(wanted[key] for key in left_out)))
    keys = left_out if what == "model" else [f"{key} of {_listed(users)}" for key, users in left_out.items()]
    who = f"model {name}" if what == "model" else name
    where = f"[models.{name}]" if what == "model" else f"each {name}"
    return Finding(
        f"{who}: {', '.join(keys)} not stated", parts=refs, subject=f"{what} {name}",
        at=join_key(("parts", refs[0], "model") if what == "model" else ("parts", refs[0])),
        consequence=f"the verdicts of {', '.join(rules)} rest on an assumption",
        remedies=[Remedy(f"state {key} in {where}, for {', '.join(sorted(wanted[key]))}") for key in left_out],
    )  # fmt: skip


def _listed(refs: list[str]) -> str:
    """References, the first few by name."""
    more = f" and {len(refs) - MOST_NAMED} more" if len(refs) > MOST_NAMED else ""
    return f"{', '.join(refs[:MOST_NAMED])}{more}"
