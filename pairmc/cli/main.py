"""Where the command line begins and ends: signals and exit codes.

Little is imported until the handlers are there, so that an interrupt finds them early.
"""

from __future__ import annotations

import sys
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from types import FrameType

INTERRUPTED, TERMINATED = 130, 143


class TerminatedError(BaseException):
    """The process was asked to end (SIGTERM)."""


def main(arguments: list[str] | None = None) -> None:
    """Run the command line and exit with its code."""
    sys.exit(run(arguments))


def _terminate(number: int, frame: FrameType | None) -> None:
    """End as an interrupt from the keyboard would."""
    raise TerminatedError


def run(arguments: list[str] | None = None) -> int:
    """Run the command line and return its exit code."""
    try:
        import signal

        before = signal.signal(signal.SIGTERM, _terminate)
        try:
            from pairmc.cli.commands import run_command

            return run_command(arguments)
        finally:
            signal.signal(signal.SIGTERM, before)
    except KeyboardInterrupt:
        return INTERRUPTED
    except TerminatedError:
        return TERMINATED
