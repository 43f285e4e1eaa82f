"""Tests of `gateway.requests`: the desk and whoever asks, in virtual time, without the desk's thread.

`Bench.sleep` is what whoever asks waits with: virtual time passes, and then control gets its turn.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path

import apsw
import pytest

from gateway.authority import Authority
from gateway.clock import VirtualClock
from gateway.journal import Outcome, StorageMissingError, StorageUnwritableError
from gateway.journal.database import open_to_share, open_to_write
from gateway.requests import (
    Answer,
    Asked,
    Hold,
    NobodyThereError,
    RequestDesk,
    RequestError,
    RequestState,
    SetAuthority,
    Taken,
    ask,
    file,
    void_reason,
)
from gateway.requests.desk import INBOX
from gateway.requests.file import REQUESTS
from gateway.sentences import Notice
from tests.gateway.requests.samples import NS, PLANT

RUN = "20250102-030000-test"
WHO = "mira@bench-host"


@dataclass
class Bench:
    """A desk, the virtual clock both sides read, and what control does in its turn."""

    path: Path
    clock: VirtualClock
    connection: apsw.Connection
    desk: RequestDesk
    told: list[Notice]
    journaled: list[Outcome] = field(default_factory=list)
    control: Callable[[Taken], None] | None = None

    def ask(self, words: str, timeout_s: float = 10.0) -> Answer:
        """Ask, in virtual time."""
        return ask(self.path, words, who=WHO, timeout_s=timeout_s, clock=self.clock, sleep=self.sleep)

    def post(self, words: str, run: str = RUN, age_s: float = 0.0) -> int:
        """Put a request into the file as any process could, and do not wait."""
        connection = open_to_share(self.path, REQUESTS)
        number = file.post(connection, run, self.clock.wall_ns() - round(age_s * NS), WHO, words)
        connection.close()
        return number

    def row(self, number: int) -> file.Row:
        """A request as the file has it."""
        connection = open_to_share(self.path, REQUESTS)
        found = file.row(connection, number)
        connection.close()
        assert found is not None
        return found

    def sleep(self, seconds: float) -> None:
        """Let virtual time pass, then let control have its turn."""
        self.clock.spend(round(seconds * NS))
        if self.control is not None:
            self.desk.step()
            self.control(self.desk.take(self.clock.wall_ns()))
            self.desk.step()

    def apply_all(self, taken: Taken) -> None:
        """Control applies whatever it is asked, in period 42."""
        self.journaled += taken.refused
        for asked in taken.asked:
            self.journaled.append(
                self.desk.answer(asked, RequestState.APPLIED, "", self.clock.wall_ns(), 42),
            )


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    """A desk that takes requests for one run."""
    clock = VirtualClock(7)
    told: list[Notice] = []
    connection = open_to_write(tmp_path / "requests", REQUESTS, clock.wall_ns()).connection
    desk = RequestDesk(connection, PLANT, RUN, wall_ns=clock.wall_ns, tell=told.append)
    yield Bench(tmp_path / "requests", clock, connection, desk, told)
    desk.close()


def test_a_request_is_applied_and_answered(bench: Bench) -> None:
    """Whoever asks learns that it was applied, and in which period."""
    bench.control = bench.apply_all
    assert bench.ask("hold tank-2") == Answer(1, RUN, RequestState.APPLIED, "", 42)


def test_control_learns_who_asked_what_and_when(bench: Bench) -> None:
    """The period gets the request ready to use, with its author and instant."""
    asked_ns = bench.clock.wall_ns()
    number = bench.post("authority limited")
    bench.desk.step()
    assert bench.desk.take(bench.clock.wall_ns()) == Taken(
        asked=(Asked(number, asked_ns, WHO, "authority limited", SetAuthority(Authority.LIMITED)),)
    )


def test_a_refusal_comes_with_its_reason(bench: Bench) -> None:
    """Control says no, and whoever asks is told why."""

    def refuse(taken: Taken) -> None:
        for asked in taken.asked:
            bench.desk.answer(asked, RequestState.REFUSED, "too few clean periods", bench.clock.wall_ns(), 42)

    bench.control = refuse
    answer = bench.ask("rearm tank-2")
    assert (answer.state, answer.reason) == (RequestState.REFUSED, "too few clean periods")


def test_the_answer_is_made_once_for_file_and_journal(bench: Bench) -> None:
    """What the desk gives for the journal says the same as the file: who, what, asked and answered when, in which k."""
    number = bench.post("hold tank-1")
    asked_ns = bench.clock.wall_ns()
    bench.desk.step()
    bench.clock.spend(NS)
    (asked,) = bench.desk.take(bench.clock.wall_ns()).asked
    outcome = bench.desk.answer(asked, RequestState.APPLIED, "", bench.clock.wall_ns(), 42)
    bench.desk.step()
    row = bench.row(number)
    assert outcome == Outcome(
        wall_ns=asked_ns + NS,
        request=number,
        asked_ns=asked_ns,
        who=WHO,
        words="hold tank-1",
        state="applied",
        k=42,
    )
    assert (row.answered_ns, row.state, row.reason, row.k) == (outcome.wall_ns, RequestState.APPLIED, "", 42)


def test_requests_are_taken_in_the_order_they_were_made(bench: Bench) -> None:
    """A hold after a rearm is not undone by it."""
    for words in ("rearm tank-1", "hold tank-1", "authority full"):
        bench.post(words)
    bench.desk.step()
    assert [asked.words for asked in bench.desk.take(bench.clock.wall_ns()).asked] == [
        "rearm tank-1",
        "hold tank-1",
        "authority full",
    ]


def test_a_request_is_taken_once(bench: Bench) -> None:
    """Neither the next step nor the next period sees it again."""
    bench.post("hold tank-1")
    bench.desk.step()
    assert len(bench.desk.take(bench.clock.wall_ns()).asked) == 1
    bench.desk.step()
    assert bench.desk.take(bench.clock.wall_ns()) == Taken()


@pytest.mark.parametrize(
    ("run", "age_s", "reason"),
    [
        (RUN, 0.0, None),
        (RUN, 10.0, None),
        (RUN, -0.9, None),
        (RUN, 10.1, "it was 10.1 s old when it was taken; a request is void after 10 s"),
        (RUN, -5.0, "it is dated 5.0 s in the future; was the wall clock set back?"),
        ("another", 0.0, f"it was made to run another, this is run {RUN}"),
    ],
)
def test_when_a_request_is_void(run: str, age_s: float, reason: str | None) -> None:
    """Too old, from the future, or made to another run; the tenth second still counts."""
    now_ns = 1_735_786_800 * NS
    assert void_reason(now_ns - round(age_s * NS), run, RUN, now_ns) == reason


@pytest.mark.parametrize(("run", "age_s"), [("another", 0.0), (RUN, 11.0), (RUN, -5.0)])
def test_a_void_request_never_reaches_a_period(bench: Bench, run: str, age_s: float) -> None:
    """It is refused in the file, and the period only gets the refusal, to journal it."""
    number = bench.post("authority full", run, age_s)
    bench.desk.step()
    taken = bench.desk.take(bench.clock.wall_ns())
    assert taken.asked == ()
    assert [(outcome.request, outcome.state) for outcome in taken.refused] == [(number, "refused")]
    assert bench.row(number).reason == taken.refused[0].reason != ""


def test_a_request_that_grew_old_in_the_inbox_is_void(bench: Bench) -> None:
    """No period ran for eleven seconds: what was claimed before must not act after."""
    number = bench.post("hold tank-1")
    bench.desk.step()
    bench.clock.spend(11 * NS)
    taken = bench.desk.take(bench.clock.wall_ns())
    bench.desk.step()
    assert taken.asked == ()
    assert "11.0 s old" in taken.refused[0].reason
    assert bench.row(number).state is RequestState.REFUSED


def test_words_nobody_understands_are_refused_with_the_right_ones(bench: Bench) -> None:
    """Whoever asks without a plant file learns from the gateway what would have been right."""
    bench.control = bench.apply_all
    answer = bench.ask("hold tank-11")
    assert answer.state is RequestState.REFUSED
    assert "nearest: tank-1" in answer.reason
    assert [outcome.state for outcome in bench.journaled] == ["refused"]


def test_a_request_nobody_takes_is_withdrawn(bench: Bench) -> None:
    """After the timeout it is refused in the file, and a desk that wakes up later does not act on it."""
    answer = bench.ask("hold tank-1", timeout_s=3.0)
    assert (answer.state, answer.reason) == (
        RequestState.REFUSED,
        "nobody took it within 3 s; it was withdrawn",
    )
    bench.desk.step()
    assert bench.desk.take(bench.clock.wall_ns()) == Taken()


def test_a_request_that_was_taken_is_not_withdrawn(bench: Bench) -> None:
    """Control may act on it any moment, so whoever asks is told that nobody knows, never that it was withdrawn."""

    def forget(taken: Taken) -> None:
        """Take, and never answer."""

    bench.control = forget
    answer = bench.ask("hold tank-1", timeout_s=1.0)
    assert (answer.state, answer.reason) == (
        RequestState.PENDING,
        "it was taken, but not answered yet; the journal will tell",
    )


def test_claiming_and_withdrawing_exclude_each_other(bench: Bench) -> None:
    """Whichever comes first, the other one finds it changed."""
    first, second = bench.post("hold tank-1"), bench.post("hold tank-2")
    connection = open_to_share(bench.path, REQUESTS)
    assert file.claim(connection, first, 1)
    assert not file.withdraw(connection, first, "changed my mind", 2)
    assert file.withdraw(connection, second, "changed my mind", 2)
    assert not file.claim(connection, second, 3)
    connection.close()


def test_an_answer_is_given_once(bench: Bench) -> None:
    """A second answer does not change the first."""
    number = bench.post("hold tank-1")
    connection = open_to_share(bench.path, REQUESTS)
    file.reply(connection, [file.Reply(number, RequestState.APPLIED, "", 5, 42)])
    file.reply(connection, [file.Reply(number, RequestState.REFUSED, "no", 6, 43)])
    connection.close()
    assert (bench.row(number).state, bench.row(number).k) == (RequestState.APPLIED, 42)


def test_what_a_killed_run_took_is_refused_by_the_next(bench: Bench, tmp_path: Path) -> None:
    """A request claimed and never answered does not act on a later run, and does not stay open for ever."""
    number = bench.post("hold tank-1")
    bench.desk.step()
    connection = open_to_write(bench.path, REQUESTS, bench.clock.wall_ns()).connection
    later = RequestDesk(connection, PLANT, "later", wall_ns=bench.clock.wall_ns, tell=bench.told.append)
    later.step()
    taken = later.take(bench.clock.wall_ns())
    later.close()
    assert taken.asked == ()
    assert bench.row(number).reason == taken.refused[0].reason == f"it was made to run {RUN}, this is run later"


def test_a_full_inbox_leaves_requests_in_the_file(bench: Bench) -> None:
    """More than the inbox holds stays unclaimed, and is claimed when control has answered."""
    numbers = [bench.post("hold tank-1") for _ in range(INBOX + 3)]
    bench.desk.step()
    bench.desk.step()
    first = bench.desk.take(bench.clock.wall_ns()).asked
    assert [asked.number for asked in first] == numbers[:INBOX]
    bench.desk.step()
    assert bench.desk.take(bench.clock.wall_ns()) == Taken()
    for asked in first:
        bench.desk.answer(asked, RequestState.APPLIED, "", bench.clock.wall_ns(), 1)
    bench.desk.step()
    assert [asked.number for asked in bench.desk.take(bench.clock.wall_ns()).asked] == numbers[INBOX:]


def test_taking_and_answering_touch_no_file(bench: Bench) -> None:
    """The period's two calls work while somebody holds the file locked; the answer is written when it is free."""
    number = bench.post("hold tank-1")
    bench.desk.step()
    hog = open_to_share(bench.path, REQUESTS)
    hog.execute("BEGIN EXCLUSIVE")
    (asked,) = bench.desk.take(bench.clock.wall_ns()).asked
    bench.desk.answer(asked, RequestState.APPLIED, "", bench.clock.wall_ns(), 42)
    hog.execute("ROLLBACK")
    hog.close()
    bench.desk.step()
    assert bench.row(number).state is RequestState.APPLIED


