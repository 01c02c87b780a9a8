"""The program: its commands, loaded when called, and the mapping from errors to exit statuses."""

from __future__ import annotations

import importlib
import os
import traceback
from collections.abc import Sequence

import click

from rulecheck import __version__
from rulecheck.cli.status import Status
from rulecheck.cli.streams import narrate, prepare_streams
from rulecheck.errors import AnalysisError, PluginError, RulecheckError

#: Commands with the line that help shows, so that help imports none of them.
COMMANDS = {
    "check": "Review design files and print findings.",
    "browse": "Review design files on the screen, and apply remedies there.",
    "fix": "List remedies that were tried, and apply them.",
    "figures": "Print the numbers: operating points, loops, temperatures, transfer.",
    "compare": "Show what changed between two revisions: values, findings, figures.",
    "rules": "Show the rules in force, their source, limits and where each comes from.",
    "schema": "Print the JSON Schema of the design file, for editors.",
}


class LazyGroup(click.Group):
    """A group that imports the module of a command when it is called."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Names of the commands, in the order of use."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """The command of a name, or None."""
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = importlib.import_module(f"rulecheck.cli.{cmd_name}").command
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """The command that the arguments call; a misspelt one is refused with the nearest right one."""
        if args[0] not in COMMANDS and not args[0].startswith("-"):
            from rulecheck.review.words import did_you_mean

            hint = did_you_mean(args[0], COMMANDS) or f"there are {', '.join(COMMANDS)}"
            raise click.UsageError(f"there is no command {args[0]!r} ({hint})", ctx)
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the commands with their lines of help."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["--help", "-h"]})
@click.version_option(__version__, prog_name="rulecheck", message="%(prog)s %(version)s")
def program() -> None:
    """Check the design of analog log-domain computing circuits against rules, with numbers.

    Findings are a design aid, not an approval.
    """


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the program.

    Parameters
    ----------
    arguments : sequence of str, optional
        Those of the process where none are given.

    Returns
    -------
    int
        Exit status.
    """
    prepare_streams()
    # batches of small matrices gain nothing from threads of the linear algebra, and lose much waiting for them;
    # it must be said before numpy is first imported, and a user's own word holds
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    try:
        return int(program.main(arguments, prog_name="rulecheck", standalone_mode=False) or Status.CLEAN)
    except click.Abort:
        narrate("interrupted")
        return Status.INTERRUPTED
    except click.ClickException as error:
        error.show()
        return Status.UNUSABLE
    except (AnalysisError, PluginError) as error:
        narrate(f"rulecheck: {error}")
        return Status.FAILED
    except RulecheckError as error:
        narrate(f"rulecheck: {error}")
        return Status.UNUSABLE
    except OSError as error:
        narrate(f"rulecheck: {error.filename or 'output'}: {error.strerror or error}")
        return Status.UNUSABLE
    except Exception:  # noqa: BLE001 - a fault of the program must not look like findings
        narrate(f"rulecheck: a fault of the program itself\n{traceback.format_exc()}")
        return Status.FAILED
