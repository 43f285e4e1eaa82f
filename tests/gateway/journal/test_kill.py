"""Kill -9 of a process that writes: what was acknowledged is there."""

import subprocess
import sys
from pathlib import Path

import pytest

from gateway.journal import JournalReader, Previous, last_run
from tests.gateway.journal.samples import event, period, run

CHILD = """
import sys
from pathlib import Path
from gateway.journal import Journal
from tests.gateway.journal.samples import event, period, run, wall_ns

journal = Journal.open(Path(sys.argv[1]), run(), alarm=print, wall_ns=wall_ns)
for k in range(10**9):
    journal.put_period(period(k))
    journal.put_event(event(k, k=k))
    if k % int(sys.argv[2]) == 0:
        assert journal.flush(30)
        print(k, flush=True)
"""


@pytest.mark.parametrize(("every", "lines"), [(1, 40), (25, 8)])
def test_what_was_acknowledged_survives_a_kill(tmp_path: Path, every: int, lines: int) -> None:
    """Every period and event the child called flushed is read back whole, and the run has no end.

    The child is killed while it goes on writing, right after its n-th acknowledgement was read.
    """
    path = tmp_path / "journal"
    with subprocess.Popen(
        [sys.executable, "-c", CHILD, str(path), str(every)],
        stdout=subprocess.PIPE,
        cwd=Path(__file__).parents[3],
    ) as child:
        assert child.stdout is not None
        acknowledged = [int(child.stdout.readline()) for _ in range(lines)][-1]
        child.kill()
        acknowledged = max([acknowledged, *(int(line) for line in child.stdout if line.endswith(b"\n"))])
    assert acknowledged >= every * (lines - 1)
    assert last_run(path).previous is Previous.UNCLEAN
    with JournalReader(path) as reader:
        periods = list(reader.periods(run().id, 0, acknowledged + 1))
        events = reader.events(run().id, limit=acknowledged + 1)
    assert periods == [period(k) for k in range(acknowledged + 1)]
    assert [found.k for found in events] == list(range(acknowledged + 1))
    assert events[-1].sentence == event(acknowledged).sentence
