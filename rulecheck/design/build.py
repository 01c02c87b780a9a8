"""From sound tables to the design that the analyses see."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rulecheck.design.catalogue import Catalogue
from rulecheck.design.frozen import FrozenDict
from rulecheck.design.merge import merged
from rulecheck.design.model import Design, Input, Matching, Net, Package, Part, Requirement, ThermalLink
from rulecheck.design.names import Names
from rulecheck.design.nets import InputTable, NetTable, Reference, Supply
from rulecheck.design.parts import Modelled, PartTable
from rulecheck.design.read import Tables
from rulecheck.design.source import Source
from rulecheck.design.tables import ConcessionTable, PackageTable
from rulecheck.findings import Concession
from rulecheck.units import Spread

LOG_RATIO = 10.0  # ends of a range this far apart are spaced logarithmically, where the file does not say
JUNCTIONS = ("npn", "pnp", "diode")
HAVE_TOLERANCE = ("resistor", "potentiometer", "capacitor", "voltage-source", "current-source")


def build_design(
    source: Source, path: Path, tables: Tables, names: Names, catalogue: Catalogue,
    requirements: Mapping[str, Requirement],
) -> Design:  # fmt: skip
    """The design of tables in which no problem was found."""
    parts = {ref: _part(ref, table, catalogue) for ref, table in tables.parts.items()}
    mounted = {ref: part for ref, part in parts.items() if part.mounted}
    nets = {name: _net(name, table) for name, table in tables.nets.items()}
    nets |= {name: Net(name) for name in names.nets if name not in nets}
    return Design(
        path=path,
        title=tables.head.title,
        revision=tables.head.revision,
        purpose=tables.head.purpose,
        ambient=tables.environment.ambient,
        board_insulation=tables.environment.board_insulation,
        nets=FrozenDict(nets),
        parts=FrozenDict(mounted),
        unmounted=FrozenDict({ref: part for ref, part in parts.items() if not part.mounted}),
        packages=FrozenDict(_packages(tables, mounted)),
        thermal_links=tuple(ThermalLink((k.between[0], k.between[1]), k.theta) for k in tables.thermal_links.values()),
        matching=FrozenDict(_matching(tables, mounted)),
        requirements=FrozenDict(requirements),
        concessions=tuple(_concession(table) for table in tables.concessions.values()),
        rule_settings=FrozenDict(tables.rules),
        models=FrozenDict(catalogue.models),
        inputs=FrozenDict(_inputs(nets, mounted)),
        source=source,
    )


def with_tolerance(value: Spread, tolerance: float | None) -> Spread:
    """Spread of a value whose tolerance is ± a fraction of its magnitude."""
    share = tolerance or 0.0
    return Spread(value.min - share * abs(value.min), value.typ, value.max + share * abs(value.max))


def _part(ref: str, table: PartTable, catalogue: Catalogue) -> Part:
    name = table.model if isinstance(table, Modelled) else None
    parameters, given = merged(table, catalogue.models[name] if name is not None else None)
    if table.kind in HAVE_TOLERANCE:
        parameters["value_spread"] = with_tolerance(parameters["value"], parameters["tolerance"])
    if parameters.get("tempco_tolerance") is not None:
        limit, tempco = parameters["tempco_tolerance"], parameters["tempco"]
        parameters["tempco"] = Spread(tempco.min + limit.min, tempco.typ, tempco.max + limit.max)
    package = ref if table.package is None else table.package
    return Part(ref, table.kind, name, package, table.pins, table.mounted, table.spare, FrozenDict(parameters), given)


def _net(name: str, table: NetTable) -> Net:
    fields: dict[str, Any] = {key: getattr(table, key) for key in type(table).model_fields if key != "tolerance"}
    if isinstance(table, Supply | Reference):
        fields["voltage"] = with_tolerance(table.voltage, table.tolerance)
        fields["tempco_spread"], fields["tempco"] = table.tempco, table.tempco.typ
    if isinstance(table, InputTable):
        fields["spacing"] = table.spacing or ("log" if _is_wide(*fields["range"]) else "linear")
    return Net(name, **fields, given=table.given)


def _is_wide(low: float, high: float) -> bool:
    """Whether both ends have one sign and are a decade or more apart."""
    return low * high > 0.0 and max(high / low, low / high) >= LOG_RATIO


def _inputs(nets: Mapping[str, Net], parts: Mapping[str, Part]) -> dict[str, Input]:
    inputs: dict[str, Input] = {}
    for name, net in nets.items():
        if net.range is not None and net.drive is not None:
            compliance = net.compliance if net.drive == "current" else None
            is_log = net.spacing == "log"
            inputs[name] = Input(name, net.drive, *net.range, is_log, net.cutoff, net.survives, compliance)
    for ref, part in parts.items():
        if part.kind == "photodiode":
            low, high = part.photocurrent
            inputs[ref] = Input(ref, part.kind, low, high, _is_wide(low, high), survives=part.survives)
    return inputs


def _packages(tables: Tables, parts: Mapping[str, Part]) -> dict[str, Package]:
    """All packages: those with a table, those that parts are in, and those that links join."""
    linked = [name for link in tables.thermal_links.values() for name in link.between]
    members: dict[str, list[Part]] = {name: [] for name in tables.packages}
    for part in parts.values():
        members.setdefault(part.package, []).append(part)
    for name in linked:
        members.setdefault(name, [])
    return {name: _package(name, tables.packages.get(name), inside) for name, inside in members.items()}


def _package(name: str, table: PackageTable | None, parts: list[Part]) -> Package:
    own = table or PackageTable()
    thetas = [part.theta_ja.typ for part in parts if part.parameters.get("theta_ja") is not None]
    discrete = [part for part in parts if part.kind in JUNCTIONS and not part.parameters.get("monolithic", False)]
    return Package(
        name=name,
        parts=tuple(part.ref for part in parts),
        theta_ja=own.theta_ja if own.theta_ja is not None else next(iter(thetas), None),
        die=own.die or ("separate" if len(discrete) >= 2 else "single"),
        theta_between=own.theta_between,
        ratio_tolerance=own.ratio_tolerance,
        ratio_tempco=own.ratio_tempco,
        held_temperature=own.held_temperature,
        declared=table is not None,
    )


def _matching(tables: Tables, parts: Mapping[str, Part]) -> dict[str, Matching]:
    return {
        name: Matching(name, tuple(r for r in group.parts if r in parts), group.vbe_mismatch, group.vbe_mismatch_drift)
        for name, group in tables.matching.items()
    }


def _concession(table: ConcessionTable) -> Concession:
    finding = table.finding or ""
    return Concession(
        rule=table.rule or finding.partition(":")[0],
        reason=table.reason,
        parts=table.parts,
        nets=table.nets,
        finding=finding,
        approved_by=table.approved_by,
        expires=table.expires,
    )