def test_a_failing_file_is_told_once_and_tried_again(bench: Bench) -> None:
    """The answer waits in memory; pauses grow; the first success is told, too."""
    number = bench.post("hold tank-1")
    bench.desk.step()
    (asked,) = bench.desk.take(bench.clock.wall_ns()).asked
    bench.desk.answer(asked, RequestState.APPLIED, "", bench.clock.wall_ns(), 42)
    hog = open_to_share(bench.path, REQUESTS)
    hog.execute("BEGIN EXCLUSIVE")
    bench.connection.setbusytimeout(0)
    assert [bench.desk.step() for _ in range(3)] == [0.1, 0.2, 0.4]
    hog.execute("ROLLBACK")
    hog.close()
    assert bench.desk.step() == 0.0
    assert bench.row(number).state is RequestState.APPLIED
    assert [notice.detail["state"] for notice in bench.told] == ["failing", "recovered"]
    assert "BusyError" in bench.told[0].sentence


def test_closing_answers_what_control_decided_and_refuses_the_rest(bench: Bench) -> None:
    """Nobody is left waiting for a run that is over."""
    decided, open_ = bench.post("hold tank-1"), bench.post("hold tank-2")
    bench.desk.step()
    asked = bench.desk.take(bench.clock.wall_ns()).asked[0]
    bench.desk.answer(asked, RequestState.APPLIED, "", bench.clock.wall_ns(), 42)
    late = bench.post("hold all")
    bench.desk.close()
    bench.desk.close()
    assert bench.row(decided).state is RequestState.APPLIED
    assert (bench.row(open_).reason, bench.row(late).reason) == ("the run ended first",) * 2


