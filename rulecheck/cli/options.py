"""Options that several commands share."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

Command = TypeVar("Command", bound=Callable[..., Any])

ON = "--on"


class Day(click.ParamType[dt.date]):
    """A date as TOML writes it."""

    name = "date"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> dt.date:  # noqa: ANN401
        """The date of a text, or a usage error."""
        if isinstance(value, dt.date):
            return value
        try:
            return dt.date.fromisoformat(value)
        except ValueError:
            self.fail(f"{value!r} is no date; write it as 2026-12-31", param, ctx)


def on_option(command: Command) -> Command:
    """Add ``--on DATE``, the day of the review.

    Parameters
    ----------
    command : callable
    """
    return click.option(
        ON, type=Day(), default=dt.date.today, metavar="DATE", show_default="today",
        help="Day of the review, for the expiry of concessions.",
    )(command)  # fmt: skip


def form_option(*forms: str) -> Callable[[Command], Command]:
    """Add ``--as FORM``.

    Parameters
    ----------
    *forms : str
        The first is the default.
    """
    return click.option(
        "--as", "form", type=click.Choice(forms), default=forms[0], show_default=True, help="Format of the output."
    )


def samples_options(command: Command) -> Command:
    """Add ``--samples N`` and ``--seed N``.

    Parameters
    ----------
    command : callable
    """
    count = click.option(
        "--samples", type=click.IntRange(min=1), metavar="N",
        help="Solve N samples of the circuit, their parameters drawn at random within their spreads.",
    )  # fmt: skip
    seed = click.option(
        "--seed", type=click.IntRange(min=0), default=0, metavar="N", show_default=True,
        help="Of the samples: the same seed draws the same.",
    )  # fmt: skip
    return count(seed(command))


#: A file that is there; whether it can be read is found on reading.
FILE = click.Path(path_type=Path)
