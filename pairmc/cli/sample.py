"""``pairmc sample``: draws a run into its result file."""

from __future__ import annotations

import os
import shlex
import sys
from pathlib import Path

import click

from pairmc.errors import InputError, PairmcError

# How much is said on standard error.
QUIET, NORMAL, VERBOSE = 0, 1, 2


@click.command()
@click.argument("run_file", metavar="RUN.toml", type=click.Path())
@click.option(
    "--into",
    "target",
    metavar="FILE.nc",
    type=click.Path(),
    help="Result file; default: the run file's name with .nc, beside it.",
)
@click.option(
    "--workers",
    metavar="N",
    type=click.IntRange(min=1),
    help="Batches drawn side by side; default: the cores this process may use. "
    "The numbers are the same for any N.",
)
@click.option(
    "--more",
    metavar="SNAPSHOTS",
    type=click.IntRange(min=1),
    default=None,
    help="Add so many snapshots to a finished result, or to the run's own where there is none, "
    "rounded up to whole batches.",
)
@click.option("--quiet", is_flag=True, help="No progress and no remarks; only refusals and errors.")
@click.option("--verbose", is_flag=True, help="Also versions, the run digest and every batch.")
def sample(
    run_file: str,
    target: str | None,
    workers: int | None,
    more: int | None,
    quiet: bool,
    verbose: bool,
) -> int:
    """Draw a run: snapshots, tallies, and the exact expectation beside them, in one netCDF file.

    A run that was interrupted goes on with the same command; finished batches are kept in
    FILE.nc.parts until the result is complete. More batches in the run file, or --more, extend a
    finished result without drawing anything again.
    """
    from pairmc.cli.check import open_shell_messages
    from pairmc.cli.describe import summary_text
    from pairmc.cli.main import INTERRUPTED, TERMINATED, TerminatedError
    from pairmc.cli.progress import ProgressDisplay
    from pairmc.runfile.read import read_run_file

    if quiet and verbose:
        raise click.UsageError("--quiet and --verbose exclude one another")
    run = read_run_file(run_file)

    from pairmc.results.load import load
    from pairmc.results.sample import default_result_path, sample_into
    from pairmc.results.summary import summarise
    from pairmc.running.resources import available_cores

    path = Path(target) if target else default_result_path(run)
    count = workers or available_cores()
    level = QUIET if quiet else VERBOSE if verbose else NORMAL
    try:
        with ProgressDisplay(run, level, count) as display:
            for message in open_shell_messages(run):
                display.say(message)
            sample_into(
                run,
                path,
                count,
                more or 0,
                report=display.report,
                warn=display.say,
            )
    except (KeyboardInterrupt, TerminatedError) as ended:
        click.echo(f"\nstopped; {_how_to_go_on(path)}", err=True)
        sys.stderr.flush()
        # at once: threads are still drawing, and nothing they have is lost that was finished
        os._exit(TERMINATED if isinstance(ended, TerminatedError) else INTERRUPTED)
    except InputError:
        raise
    except (OSError, PairmcError) as error:
        what = error.strerror if isinstance(error, OSError) and error.strerror else error
        click.echo(f"pairmc: {path}: {what}; {_how_to_go_on(path)}", err=True)
        return PairmcError.exit_code
    click.echo(summary_text({"file": str(path)} | summarise(load(path, snapshots=False))))
    return 0


def _how_to_go_on(path: Path) -> str:
    """Return where finished batches are, and the command that goes on, as it was typed."""
    command = shlex.join(["pairmc", *click.get_current_context().obj])
    return f"finished batches are kept in {path}.parts. To go on: {command}"
