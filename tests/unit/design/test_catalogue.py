"""Catalogues of models: what they may hold, how they meet, and the one that ships."""

from __future__ import annotations

import re
from collections.abc import Callable
from pathlib import Path

import pytest

from rulecheck.design.catalogue import SHIPPED, shipped_models
from rulecheck.design.load import load
from rulecheck.design.model import Design, Model
from rulecheck.errors import DesignError
from rulecheck.units import Spread

GROUND = 'format = 1\n[nets]\nGND = { role = "ground" }\n'
Review = Callable[..., Design]


@pytest.fixture
def with_catalogues(tmp_path: Path) -> Review:
    """Load a design of these parts with these catalogues beside it, called a.toml, b.toml and so on."""

    def load_with(*catalogues: str, parts: str = "") -> Design:
        names = [f"{letter}.toml" for letter, _ in zip("abc", catalogues, strict=False)]
        for name, text in zip(names, catalogues, strict=True):
            (tmp_path / name).write_text(text)
        (tmp_path / "board.toml").write_text(f"catalogues = {names}\n" + GROUND + parts)
        return load(tmp_path / "board.toml")

    return load_with


MODEL = '[models.own]\nkind = "diode"\nsaturation_current = "1 fA"\n'
FAULTS = {
    "another table": (MODEL + "[design]\n", "design", 4, ("no key 'design' in a catalogue", "models")),
    "another key": ('kind = "npn"\n' + MODEL, "kind", 1, ("no key 'kind'", "format")),
    "another format": ("format = 2\n" + MODEL, "format", 1, ("format 2",)),
    "models that are no table": ("models = 3\n", "models", 1, ("3 is given", "[models.NAME]")),
    "a model that is no table": ("[models]\nown = 3\n", "models.own", 2, ("3 is given",)),
    "no kind": ("[models.own]\n", "models.own.kind", 1, ("'kind' is missing", "'op-amp'")),
    "a kind without models": ('[models.own]\nkind = "resistor"\n', "models.own.kind", 2, ("'resistor'", "'diode'")),
    "a misspelt key": (MODEL + "bandgab = 3\n", "models.own.bandgab", 4, ("'bandgab'", "did you mean 'bandgap'?")),
    "a wrong dimension": (MODEL + 'bandgap = "1 K"\n', "models.own.bandgap", 4, ("'1 K'", "voltage")),
    "a key of parts only": (
        MODEL + "mounted = true\n",
        "models.own.mounted",
        4,
        ("no key 'mounted' in a diode model",),
    ),
    "a note without quotes": (MODEL + "note = 3\n", "models.own.note", 4, ("3 is given", "text in quotes")),
    "no TOML": (MODEL + "note = x\n", "note", 4, ("a value is expected",)),
}


@pytest.mark.parametrize(("text", "key", "line", "pieces"), FAULTS.values(), ids=FAULTS.keys())
def test_fault_of_a_catalogue(with_catalogues: Review, text: str, key: str, line: int, pieces: tuple[str, ...]) -> None:
    """It is reported once, with the catalogue's file and line."""
    with pytest.raises(DesignError, match=r"a\.toml") as caught:
        with_catalogues(text)
    (problem,) = caught.value.problems
    assert (Path(problem.file).name, problem.key, problem.line) == ("a.toml", key, line)
    assert [piece for piece in pieces if piece not in problem.message] == []


def test_models_of_all_catalogues(with_catalogues: Review) -> None:
    """The shipped models come first, then the design's in the order it names them, each with its file."""
    design = with_catalogues(MODEL, MODEL.replace("own", "other"))
    assert list(design.models) == [*shipped_models(), "own", "other"]
    assert [Path(design.models[name].file).name for name in ("own", "other")] == ["a.toml", "b.toml"]
    assert design.models["own"].given == {"saturation_current"}
    assert design.models["own"].parameters.emission_coefficient == Spread.exactly(1.0)


