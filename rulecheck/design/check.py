"""What holds between the tables of a design: every name means something, every part has what it must."""

from __future__ import annotations

from collections.abc import Iterable

from rulecheck.design.catalogue import Catalogue
from rulecheck.design.fields import did_you_mean
from rulecheck.design.merge import merged
from rulecheck.design.model import Model
from rulecheck.design.names import Names
from rulecheck.design.nets import InputTable, Reference
from rulecheck.design.parts import CurrentSource, Modelled, Potentiometer, VoltageSource
from rulecheck.design.read import Tables
from rulecheck.design.source import Problems

TRANSISTORS = ("npn", "pnp")
MOST_LISTED = 12  # names that a message lists; of more it names the nearest only


def check_tables(tables: Tables, names: Names, catalogue: Catalogue, problems: Problems) -> None:
    """Add what does not hold between the tables to `problems`."""
    _check_nets(tables, names, problems)
    _check_namespace(names, problems)
    _check_models(tables, catalogue, problems)
    _check_parts(tables, names, problems)
    _check_matching(tables, names, problems)
    _check_links(tables, names, problems)
    _check_concessions(tables, problems)


def unknown(word: str, allowed: Iterable[str], what: str) -> tuple[str, str]:
    """Message and hint for a name that means nothing."""
    words = list(allowed)
    nearest = did_you_mean(word, words)
    listed = f"there are {', '.join(words)}" if 0 < len(words) <= MOST_LISTED else ""
    return f"there is no {what} {word!r}", " ".join(filter(None, [nearest, listed or ("" if words else "none at all")]))


def _check_nets(tables: Tables, names: Names, problems: Problems) -> None:
    if not names.with_role("ground"):
        message = "no net has the role of ground, to which all voltages count"
        problems.add(["nets"], message, 'GND = { role = "ground" } under [nets]')
    for name, net in tables.nets.items():
        if isinstance(net, Reference) and net.source is not None:
            _check_supply(net.source, ("nets", name, "from"), names, problems)
        if isinstance(net, InputTable):
            _check_spacing(name, net, problems)


def _check_spacing(name: str, net: InputTable, problems: Problems) -> None:
    low, high = net.sound("range") or (1.0, 1.0)
    if net.spacing == "log" and low * high <= 0:
        message = "'log' needs a range whose ends have one sign and are not zero"
        problems.add(["nets", name, "spacing"], message, "'linear' fits any range")


def _check_supply(word: str, path: tuple[str, ...], names: Names, problems: Problems) -> None:
    supplies = names.with_role("supply")
    if word not in supplies:
        problems.add(path, *unknown(word, supplies, "supply"))


def _check_namespace(names: Names, problems: Problems) -> None:
    """Nets, photodiodes, potentiometers and the ambient temperature are told apart by name alone."""
    nets = set(names.nets)
    for ref, kind in names.parts.items():
        if kind not in ("photodiode", "potentiometer"):
            continue
        if ref in nets:
            message = f"{ref!r} is the name of a net too; laws and points could not tell them apart"
            problems.add(["parts", ref], message, of_key=True)
        if ref == "ambient":
            message = f"'ambient' is the ambient temperature; the {kind} needs another name"
            problems.add(["parts", ref], message, of_key=True)
    if "ambient" in nets:
        path = ("nets", "ambient") if "ambient" in names.roles else names.pins["ambient"]
        problems.add(path, "'ambient' is the ambient temperature; the net needs another name", of_key=True)


def _check_models(tables: Tables, catalogue: Catalogue, problems: Problems) -> None:
    for ref, part in tables.parts.items():
        if not isinstance(part, Modelled):
            continue
        if part.model is None:
            _check_needed(ref, part, None, problems)
            continue
        model, path = catalogue.models.get(part.model), ("parts", ref, "model")
        if model is None and catalogue.is_complete:
            fitting = [name for name, known in catalogue.models.items() if known.kind == part.kind]
            problems.add(path, *unknown(part.model, fitting, f"model of kind {part.kind}"))
        elif model is not None and model.kind != part.kind:
            message = f"the model {model.name!r} is of kind {model.kind}; one of kind {part.kind} is expected"
            problems.add(path, message)
        elif model is not None:
            _check_needed(ref, part, model, problems)


def _check_needed(ref: str, part: Modelled, model: Model | None, problems: Problems) -> None:
    parameters, given = merged(part, model)
    where = f"neither the part nor its model {model.name!r} states it" if model else "the part has no model either"
    for name in part.needed:
        if parameters[name] is None and name not in given:  # a stated one may be None where it has an error
            problems.add(["parts", ref, name], f"{name!r} is missing; {where}")


def _check_parts(tables: Tables, names: Names, problems: Problems) -> None:
    for ref, part in tables.parts.items():
        if isinstance(part, VoltageSource | CurrentSource) and part.source is not None:
            _check_supply(part.source, ("parts", ref, "from"), names, problems)
        if isinstance(part, Potentiometer) and part.adjusts not in (None, *names.requirements):
            problems.add(["parts", ref, "adjusts"], *unknown(str(part.adjusts), names.requirements, "requirement"))


def _check_matching(tables: Tables, names: Names, problems: Problems) -> None:
    transistors = [ref for ref, kind in names.parts.items() if kind in TRANSISTORS]
    for name, group in tables.matching.items():
        members = group.sound("parts")
        if members is not None and len(members) < 2:
            problems.add(["matching", name, "parts"], "a matched group has two transistors or more")
        for index, ref in enumerate(members or ()):
            path = ("matching", name, "parts", index)
            if ref in members[:index]:
                problems.add(path, f"{ref!r} stands twice in the group")
            elif ref not in names.parts:
                problems.add(path, *unknown(ref, transistors, "part"))
            elif ref not in transistors:
                kind = names.parts[ref]
                problems.add(path, f"{ref!r} is of kind {kind}; only transistors (npn, pnp) are matched")


def _check_links(tables: Tables, names: Names, problems: Problems) -> None:
    for index, link in tables.thermal_links.items():
        ends = link.sound("between") or ()
        for end, package in enumerate(ends):
            if package in ends[:end]:
                problems.add(["thermal_links", index, "between", end], "a link joins two packages, not one to itself")
            elif package not in names.packages:
                problems.add(["thermal_links", index, "between", end], *unknown(package, names.packages, "package"))


def _check_concessions(tables: Tables, problems: Problems) -> None:
    for index, concession in tables.concessions.items():
        path = ("concessions", index)
        reason = concession.sound("reason")
        if reason is not None and not reason.strip():
            problems.add([*path, "reason"], "the reason is empty; a concession says why it is granted")
        if not concession.given & {"rule", "finding"}:
            message = "'rule' is missing; a concession names a rule, or the id of a finding"
            problems.add([*path, "rule"], message)
