"""One process at a time on one result file."""

from __future__ import annotations

import errno
import fcntl
import json
import os
import platform
from pathlib import Path
from types import TracebackType

from pairmc.errors import InputError, Problem

# A file system without locks: carry on unlocked rather than not at all.
_NO_LOCKS = {errno.ENOLCK, errno.ENOTSUP, errno.ENOSYS}


class OutputLock:
    """Holds a result file for one process; a context manager.

    The lock is the operating system's on an open file: it ends with the process, however that
    ends, so that a lock file left behind by a dead process stops nobody.

    Parameters
    ----------
    result
        The result file; the lock file is beside it.

    Raises
    ------
    InputError
        On entry, where another process holds it; names that process and its host.
    OSError
        Where the folder refuses.
    """

    def __init__(self, result: Path) -> None:
        self._result = result
        self._path = result.with_name(f".{result.name}.lock")
        self._handle = -1

    def __enter__(self) -> OutputLock:
        while True:
            handle = os.open(self._path, os.O_RDWR | os.O_CREAT, 0o644)
            try:
                fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
            except OSError as error:
                if error.errno not in _NO_LOCKS:
                    holder = os.pread(handle, 1000, 0)
                    os.close(handle)
                    raise self._refusal(holder) from error
            if self._is_current(handle):
                break
            os.close(handle)  # its holder has just finished and removed it
        self._handle = handle
        who = json.dumps({"host": platform.node(), "process": os.getpid()})
        os.ftruncate(handle, 0)
        os.pwrite(handle, who.encode(), 0)
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self._path.unlink(missing_ok=True)
        os.close(self._handle)

    def _is_current(self, handle: int) -> bool:
        """Return whether the locked file is still the one of that name."""
        try:
            return os.path.samestat(os.fstat(handle), os.stat(self._path))
        except FileNotFoundError:
            return False

    def _refusal(self, holder: bytes) -> InputError:
        try:
            who = json.loads(holder)
            name = f"process {who['process']} on {who['host']}"
        except (ValueError, KeyError, TypeError):
            name = "another process"
        return InputError(
            Problem(
                str(self._result),
                f"a file that {name} is sampling into",
                "one process a file",
                "wait for it, stop it, or name another file with --into",
            )
        )
