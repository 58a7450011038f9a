"""The group of all commands. A command's module is imported only when that command, or the list of all, is wanted."""

from __future__ import annotations

from importlib import import_module
from typing import Any

import click

from benchrun import __version__

#: In the order in which a user meets them.
COMMANDS = (
    "check",
    "levels",
    "rehearse",
    "run",
    "resume",
    "show",
    "derive",
    "export",
    "report",
    "archive",
    "calibrations",
    "simulate",
    "identify",
    "drivers",
    "schema",
    "completion",
)

EXIT_CODES = """\b
Exit codes:
  0  done
  1  a defect of benchrun itself
  2  wrong input, also a missing calibration
  3  refused by the level check; nothing was switched on
  4  stopped by a guard or a person
  5  instrument or disk fault
  6  safe state not confirmed; outranks all others

\b
Results go to standard output, progress and talk to standard error. The last
line of standard output of rehearse, run and resume is the run folder.
NO_COLOR=1 turns colour off. `benchrun completion SHELL` prints what the shell
needs to complete commands and options."""


class LazyGroup(click.Group):
    """A group whose commands live in modules of this package, named like the command."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002  the signature is click's
        """Return the names in the order of COMMANDS."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002
        """Import the command's module and return its `command`; None where there is no such command."""
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = import_module(f"benchrun.cli.{cmd_name}").command
        return command

    def invoke(self, ctx: click.Context) -> Any:
        """Carry the command out. A broken pipe is kept from click, which takes it for standard output's and is silent.

        That of standard output never comes here (cli.streams). Raises RuntimeError for one that does.
        """
        try:
            return super().invoke(ctx)
        except OSError as error:
            raise RuntimeError(f"{type(error).__name__}: {error}") from error


@click.group(cls=LazyGroup, epilog=EXIT_CODES, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, message="benchrun %(version)s")
def application() -> None:
    """Measure devices while they work: recipes, instruments, external-bridge correction, Touchstone."""
