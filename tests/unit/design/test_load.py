"""Reading design files: limits, encodings, line ends, and catalogues that must stay in their folder."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

from rulecheck.design.load import load, load_text
from rulecheck.design.source import DEEPEST, LARGEST_FILE
from rulecheck.errors import DesignError, Problem

GROUND = 'format = 1\n[nets]\nGND = { role = "ground" }\n'
CASES = Path(__file__).parents[2] / "published" / "cases"
CATALOGUE = '[models.own]\nkind = "diode"\nsaturation_current = "1 fA"\n'
DIODE = '[parts.D1]\nkind = "diode"\nmodel = "own"\npins = { A = "GND", K = "OUT" }\n'


def problems_of(path: Path) -> tuple[Problem, ...]:
    """Problems of a file, which must have some."""
    with pytest.raises(DesignError, match=path.name) as caught:
        load(path)
    return caught.value.problems


@pytest.mark.parametrize(
    ("name", "parts", "nets", "inputs"),
    [
        ("log_stage", 6, 7, ["IN"]),
        ("cube_root", 22, 17, ["X"]),
        ("current_ratio", 16, 12, ["PD1", "PD2"]),
        ("heated_pair", 13, 12, ["X"]),
    ],
)
def test_published_cases_load(name: str, parts: int, nets: int, inputs: list[str]) -> None:
    """Each has the parts, nets and inputs counted in its file."""
    design = load(CASES / f"{name}.toml")
    assert (len(design.parts), len(design.nets), list(design.inputs)) == (parts, nets, inputs)
    assert design.title.startswith("Case ")
    assert design.models["case-npn"].file.endswith("case_parts.toml")


@pytest.mark.parametrize("line_end", ["\n", "\r\n"])
@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
def test_line_ends_and_byte_order_mark(tmp_path: Path, line_end: str, mark: bytes) -> None:
    """Files of any editor load, with the same places, and the text is kept as it is."""
    path = tmp_path / "board.toml"
    content = mark + GROUND.replace("\n", line_end).encode()
    path.write_bytes(content)
    design = load(path)
    assert design.text.encode() == content
    assert (design.locate("format").line, design.locate("format").column) == (1, 10)
    assert (design.locate("nets.GND.role").line, design.locate("nets.GND.role").column) == (3, 16)


def test_a_file_that_is_not_utf_8(tmp_path: Path) -> None:
    """The byte is shown with its place."""
    path = tmp_path / "board.toml"
    path.write_bytes('format = 1\ntitle = "ä '.encode() + b'\xb5A"\n')
    (problem,) = problems_of(path)
    assert (problem.line, problem.column) == (2, 12)
    assert "0xb5 is not UTF-8" in problem.message


def test_a_file_that_is_too_large(tmp_path: Path) -> None:
    """Just below the limit a file loads, just above it is refused without being parsed."""
    path = tmp_path / "board.toml"
    path.write_text(GROUND + "#" * (LARGEST_FILE - len(GROUND)))
    assert load(path).nets
    path.write_text(GROUND + "#" * (LARGEST_FILE - len(GROUND) + 1))
    assert "larger than 8 MiB" in problems_of(path)[0].message


@pytest.mark.parametrize(
    ("levels", "is_refused"), [(DEEPEST, False), (DEEPEST + 1, True), (2000, True), (100000, True)]
)
@pytest.mark.parametrize("form", ["lists", "tables", "dotted"])
def test_nesting(levels: int, is_refused: bool, form: str) -> None:
    """A file nested deeper than 64 levels is refused as such, however deep; another is read."""
    value = {
        "lists": f"a = {'[' * levels}{']' * levels}",
        "tables": f"a = {'{a = ' * (levels - 1)}{{}}{'}' * (levels - 1)}",
        "dotted": f"a{'.a' * levels} = 1",
    }[form]
    with pytest.raises(DesignError, match="nested deeper" if is_refused else "no key 'a' in a design file") as caught:
        load_text(f"{value}\n{GROUND}", "board.toml")
    assert ("nested deeper than 64 levels" in str(caught.value)) is is_refused


def test_number_of_parts() -> None:
    """20,000 parts load, one more is refused."""
    part = '[parts.R{0}]\nkind = "resistor"\nvalue = "1 kohm"\npins = ["GND", "N"]\n'
    text = GROUND + "".join(part.format(i) for i in range(20_000))
    assert len(load_text(text, "board.toml").parts) == 20_000
    with pytest.raises(DesignError, match="20001 parts; at most 20000"):
        load_text(text + part.format("X"), "board.toml")


def test_a_path_that_is_no_file(tmp_path: Path) -> None:
    """What is not there and what is no file are refused in words."""
    assert problems_of(tmp_path / "none.toml")[0].message == "there is no such file"
    assert problems_of(tmp_path)[0].message == "this is not a file"


def test_catalogues_beside_and_below(tmp_path: Path) -> None:
    """A catalogue is found beside the design and in folders below, from any working directory."""
    (tmp_path / "parts").mkdir()
    (tmp_path / "parts" / "own.toml").write_text(CATALOGUE)
    (tmp_path / "board.toml").write_text('catalogues = ["parts/own.toml"]\n' + GROUND + DIODE)
    design = load(tmp_path / "board.toml")
    assert design.parts["D1"].saturation_current.typ == 1e-15
    assert design.models["own"].file == str(tmp_path / "parts" / "own.toml")


@pytest.mark.parametrize("name", ["../own.toml", "below/../../own.toml", "link.toml", "folder/own.toml", "{absolute}"])
def test_a_catalogue_may_not_lie_outside(tmp_path: Path, name: str) -> None:
    """Neither dots, nor links of files or folders, nor whole paths lead out of the design's folder."""
    inside = tmp_path / "inside"
    (inside / "below").mkdir(parents=True)
    (tmp_path / "own.toml").write_text(CATALOGUE)
    (inside / "link.toml").symlink_to(tmp_path / "own.toml")
    (inside / "folder").symlink_to(tmp_path)
    name = name.format(absolute=tmp_path / "own.toml")
    (inside / "board.toml").write_text(f'catalogues = ["{name}"]\n' + GROUND + DIODE)
    (problem,) = problems_of(inside / "board.toml")
    assert (problem.line, problem.column, problem.key) == (1, 15, "catalogues.0")
    assert "leads out of the design's folder" in problem.message


