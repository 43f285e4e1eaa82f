"""Tests of `gateway.journal.lock`."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

from gateway.journal.exceptions import StorageBusyError, StorageUnwritableError
from gateway.journal.lock import WriterLock

HOLD = """
import sys
from pathlib import Path
from gateway.journal.lock import WriterLock
lock = WriterLock(Path(sys.argv[1]))
print("held", flush=True)
sys.stdin.read()
"""


def test_a_second_writer_is_refused_by_name(tmp_path: Path) -> None:
    """The error names the process that has the file."""
    lock = WriterLock(tmp_path / "a")
    with pytest.raises(StorageBusyError, match=f"written by process {os.getpid()}"):
        WriterLock(tmp_path / "a")
    lock.release()


def test_a_released_file_can_be_locked_again(tmp_path: Path) -> None:
    """The lock file that stays behind is no obstacle; releasing twice is none either."""
    first = WriterLock(tmp_path / "a")
    first.release()
    first.release()
    WriterLock(tmp_path / "a").release()


def test_a_killed_writer_leaves_no_lock(tmp_path: Path) -> None:
    """The system drops the lock with the process, so that a restart is never locked out."""
    with subprocess.Popen(
        [sys.executable, "-c", HOLD, str(tmp_path / "a")], stdin=subprocess.PIPE, stdout=subprocess.PIPE
    ) as child:
        assert child.stdout is not None
        assert child.stdout.readline() == b"held\n"
        with pytest.raises(StorageBusyError, match=f"process {child.pid}"):
            WriterLock(tmp_path / "a")
        child.kill()
    WriterLock(tmp_path / "a").release()


def test_a_folder_that_is_not_there_is_named(tmp_path: Path) -> None:
    """The error names the lock file that cannot be created."""
    with pytest.raises(StorageUnwritableError, match=r"a\.lock cannot be created"):
        WriterLock(tmp_path / "nowhere" / "a")
