"""Several processes and threads ask one gateway at once, with the desk's own thread and the real clock."""

from __future__ import annotations

import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from gateway.journal import StorageBusyError
from gateway.requests import Answer, RequestDesk, RequestState, ask
from gateway.sentences import Notice
from tests.gateway.requests.samples import PLANT

pytestmark = pytest.mark.real_time

PATIENCE_S = 60.0

CHILD = """
import sys
from pathlib import Path
from gateway.requests import ask

for _ in range(int(sys.argv[2])):
    answer = ask(Path(sys.argv[1]), "hold tank-1", who=sys.argv[3], timeout_s=60.0)
    print(answer.number, answer.state, flush=True)
"""


@contextmanager
def gateway(path: Path, told: list[Notice]) -> Iterator[list[tuple[int, str]]]:
    """A desk with its thread, and a loop that applies whatever it is asked; gives (number, who) of what was taken."""
    desk = RequestDesk.open(path, PLANT, "run-1", wall_ns=time.time_ns, tell=told.append, poll_s=0.002)
    taken: list[tuple[int, str]] = []
    over = threading.Event()

    def control() -> None:
        while not over.wait(0.002):
            for asked in desk.take(time.time_ns()).asked:
                taken.append((asked.number, asked.who))
                desk.answer(asked, RequestState.APPLIED, "", time.time_ns(), len(taken))

    thread = threading.Thread(target=control)
    thread.start()
    try:
        yield taken
    finally:
        over.set()
        thread.join()
        desk.close()


def test_every_request_of_many_processes_and_threads_is_answered_once(tmp_path: Path) -> None:
    """Two processes and three threads ask eight times each: all applied, each number once, nothing lost or doubled."""
    path, told, times = tmp_path / "requests", list[Notice](), 8
    answers: list[Answer] = []

    def many(who: str) -> None:
        answers.extend(ask(path, "hold tank-1", who=who, timeout_s=PATIENCE_S) for _ in range(times))

    with gateway(path, told) as taken:
        children = [
            subprocess.Popen(
                [sys.executable, "-c", CHILD, str(path), str(times), f"child-{number}@host"],
                stdout=subprocess.PIPE,
                text=True,
                cwd=Path(__file__).parents[3],
            )
            for number in range(2)
        ]
        threads = [threading.Thread(target=many, args=(f"thread-{number}@host",)) for number in range(3)]
        for thread in threads:
            thread.start()
        printed = [line.split() for child in children for line in child.communicate(timeout=PATIENCE_S)[0].splitlines()]
        for thread in threads:
            thread.join()
    answered = [answer.number for answer in answers] + [int(number) for number, _ in printed]
    states = {str(answer.state) for answer in answers} | {state for _, state in printed}
    assert sorted(answered) == list(range(1, 5 * times + 1))
    assert states == {"applied"}
    assert sorted(number for number, _ in taken) == sorted(answered)
    assert {who for _, who in taken} == {f"{kind}@host" for kind in _names()}
    assert told == []


def test_two_gateways_cannot_take_from_one_file(tmp_path: Path) -> None:
    """The second is refused, so that no request can be answered by the wrong one."""
    with gateway(tmp_path / "requests", []), pytest.raises(StorageBusyError, match="written by process"):
        RequestDesk.open(tmp_path / "requests", PLANT, "run-2", wall_ns=time.time_ns, tell=print)


def test_a_damaged_file_is_moved_aside_and_told(tmp_path: Path) -> None:
    """Requests work again at once; what was there is kept."""
    (tmp_path / "requests").write_bytes(bytes(range(256)) * 64)
    told: list[Notice] = []
    with gateway(tmp_path / "requests", told):
        assert ask(tmp_path / "requests", "rearm all", who="mira@host", timeout_s=PATIENCE_S).k == 1
    assert "was damaged. It was kept as requests.damaged-" in told[0].sentence


@pytest.mark.filterwarnings("ignore::pytest.PytestUnhandledThreadExceptionWarning")
def test_a_dead_thread_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """An error of ours in the thread does not go unseen."""
    dead = threading.Event()

    def fail(desk: RequestDesk) -> float:
        raise ZeroDivisionError("our fault")

    monkeypatch.setattr(RequestDesk, "step", fail)
    told: list[Notice] = []

    def tell(notice: Notice) -> None:
        told.append(notice)
        dead.set()

    desk = RequestDesk.open(tmp_path / "requests", PLANT, "run-1", wall_ns=time.time_ns, tell=tell, poll_s=0.001)
    assert dead.wait(PATIENCE_S)
    desk.close()
    assert not desk.statistics().alive
    assert "ZeroDivisionError: our fault" in told[0].sentence


def _names() -> list[str]:
    return [f"child-{number}" for number in range(2)] + [f"thread-{number}" for number in range(3)]