def test_a_link_within_the_folder_is_followed(tmp_path: Path) -> None:
    """A link that stays inside is as good as the file."""
    (tmp_path / "own.toml").write_text(CATALOGUE)
    (tmp_path / "link.toml").symlink_to("own.toml")
    (tmp_path / "board.toml").write_text('catalogues = ["link.toml"]\n' + GROUND + DIODE)
    assert load(tmp_path / "board.toml").parts["D1"].model == "own"


@pytest.mark.parametrize("name", ["none.toml", "folder", "", ".", "loop.toml", "pipe", "nul\\u0000.toml", "n" * 5000])
def test_a_catalogue_that_cannot_be_read(tmp_path: Path, name: str) -> None:
    """What is no file is an error at the key that names it; nothing waits for a pipe."""
    (tmp_path / "folder").mkdir()
    (tmp_path / "loop.toml").symlink_to("loop.toml")
    os.mkfifo(tmp_path / "pipe")
    (tmp_path / "board.toml").write_text(f'catalogues = ["{name}"]\n' + GROUND + DIODE)
    (problem,) = problems_of(tmp_path / "board.toml")
    assert (problem.file, problem.key) == (str(tmp_path / "board.toml"), "catalogues.0")
    assert "there is no file" in problem.message


def test_problems_of_a_catalogue_name_its_file(tmp_path: Path) -> None:
    """They come after those of the design, with their own lines; a part's model is not called unknown besides."""
    (tmp_path / "own.toml").write_text('[models.own]\nkind = "diode"\nsaturation_curent = "1 fA"\n[parts]\n')
    (tmp_path / "board.toml").write_text('catalogues = ["own.toml"]\ntitel = 1\n' + GROUND + DIODE)
    problems = problems_of(tmp_path / "board.toml")
    assert [(Path(p.file).name, p.line, p.key) for p in problems] == [
        ("board.toml", 2, "titel"),
        ("board.toml", 6, "parts.D1.saturation_current"),
        ("own.toml", 3, "models.own.saturation_curent"),
        ("own.toml", 4, "parts"),
    ]


def test_loading_imports_nothing_of_screens_or_graphs() -> None:
    """Reading a file loads neither the text UI nor what the analyses need."""
    heavy = "{'textual', 'rich', 'click', 'networkx', 'scipy'}"
    code = f"import sys, rulecheck.design.load; print(sorted({heavy} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_only_tables_in_use_are_built() -> None:
    """The validator of a kind that no file uses is not made."""
    code = (
        "from rulecheck.design.load import load_text; from rulecheck.design import parts\n"
        f'load_text({GROUND!r} + \'[parts.R]\\nkind = "resistor"\\nvalue = "1 ohm"\\npins = ["A", "B"]\', \'x.toml\')\n'
        "print([t.__name__ for t in parts.PART_TABLES.values() if t.__pydantic_complete__])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "['Resistor']"
