"""Tests of `gateway.journal.backlog`: the overflow rule and its bookkeeping."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.journal.backlog import Backlog, Fate
from gateway.journal.records import Loss
from tests.gateway.journal.samples import WALL_NS, event, outcome, period


def test_what_is_put_is_handed_out_in_order() -> None:
    """Periods and notes come out oldest first."""
    backlog = Backlog(10)
    backlog.put_period(period(1))
    backlog.put_note(event(1))
    backlog.put_period(period(2))
    backlog.put_note(outcome(2))
    batch = backlog.peek(10)
    assert [record.k for record in batch.periods] == [1, 2]
    assert batch.notes == (event(1), outcome(2))


def test_a_period_that_finds_the_queue_full_is_lost() -> None:
    """The samples give way, and the loss is counted with its period."""
    backlog = Backlog(2)
    fates = [backlog.put_period(period(k)) for k in (1, 2, 3, 4)]
    assert fates == [Fate.QUEUED, Fate.QUEUED, Fate.LOST, Fate.LOST]
    assert backlog.lost == (2, 0)
    (loss,) = backlog.peek(10).losses
    assert loss == Loss(
        what="period",
        cause="the queue was full",
        count=2,
        first_k=3,
        last_k=4,
        first_ns=period(3).due_ns,
        last_ns=period(4).due_ns,
    )


def test_an_event_takes_the_place_of_the_oldest_period() -> None:
    """No event is dropped while a sample waits."""
    backlog = Backlog(2)
    backlog.put_period(period(1))
    backlog.put_period(period(2))
    assert backlog.put_note(event(1)) is Fate.DISPLACED
    batch = backlog.peek(10)
    assert ([record.k for record in batch.periods], batch.notes) == ([2], (event(1),))
    assert [(loss.what, loss.first_k, loss.count) for loss in batch.losses] == [("period", 1, 1)]


def test_an_event_is_lost_only_among_events() -> None:
    """A queue full of events loses the newest, and counts it."""
    backlog = Backlog(2)
    backlog.put_note(event(1))
    backlog.put_note(outcome(2))
    assert backlog.put_note(event(3)) is Fate.LOST
    assert backlog.lost == (0, 1)
    (loss,) = backlog.peek(10).losses
    assert (loss.what, loss.first_k, loss.first_ns) == ("event", None, WALL_NS + 3)


def test_a_period_being_written_is_never_displaced() -> None:
    """What may already be on the disk is not counted as lost."""
    backlog = Backlog(2)
    backlog.put_period(period(1))
    backlog.put_period(period(2))
    assert len(backlog.peek(1).periods) == 1
    assert backlog.put_note(event(1)) is Fate.DISPLACED
    assert backlog.put_note(event(2)) is Fate.LOST
    backlog.done()
    assert [(loss.what, loss.first_k) for loss in backlog.peek(10).losses] == [("period", 2), ("event", None)]


def test_what_could_not_be_written_is_handed_out_again() -> None:
    """A failed attempt changes nothing, losses included."""
    backlog = Backlog(2)
    for k in (1, 2, 3):
        backlog.put_period(period(k))
    first = backlog.peek(10)
    backlog.put_period(period(4))
    backlog.keep()
    second = backlog.peek(10)
    assert second.periods == first.periods
    assert (first.losses[0].count, second.losses[0].count, second.losses[0].last_k) == (1, 2, 4)


def test_a_loss_is_handed_out_once() -> None:
    """After it is on the disk it is not told again."""
    backlog = Backlog(2)
    for k in (1, 2, 3):
        backlog.put_period(period(k))
    backlog.peek(10)
    backlog.done()
    assert backlog.empty
    assert backlog.peek(10).losses == ()


def test_a_capacity_that_cannot_work_is_refused() -> None:
    """The error names the value and the fix."""
    with pytest.raises(ValueError, match=r"capacity = 1: .*at least 2"):
        Backlog(1)


@given(
    st.integers(2, 6),
    st.lists(st.sampled_from(["period", "event", "peek 1", "peek 9", "done", "keep"]), max_size=60),
)
def test_everything_is_written_or_counted_and_the_bound_holds(capacity: int, steps: list[str]) -> None:
    """Whatever happens in whatever order: put = written + waiting + lost, once each, never more than the capacity."""
    backlog = Backlog(capacity)
    put: list[object] = []
    written: list[object] = []
    told = 0
    peeked = False
    for number, step in enumerate(steps):
        if step == "period":
            put.append(number)
            backlog.put_period(period(number))
        elif step == "event":
            put.append(number)
            backlog.put_note(event(number, k=number))
        elif step.startswith("peek") and not peeked:
            batch, peeked = backlog.peek(int(step[-1])), True
        elif step == "done" and peeked:
            written += [record.k for record in (*batch.periods, *batch.notes)]
            told += sum(loss.count for loss in batch.losses)
            backlog.done()
            peeked = False
        elif step == "keep" and peeked:
            backlog.keep()
            peeked = False
        assert len(backlog) <= capacity
    if peeked:
        backlog.keep()
    rest = backlog.peek(1000)
    waiting = [record.k for record in (*rest.periods, *rest.notes)]
    told += sum(loss.count for loss in rest.losses)
    assert len(set(written) | set(waiting)) == len(written) + len(waiting)
    assert told == sum(backlog.lost)
    assert len(put) == len(written) + len(waiting) + told