def test_after_the_close_nobody_is_there(bench: Bench) -> None:
    """Whoever asks is told at once which run ended, and nothing is posted."""
    bench.desk.close()
    with pytest.raises(NobodyThereError, match=f"run {RUN} of Two Tanks has ended. Start the gateway first"):
        bench.ask("hold tank-1")


def test_without_a_file_the_path_is_named(tmp_path: Path) -> None:
    """A wrong path is said to be one, and no file is left there."""
    with pytest.raises(StorageMissingError, match="no file of requests at"):
        ask(tmp_path / "requests", "hold tank-1", who=WHO)
    assert list(tmp_path.iterdir()) == []


def test_words_are_checked_before_posting_when_the_plant_is_known(bench: Bench) -> None:
    """A slip of the finger is told without bothering the gateway."""
    with pytest.raises(RequestError, match="nearest: hold"):
        ask(bench.path, "hodl tank-1", who=WHO, plant=PLANT, clock=bench.clock, sleep=bench.sleep)
    bench.desk.step()
    assert bench.desk.take(bench.clock.wall_ns()) == Taken()


@pytest.mark.parametrize("words", ["", "   ", "hold tank-1\nhold all", "hold \x1b[2J", "x" * 201])
def test_what_could_spoil_a_log_is_not_posted(bench: Bench, words: str) -> None:
    """Empty, endless or with control characters: refused before it is written anywhere."""
    with pytest.raises(RequestError, match="printable characters"):
        bench.ask(words)
    assert bench.desk.statistics().taken == 0


def test_a_file_that_cannot_be_written_is_told(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    """Whoever asks learns that the request was not posted, and why."""

    def full(*operands: object) -> int:
        raise apsw.FullError("database or disk is full")

    monkeypatch.setattr(file, "post", full)
    with pytest.raises(StorageUnwritableError, match="disk is full"):
        bench.ask("hold tank-1")


def test_the_request_is_ready_to_use(bench: Bench) -> None:
    """Sections are spelled out, so that control need not know what “all” means."""
    bench.post("hold all")
    bench.desk.step()
    (asked,) = bench.desk.take(bench.clock.wall_ns()).asked
    assert asked.request == Hold(("tank-1", "tank-2"))
