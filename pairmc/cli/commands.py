"""The commands, and how their errors become messages and exit codes."""

from __future__ import annotations

import os
import sys
from importlib import import_module
from typing import Any

import click

from pairmc.cli.main import INTERRUPTED
from pairmc.errors import InputError, PairmcError

# Each command's module, imported when the command is used.
COMMANDS = ("check", "sample", "describe", "plot")


class LazyGroup(click.Group):
    """A group whose commands are imported when they are asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Return the names, in the order a run goes through them."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Return the named command, or None."""
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = getattr(import_module(f"pairmc.cli.{cmd_name}"), cmd_name)
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Return the command; refuse an unknown one, naming those there are."""
        if args and self.get_command(ctx, args[0]) is None and not args[0].startswith("-"):
            ctx.fail(f"no command {args[0]!r}; there are: {', '.join(COMMANDS)}")
        return super().resolve_command(ctx, args)


def _show_version(ctx: click.Context, parameter: click.Parameter, value: bool) -> None:
    if value and not ctx.resilient_parsing:
        from importlib.metadata import version

        click.echo(f"pairmc {version('pairmc')}")
        ctx.exit()


@click.command(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"]})
@click.option(
    "--version",
    is_flag=True,
    is_eager=True,
    expose_value=False,
    callback=_show_version,
    help="Show the version and exit.",
)
def commands() -> None:
    """What Pauli exclusion alone does to the positions of fermions.

    pairmc draws exact, independent snapshots of a free Fermi gas, counts pairs, and stores the
    pair correlation and the exchange hole with the exact expectation beside them.

    \b
    A run, from beginning to end:
      pairmc check RUN.toml                     what the run is and what it costs
      pairmc sample RUN.toml                    draw it; writes RUN.nc
      pairmc describe RUN.nc                    scales, hole depth, p-values
      pairmc plot RUN.nc --into PICTURE.png     the exchange hole

    Results go to standard output, everything else to standard error. Exit codes: 0 done, 1 failed
    while working, 2 refused input, 130 interrupted, 143 terminated.
    """


def run_command(arguments: list[str] | None) -> int:
    """Run the command that the arguments name and return its exit code."""
    try:
        typed = sys.argv[1:] if arguments is None else arguments
        outcome: Any = commands.main(
            arguments, prog_name="pairmc", standalone_mode=False, obj=typed
        )
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except click.exceptions.Exit as leave:
        return leave.exit_code
    except (KeyboardInterrupt, click.Abort):
        return INTERRUPTED
    except InputError as error:
        _say_refused(error)
        return error.exit_code
    except PairmcError as error:
        click.echo(f"pairmc: {error}", err=True)
        return error.exit_code
    except BrokenPipeError:
        # whoever read the output has gone; nothing more can be said there
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1
    except OSError as error:
        click.echo(
            f"pairmc: {error.strerror or error}: {error.filename or ''}".rstrip(": "), err=True
        )
        return 1
    return outcome if isinstance(outcome, int) else 0


def _say_refused(error: InputError) -> None:
    """Print all problems, one a line."""
    for line in str(error).splitlines():
        click.echo(f"pairmc: {line}", err=True)