def test_a_house_may_define_a_shipped_name_anew(with_catalogues: Review) -> None:
    """Then the house's figures hold, none of the shipped ones beside them."""
    design = with_catalogues(MODEL.replace("own", "small-signal-diode"))
    model = design.models["small-signal-diode"]
    assert Path(model.file).name == "a.toml"
    assert model.parameters.series_resistance == Spread.exactly(0.0)


def test_two_catalogues_may_not_have_one_name(with_catalogues: Review) -> None:
    """Which of the two would hold could not be seen."""
    with pytest.raises(DesignError, match=r"board\.toml:1:25: catalogues\.1: 'b\.toml' has a model 'own'"):
        with_catalogues(MODEL, MODEL)


def test_a_model_may_leave_to_its_parts_what_must_be_known(with_catalogues: Review) -> None:
    """A required parameter may stand in the part; where neither has it, the part is at fault."""
    own = '[models.own]\nkind = "npn"\nforward_beta = 200\n'
    part = '[parts.Q1]\nkind = "npn"\nmodel = "own"\npins = {}\n'
    stated = part + 'saturation_current = "3 fA"\n'
    assert with_catalogues(own, parts=stated).parts["Q1"].saturation_current.typ == 3e-15
    with pytest.raises(DesignError, match=r"board\.toml:5:1.*neither the part nor its model 'own'") as caught:
        with_catalogues(own, parts=part)
    assert [problem.key for problem in caught.value.problems] == ["parts.Q1.saturation_current"]


OPTIONAL = {"bias_current_doubling", "vbe_mismatch", "vbe_mismatch_drift"}  # have no figure in some of the sorts


@pytest.mark.parametrize("model", shipped_models().values(), ids=lambda model: model.name)
def test_shipped_models_state_everything(model: Model) -> None:
    """No rule's verdict on a shipped model rests on a default, and the note says what the model is."""
    fields = set(type(model.parameters).model_fields) - {"kind", "note"}
    assert fields - model.given <= OPTIONAL
    assert "invented name" in model.note
    assert model.note.startswith("Representative")


@pytest.mark.parametrize(
    ("name", "kind"),
    [
        ("monolithic-pair-npn", "npn"),
        ("monolithic-pair-pnp", "pnp"),
        ("monolithic-quad-npn", "npn"),
        ("small-signal-npn", "npn"),
        ("small-signal-pnp", "pnp"),
        ("small-signal-diode", "diode"),
        ("low-leakage-diode", "diode"),
        ("bifet-precision", "op-amp"),
        ("bipolar-precision", "op-amp"),
        ("cmos-precision-single-supply", "op-amp"),
        ("bifet-old-style", "op-amp"),
        ("high-voltage-amplifier", "op-amp"),
    ],
)
def test_shipped_names(name: str, kind: str) -> None:
    """Designs rely on these names, which are of sorts and of no maker's type."""
    assert shipped_models()[name].kind == kind
    assert re.search(r"\d", name) is None


def test_sorts_that_ship_are_what_their_names_say() -> None:
    """Monolithic pairs share a die and are matched; the old amplifier reverses; the CMOS one reaches its rail."""
    models = shipped_models()
    for name in ("monolithic-pair-npn", "monolithic-pair-pnp", "monolithic-quad-npn", "monolithic-pair-npn-tight"):
        assert models[name].parameters.monolithic
        assert models[name].parameters.vbe_mismatch.half < models[name].parameters.vbe_spread.half
    assert not models["small-signal-npn"].parameters.monolithic
    assert models["bifet-old-style"].parameters.phase_reversal
    assert models["cmos-precision-single-supply"].parameters.input_headroom.low.typ < 0.0
    assert models["high-voltage-amplifier"].parameters.supply.max > 60.0
    amplifiers = [m.parameters for m in models.values() if m.kind == "op-amp"]
    assert all(a.output_resistance.min > 0.0 and a.second_pole.typ > a.gain_bandwidth.typ for a in amplifiers)


def test_the_shipped_catalogue_says_that_its_parts_are_invented() -> None:
    """The file opens with a comment that says what its parts are."""
    opening = SHIPPED.read_text().partition("\nformat")[0]
    assert opening.startswith("#")
    assert "names are invented" in opening
