"""TOML documents for tests of places and edits: tricky ones by hand, and any number by hypothesis."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from hypothesis import strategies as st

TRICKY = {
    "no text": "",
    "comment alone": "# nothing else",
    "byte-order mark": "\ufeffa = 1\n",
    "bare, quoted and dotted keys": 'a."b.c" . \'d e\' = 1\n1.2 = 3\n"" = \'empty\'\n"\\u00e9" = "é"\n- = 0\n',
    "keys like values": 'true = false\ninf = nan\n1979-05-27 = 1979-05-27\nvalue = "value"\n',
    "four kinds of string": (
        'a = "x \\" \' # ] } , = \\\\"\n'
        "b = 'C:\\x \" # ]'\n"
        'c = """\n[not.a.header]\nk = 1 # not a comment\n\\""" ""\\" """""\n'
        "d = '''\n[[x]]\n'' \\'''''\n"
        "e = \"\"\"\"\"\"\nf = ''''''\n"
        'g = """a \\\n   b"""\n'
    ),
    "dates and numbers": (
        "a = 1979-05-27T07:32:00Z\nb = 1979-05-27 07:32:00.999 # c\nc = [1979-05-27,07:32:00]\n"
        "d = { x = 1979-05-27 07:32, y = 0xff }\ne = [+1e3, -inf, nan, 1_000, 0b1]\n"
    ),
    "inline tables on one line": 'a = {}\nb = { x = 1, y.z = 2, y.w = { "k}" = "}" } }\nc = [{}, {a = [{b = 1}]}]\n',
    "inline tables on many lines": (
        "a = {\n  # first }\n  x = 1, # one\n  y = {\n    z = 2,\n  },\n}\nb = [ # [\n  1\n  , 2 # ]\n]\nc = 3\n"
    ),
    "nested arrays": "a = [[], [[1, 2], ['x', \"]\"],], # end\n]\nb = [\n]\n",
    "headers deeper and higher": (
        "[a.b.c]\nx = 1\n[a]\ny = 2\n[ d . 'e.f' . \"g\" ] # tail\n[a.b]\nz = 3\n[h]\ni.j.k = 1\n"
        "i.j.l = 2\n[h.i.m]\nn = 1\n[h.m]\nn = 1\n"
    ),
    "arrays of tables": (
        "[[a]]\nx = 1\n[a.b]\ny = 1\n[[a.c]]\n[[a.c]]\nz = 1\n[a.c.d]\nw = 1\n[[a]]\n[[a.c]]\nz = 2\n[[e.f]]\ng.h = 1\n"
    ),
    "no line end at the end": "[a]\nb = [1]",
    "line ends of two characters": '[a]\r\nb = """\r\nx\r\n"""\r\n# c\r\nd = [\r\n1,\r\n]\r\n[[e]]\r\nf = {g = 1}\r\n',
    "indented": "[a]\n\tb = 1\n  [a.c]\n    d = 2  # two\n",
    "characters beyond the first plane": "a = { '\U0001f600' = \"\U0001f600\", b = 1 }\n",
}

NAMES = ["a", "b", "R1", "IN+", "V-", "", "a.b", "Ω", 'q"', "0", "true", "new"]

SCALARS = [
    '"x"', "'y'", '"\\" # ] } ="', "'# \" ]'", '"""\n[a]\nb = 1 # c\n"""', "'''\n# c'''", '"""q"""""', "1", "-0.5e3",
    "inf", "nan", "true", "1979-05-27", "1979-05-27 07:32:00", "07:32:00.5", "0xff", '"Ω \\u00e9"',
]  # fmt: skip


class _Writer:
    """Writes a random document, valid by construction."""

    def __init__(self, draw: Any) -> None:
        self.draw = draw

    def one(self, *choices: Any) -> Any:
        return self.draw(st.sampled_from(choices))

    def names(self, most: int) -> list[str]:
        return self.draw(st.lists(st.sampled_from(NAMES), max_size=most, unique=True))

    def key(self, name: str) -> str:
        ways = ['"' + name.replace('"', '\\"') + '"', f"'{name}'"]
        bare = name.isascii() and name.replace("-", "").replace("_", "").isalnum()
        return self.one(*ways, *([name] * 4 if bare else []))

    def dotted(self, path: list[str]) -> str:
        return self.one(".", ".", " . ").join(map(self.key, path))

    def space(self) -> str:
        return self.one("", " ", " ", "\n  ", " # c, ] }\n ", "\n\n# d\n")

    def value(self, depth: int) -> str:
        kind = self.one("scalar", "scalar", "array", "table") if depth else "scalar"
        if kind == "scalar":
            return self.one(*SCALARS)
        count = self.draw(st.integers(0, 3))
        if kind == "array":
            items = [self.value(depth - 1) for _ in range(count)]
        else:
            items = [item for name in self.names(3) for item in self.pairs([name], depth - 1)]
        inner = self.space()
        for number, item in enumerate(items, 1):
            comma = "," if number < len(items) else self.one("", ",")
            inner += item + self.space() + comma + self.space()
        return f"[{inner}]" if kind == "array" else f"{{{inner}}}"

    def pairs(self, path: list[str], depth: int) -> Iterator[str]:
        """Yield one pair, or two with a dotted key that make up a table."""
        if depth and self.one(True, False, False):
            for name in self.names(2):
                yield from self.pairs([*path, name], depth - 1)
        else:
            yield self.dotted(path) + self.one("=", " = ", "  = ") + self.value(depth)

    def lines(self, *lines: str) -> Iterator[str]:
        """Yield `lines`, each with blank lines or comments before and a comment behind it, or not."""
        for line in lines:
            yield from self.one([], [], [], [""], ["# above"], ["", "# apart", ""])
            yield self.one("", "", "  ") + line + self.one("", "", " # behind")

    def table(self, path: list[str], depth: int) -> Iterator[str]:
        """Yield the lines of the body of the table `path` and of the headers below it."""
        deeper = []
        for name in self.names(4):
            style = self.one("pair", "pair", "table", "array", "implied") if depth else "pair"
            if style == "pair":
                yield from self.lines(*self.pairs([name], 2))
            else:
                deeper.append((name, style))
        for name, style in deeper:
            own = [*path, name]
            if style == "implied":
                own.append(self.one(*NAMES))
            for _ in range(self.draw(st.integers(1, 3)) if style == "array" else 1):
                header = self.dotted(own)
                yield from self.lines(f"[[{header}]]" if style == "array" else f"[{header}]")
                yield from self.table(own, depth - 1)


@st.composite
def documents(draw: Any) -> str:
    """Draw the text of a document that uses all of TOML 1.1."""
    text = "\n".join(_Writer(draw).table([], 2)) + draw(st.sampled_from(["\n", ""]))
    return text.replace("\n", "\r\n") if draw(st.booleans()) else text


def walk(data: Any, path: tuple[str, ...] = ()) -> Iterator[tuple[tuple[str, ...], Any]]:
    """Yield every key path of parsed `data` with what stands there."""
    items = data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else ()
    for key, value in items:
        yield (*path, str(key)), value
        yield from walk(value, (*path, str(key)))
