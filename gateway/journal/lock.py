"""One writer per file, across processes: an advisory lock that the system drops when its holder dies."""

from __future__ import annotations

import fcntl
import os
from pathlib import Path

from gateway.journal.exceptions import StorageBusyError, StorageUnwritableError


class WriterLock:
    """Held from construction to `release`; the lock file stays, holding the number of the last process.

    Raises:
        StorageBusyError: another process holds it.
        StorageUnwritableError: the lock file cannot be created.
    """

    def __init__(self, path: Path) -> None:
        lock_path = path.with_name(path.name + ".lock")
        try:
            self._descriptor = os.open(lock_path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o644)
        except OSError as error:
            raise StorageUnwritableError(
                f"{lock_path} cannot be created: {error.strerror}. Give another path."
            ) from error
        try:
            fcntl.flock(self._descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            holder = os.read(self._descriptor, 32).decode(errors="replace").strip() or "unknown"
            os.close(self._descriptor)
            raise StorageBusyError(
                f"{path} is being written by process {holder}; stop that one first, or give another path"
            ) from None
        os.ftruncate(self._descriptor, 0)
        os.write(self._descriptor, f"{os.getpid()}\n".encode())

    def release(self) -> None:
        """Let another process have it; safe to call twice."""
        if self._descriptor >= 0:
            os.close(self._descriptor)
            self._descriptor = -1
