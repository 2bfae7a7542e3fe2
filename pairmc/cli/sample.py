"""``pairmc sample``: draws a run into its result file."""

from __future__ import annotations

import signal
from pathlib import Path
from types import FrameType

import click


@click.command()
@click.argument("run_file", metavar="RUN.toml")
@click.option(
    "--into",
    "target",
    metavar="FILE.nc",
    help="Result file; default: the run file's name with .nc, beside it.",
)
@click.option(
    "--workers",
    metavar="N",
    type=click.IntRange(min=1),
    help="Batches drawn side by side; default: the cores this process may use. "
    "The numbers are the same for any N.",
)
def sample(run_file: str, target: str | None, workers: int | None) -> int:
    """Draw a run: snapshots, tallies, and the exact expectation beside them, in one netCDF file.

    A run that was interrupted goes on with the same command; finished batches are kept in
    FILE.nc.parts until the result is complete.
    """
    from pairmc.cli.check import shell_messages
    from pairmc.cli.describe import summary_text
    from pairmc.cli.main import INTERRUPTED, TERMINATED, TerminatedError
    from pairmc.cli.progress import ProgressDisplay
    from pairmc.runfile.read import read_run_file

    run = read_run_file(run_file)
    for message in shell_messages(run):
        if "open shell" in message:
            click.echo(message, err=True)

    from pairmc.results.sample import available_cores, default_result_path, sample_into
    from pairmc.results.summary import summarise

    path = Path(target) if target else default_result_path(run)
    count = workers or available_cores()
    signal.signal(signal.SIGTERM, _terminate)
    try:
        with ProgressDisplay() as display:
            dataset = sample_into(run, path, count, display.report, display.say)
    except (KeyboardInterrupt, TerminatedError) as ended:
        click.echo(
            f"\nstopped; finished batches are kept. To go on: pairmc sample {run_file}"
            + (f" --into {target}" if target else ""),
            err=True,
        )
        return TERMINATED if isinstance(ended, TerminatedError) else INTERRUPTED
    click.echo(summary_text({"file": str(path)} | summarise(dataset)))
    return 0


def _terminate(number: int, frame: FrameType | None) -> None:
    """End the run as an interrupt from the keyboard would."""
    from pairmc.cli.main import TerminatedError

    raise TerminatedError
