"""The text of a design or catalogue file: read within limits, parsed, with places of its keys."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rulecheck.design.keypath import join_key
from rulecheck.errors import DesignError, Problem

if TYPE_CHECKING:
    from rulecheck.design.locate import Spans

LARGEST_FILE = 8 * 2**20  # bytes
DEEPEST = 64  # levels of tables and lists within one another

Path_ = tuple[str, ...]


@dataclass(frozen=True)
class Source:
    """A file's name, text and parsed tables."""

    file: str
    text: str
    data: dict[str, Any]

    @cached_property
    def spans(self) -> Spans:
        """Places of all keys and values."""
        from rulecheck.design.locate import scan

        return scan(self.text)

    def place(self, path: Sequence[str | int], *, of_key: bool = False) -> tuple[Path_, tuple[int, int]]:
        """The longest leading part of `path` that the file has, with line and column of its value or key."""
        found, span = self.spans.nearest(path)
        at_key = of_key and len(found) == len(path)
        return found, self.spans.position(span.key[0]) if at_key else (span.line, span.column)

    def __reduce__(self) -> tuple[Any, ...]:
        return type(self), (self.file, self.text, self.data)  # places are found again where they are asked for


class Problems:
    """Collects the problems of one file."""

    def __init__(self, source: Source) -> None:
        self.source = source
        self.found: list[Problem] = []

    def add(self, path: Sequence[str | int], message: str, hint: str = "", *, of_key: bool = False) -> None:
        """Add a problem at a key path; where the file lacks the key, its place is that of the table around it."""
        _, (line, column) = self.source.place(path, of_key=of_key)
        text = f"{message} ({hint})" if hint else message
        self.found.append(Problem(self.source.file, join_key(path), text, line, column))


def read_file(path: Path) -> str:
    """Text of a file, line ends and byte-order mark kept; DesignError where it cannot be read."""
    try:
        if not path.is_file():
            raise _whole_file(str(path), "there is no such file" if not path.exists() else "this is not a file")
        with path.open("rb") as file:
            content = file.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or error
        raise _whole_file(str(path), f"the file cannot be read: {reason}") from None
    if len(content) > LARGEST_FILE:
        raise _too_large(str(path))
    try:
        return content.decode()
    except UnicodeDecodeError as error:
        before = content[: error.start].decode()
        line, column = before.count("\n") + 1, len(before) - before.rfind("\n")
        message = f"byte {content[error.start]:#04x} is not UTF-8 (save the file as UTF-8)"
        raise DesignError([Problem(str(path), "", message, line, column)]) from None


def parse(text: str, file: str) -> Source:
    """Parse TOML within the limits of size and nesting; DesignError where that fails."""
    import tomli

    if len(text) > LARGEST_FILE or len(text.encode(errors="replace")) > LARGEST_FILE:
        raise _too_large(file)
    try:
        data = tomli.loads(text.removeprefix("\ufeff"))
    except tomli.TOMLDecodeError as error:
        raise DesignError([_syntax_problem(file, text, error)]) from None
    except RecursionError:
        raise _whole_file(file, f"it is nested deeper than {DEEPEST} levels") from None
    except ValueError:  # an integer too long to be one; the parser has no words of its own for it
        raise DesignError([_long_number(file, text)]) from None
    source = Source(file, text, data)
    _check_depth(source)
    return source


def _whole_file(file: str, message: str) -> DesignError:
    return DesignError([Problem(file, "", message)])


def _too_large(file: str) -> DesignError:
    return _whole_file(file, f"the file is larger than {LARGEST_FILE // 2**20} MiB, which is the most that is read")


def _check_depth(source: Source) -> None:
    """Refuse what is nested too deep; without recursion, since its depth is not known yet."""
    waiting: list[tuple[Any, Path_]] = [(source.data, ())]
    while waiting:
        value, path = waiting.pop()
        if not isinstance(value, dict | list):
            continue
        if len(path) > DEEPEST:
            problems = Problems(source)
            problems.add(path[:2], f"it is nested deeper than {DEEPEST} levels")
            raise DesignError(problems.found)
        pairs = value.items() if isinstance(value, dict) else enumerate(value)
        waiting += [(inner, (*path, str(key))) for key, inner in pairs]


def _long_number(file: str, text: str) -> Problem:
    found = max(re.finditer(r"[0-9_]+", text), key=lambda match: len(match.group()))
    line = text.count("\n", 0, found.start()) + 1
    column = found.start() - text.rfind("\n", 0, found.start())
    message = f"a number of {len(found.group())} digits is too long"
    return Problem(file, _key_at(text, line), message, line, column)


# What the parser says, and what it means to someone who writes a design file.
_SYNTAX = (
    (r"Cannot declare (.*) twice", "this table stands twice in the file"),
    (r"Cannot overwrite a value", "this key stands twice in its table"),
    (r"Duplicate inline table key (.*)", "the key {0} stands twice in this table"),
    (r"Cannot (?:mutate|redefine).*", "this adds to a table or list that is complete already"),
    (r"Expected newline or end.*", "something follows the value; one key = value stands on a line"),
    (r"Expected '=' after a key.*", "= and a value are expected after the key"),
    (r"Expected '\]+' at the end.*", "the closing bracket of the table's header is missing"),
    (r"Unterminated string", "the closing quotation mark is missing"),
    (r"Expected \"'.*", "the closing quotation mark is missing"),
    (r"Illegal character '\\n'", "the closing quotation mark is missing on this line"),
    (r"(?:Illegal character|Found invalid character) (.*)", "the character {0} may not stand here"),
    (r"Unescaped '.*", "a backslash begins an escape that does not exist; write it twice, or use single quotes"),
    (r"Invalid hex value|Escaped character.*", "this escape is no character"),
    (r"Unclosed array", "the list has no closing ]; its elements are parted by commas"),
    (r"Unclosed inline table", "the table has no closing }}; its keys are parted by commas"),
    (r"Invalid value", "a value is expected here; text and quantities stand in quotation marks"),
    (r"Invalid (?:statement|initial character).*", "a key is expected here; signs other than letters, digits, "
     "_ and - need quotation marks"),
)  # fmt: skip


def _syntax_problem(file: str, text: str, error: Any) -> Problem:  # noqa: ANN401
    message, column = f"this is not TOML: {error.msg}", error.colno
    for pattern, meaning in _SYNTAX:
        match = re.fullmatch(pattern, error.msg)
        if match:
            message = meaning.format(*match.groups())
            break
    if message.endswith(("in the file", "in its table")):  # what is written twice begins with its line
        line = text.split("\n")[error.lineno - 1]
        column = len(line) - len(line.lstrip()) + 1
    return Problem(file, _key_at(text, error.lineno), message, error.lineno, column)


def _key_at(text: str, line: int) -> str:
    """What stands before the equals sign, or in the header, of a line that could not be parsed."""
    lines = text.removeprefix("\ufeff").split("\n")
    match = re.match(r"\s*(?:\[+([^\]#=]*)|([^#=\[\]]*)=)", lines[line - 1]) if line <= len(lines) else None
    return (match[1] or match[2] or "").strip() if match else ""
