"""The command ``extractor``: finds the subcommand and turns every error into one line and an exit status."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from importlib import import_module
from typing import Any

import click

from extractor import __version__, collector
from extractor.commands import SETTINGS
from extractor.errors import ExtractorError, UsageError

COMMANDS = (
    "convert",
    "audit",
    "trace",
    "unlock",
    "reconcile",
    "changes",
    "sheet",
    "codebook",
    "relations",
    "quick",
)
"""Subcommands, each in the module of its name, in the order a user meets them."""


class Commands(click.Group):
    """A group that imports a subcommand when it is asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """The subcommands in their own order."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """The subcommand of a name."""
        if cmd_name not in COMMANDS:
            return None
        found: click.Command = import_module(f"extractor.commands.{cmd_name}").command
        return found

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """The subcommand of an argument list; a misspelt one is answered with the nearest."""
        word = args[0] if args else ""
        if word not in COMMANDS and not word.startswith("-") and not ctx.resilient_parsing:
            from extractor.printed.reading import quoted
            from extractor.quantities import close_matches

            near = close_matches(word, COMMANDS)
            hint = f"did you mean {near[0]}?" if near else f"there are {', '.join(COMMANDS)}"
            raise UsageError(f"no command is called {quoted(word)}: {hint}")
        return super().resolve_command(ctx, args)

    def main(
        self,
        args: Sequence[str] | None = None,
        prog_name: str | None = None,
        complete_var: str | None = None,
        standalone_mode: bool = True,
        **extra: Any,
    ) -> Any:
        """Run, and exit with the status of the contract.

        0 done, 1 interrupt, 2 usage, 3 findings, 4 unreadable input, 5 invalid codebook.
        """
        try:
            code = super().main(args, prog_name or "extractor", complete_var, standalone_mode=False, **extra)
            sys.stdout.flush()
        except ExtractorError as error:
            code = _refuse(str(error), error.exit_code)
        except click.UsageError as error:
            path = error.ctx.command_path if error.ctx is not None else "extractor"
            code = _refuse(f"{error.format_message().rstrip('.')}; see {path} --help", error.exit_code)
        except click.ClickException as error:
            code = _refuse(error.format_message(), error.exit_code)
        except (click.Abort, KeyboardInterrupt):
            code = _refuse("interrupted", 1)
        except RuntimeError as error:
            # before Python 3.12 an interrupt comes out wrapped where it meets the making of a class
            if not isinstance(error.__cause__, KeyboardInterrupt):
                raise
            code = _refuse("interrupted", 1)
        except BrokenPipeError:
            # whoever read the output has gone; nothing more can be said to them
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            code = 1
        if not standalone_mode:
            return code
        sys.exit(code if isinstance(code, int) else 0)


def _refuse(message: str, code: int) -> int:
    click.echo(f"extractor: {' '.join(message.split())}", err=True)
    return code


@click.group(cls=Commands, context_settings=SETTINGS, invoke_without_command=True)
@click.version_option(__version__, prog_name="extractor", message="%(prog)s %(version)s")
@click.pass_context
def cli(ctx: click.Context) -> None:
    """From a coded sheet of reported ANOVAs to comparable effect sizes with sampling variances.

    \b
    Examples:
      extractor convert coded.xlsx --to omega_squared --out results
      extractor audit coded.xlsx
      extractor quick "F(2, 57) = 4.31, p = .018" --to omega_squared

    \b
    Exit status:
      0 done    1 crash or interrupt    2 wrong usage    3 a finding at or above --fail-on
      4 an input that cannot be read    5 a codebook that is not valid
    """
    if ctx.invoked_subcommand is None:
        click.echo(ctx.get_help(), err=True)
        ctx.exit(2)


def main() -> None:
    """Entry point of the command."""
    collector.ease()
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            # a terminal that cannot show a Greek letter must not stop the work
            stream.reconfigure(errors="backslashreplace")
    cli.main()
