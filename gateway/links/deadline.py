"""Waiting on a wire, never past an instant of the injected clock.

A library may swallow a cancellation or hang while it tidies up. So work that misses its instant is cancelled and left
behind, not awaited: the caller goes on in time whatever the library does.
"""

from __future__ import annotations

import asyncio
from collections.abc import Coroutine
from typing import Any, TypeVar

from gateway.clock import Clock

T = TypeVar("T")

_left_behind: set[asyncio.Future[Any]] = set()
"""Keeps abandoned tasks alive until they end: the loop itself holds tasks weakly (cpython#117379)."""


class DeadlineMissedError(Exception):
    """The instant came before the answer."""


class CallBrokenError(Exception):
    """The work was cancelled, but not by whoever waits for it."""


async def first_of(clock: Clock, due_ns: int, *awaited: asyncio.Future[Any]) -> None:
    """Return as soon as one of these is done, at `due_ns` otherwise; none of them is cancelled."""
    alarm = asyncio.ensure_future(clock.sleep_until(due_ns))
    try:
        await asyncio.wait({*awaited, alarm}, return_when=asyncio.FIRST_COMPLETED)
    finally:
        alarm.cancel()


async def result_by(clock: Clock, due_ns: int, work: asyncio.Future[T]) -> T:
    """Result of `work`, which goes on undisturbed when it is not there by `due_ns`.

    Raises:
        DeadlineMissedError: no result by then.
        CallBrokenError: somebody else cancelled the work.
    """
    await first_of(clock, due_ns, work)
    if not work.done():
        raise DeadlineMissedError
    if work.cancelled():
        raise CallBrokenError("cancelled from inside")
    return work.result()


async def within(clock: Clock, due_ns: int, work: Coroutine[Any, Any, T]) -> T:
    """Do `work` until `due_ns`; past that, or when the caller is cancelled, cancel it and leave it behind.

    Raises:
        DeadlineMissedError: no result by then.
        CallBrokenError: somebody else cancelled the work.
    """
    task = asyncio.ensure_future(work)
    try:
        return await result_by(clock, due_ns, task)
    finally:
        if not task.done():
            leave_behind(task)


def leave_behind(task: asyncio.Future[Any]) -> None:
    """Cancel a task without waiting for its end; whatever it still raises is nobody's business."""
    task.cancel()
    _left_behind.add(task)
    task.add_done_callback(_forget)


def _forget(task: asyncio.Future[Any]) -> None:
    _left_behind.discard(task)
    if not task.cancelled():
        task.exception()
