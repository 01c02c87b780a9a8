"""Laying out text for a terminal or a pipe: wrapped lines behind short labels, tables, modest colour."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from rulecheck.errors import QuantityError
from rulecheck.units import format_quantity

LABEL_WIDTH = 12
LEAST_WIDTH = 40
_KEEP = "\u00a0"  # a space at which no line is broken
#: Control sequences of ECMA-48.
_STYLES = {"bold": "1", "dim": "2", "red": "1;31", "yellow": "33", "cyan": "36", "green": "32"}


@dataclass(frozen=True, slots=True)
class Layout:
    """Width of the lines in characters, and whether to use colour."""

    width: int = 80
    color: bool = False

    def styled(self, text: str, style: str) -> str:
        """Text in a style, where there is colour.

        Parameters
        ----------
        text : str
        style : str
            ``bold``, ``dim``, ``red``, ``yellow``, ``cyan`` or ``green``.
        """
        return f"\x1b[{_STYLES[style]}m{text}\x1b[0m" if self.color and text else text

    def labelled(self, label: str, text: str, style: str = "dim") -> list[str]:
        """Text wrapped to the right of a label.

        Parameters
        ----------
        label : str
        text : str
        style : str
            Of the label.
        """
        lines = self.wrapped(text, LABEL_WIDTH)
        head = self.styled(label, style) + " " * (LABEL_WIDTH - len(label))
        return [(head + lines[0][LABEL_WIDTH:]).rstrip(), *lines[1:]]

    def wrapped(self, text: str, indent: int = 0) -> list[str]:
        """Text wrapped to the width, every line indented; at least one line.

        Parameters
        ----------
        text : str
            Its line ends are kept.
        indent : int
            In characters.
        """
        margin = " " * indent
        lines = []
        for paragraph in text.splitlines() or [""]:
            lines += textwrap.wrap(
                paragraph, max(self.width, LEAST_WIDTH), initial_indent=margin, subsequent_indent=margin,
                break_long_words=False, break_on_hyphens=False,
            ) or [margin]  # fmt: skip
        return [let_go(line) for line in lines]

    def between(self, left: str, right: str) -> list[str]:
        """Two texts at the ends of a line, or of two lines where they do not fit one.

        Parameters
        ----------
        left, right : str
        """
        width = max(self.width, LEAST_WIDTH)
        room = width - len(left) - len(right)
        return [left + " " * room + right] if room >= 2 else [left, right.rjust(width)]


def table(rows: Sequence[Sequence[str]], indent: int = 2) -> list[str]:
    """Rows with their columns aligned, the first to the left and the others to the right.

    Parameters
    ----------
    rows : sequence of sequence of str
        All of one length.
    indent : int
        In characters.
    """
    widths = [max(len(cell) for cell in column) for column in zip(*rows, strict=True)]
    return [
        (" " * indent + row[0].ljust(widths[0]) + "".join(
            "  " + cell.rjust(width) for cell, width in zip(row[1:], widths[1:], strict=True)
        )).rstrip()
        for row in rows
    ]  # fmt: skip


def quantity(value: float, unit: str) -> str:
    """A figure with its unit; one in a unit that the program does not know is shown as it stands.

    Parameters
    ----------
    value : float
        In SI.
    unit : str
    """
    try:
        return format_quantity(value, unit)
    except QuantityError:
        return f"{value:.4g} {unit}"


def kept_together(text: str) -> str:
    """Text that `Layout.wrapped` does not break, such as a quantity.

    Parameters
    ----------
    text : str
    """
    return text.replace(" ", _KEEP)


def let_go(text: str) -> str:
    """Text with the spaces that were kept together as plain ones.

    Parameters
    ----------
    text : str
    """
    return text.replace(_KEEP, " ")


def conditions_in_words(conditions: Mapping[str, float], units: Mapping[str, str]) -> str:
    """Conditions with their units: ``ambient 55 degC, VIN 0.1 V``.

    Parameters
    ----------
    conditions : mapping of str to float
        In SI.
    units : mapping of str to str
        By name.
    """
    return ", ".join(
        kept_together(f"{name} {quantity(value, units.get(name, '1'))}") for name, value in conditions.items()
    )
