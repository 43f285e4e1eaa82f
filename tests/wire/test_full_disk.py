"""A full disk under a running gateway: an alarm, and the periods go on."""

from __future__ import annotations

import resource
import subprocess
import sys
from pathlib import Path

import pytest

from tests.wire.processes import PATIENCE_S, ROOT, TARN_ROW, plant

pytestmark = [pytest.mark.wire, pytest.mark.real_time]

MOST_BYTES = 200_000
"""Largest file the gateway may write; its journal passes that within seconds, and a log line never does."""


def test_a_journal_that_cannot_grow_stops_nothing(tmp_path: Path) -> None:
    """The log says what is wrong; no section freezes because of it, and the run ends as it should."""
    simulated, endpoint = plant(tmp_path)
    with simulated:
        words = ("run", str(TARN_ROW), "--site", "bench", "--endpoint", endpoint, "--for", "15s")
        done = subprocess.run(
            [sys.executable, "-m", "gateway.cli", *words, "--journal", str(tmp_path / "journal.sqlite")],
            cwd=ROOT,
            capture_output=True,
            text=True,
            timeout=4 * PATIENCE_S,
            check=False,
            preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (MOST_BYTES, MOST_BYTES)),
        )
    assert done.returncode == 0, done.stderr
    assert "The journal cannot be written" in done.stderr
    assert "The run is complete after" in done.stderr
    told = done.stderr[done.stderr.index("The journal cannot be written") :]
    assert "to frozen" not in told
    assert "to holding" not in told
