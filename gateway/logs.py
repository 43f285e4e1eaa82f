"""The log: one line per thing that happened, for a person on a terminal and for a machine off one.

    a room     -> structlog, or a library's own logger -> stamp, bounded queue -> thread: hide secrets, render, write

The event loop only puts a record into a queue. Rendering and writing happen in the log's own thread, so that a
terminal or a pipe that nobody reads never holds a period. Overflow rule: a line that finds the queue full is dropped
and counted, and the next line that finds room is preceded by one that says how many are missing.

Every line carries `time` (UTC, of the injected clock), `level`, `event`, and, once a run is known, `run` and `k`, the
period in which it was logged; all are stamped where the line was made, not where it was written. Off a terminal a line
is one JSON object. On a terminal it reads

    2025-01-02 03:04:05.678  WARNING  k=3472  tank-4 goes from driving to frozen: blind. ...

What is logged is a `Notice` of `gateway.sentences`: one per transition, per summary interval, per link event. Records
of libraries (asyncua and others that use the standard library's logging) end in the same lines, from WARNING up.
"""

from __future__ import annotations

import copy
import logging
import logging.handlers
import queue
import threading
from collections.abc import Callable
from typing import IO, cast

import structlog
from structlog.typing import FilteringBoundLogger

from gateway.log_lines import formatter, render_json, render_line
from gateway.sentences import Notice

CAPACITY = 10_000
"""Lines that may wait to be written."""

NOISY = ("asyncua", "aiomqtt", "paho", "mqtt", "asyncio", "numba", "uvicorn", "urllib3")
"""Libraries heard from WARNING up only, whatever level ours are logged from."""

LEVELS = {"debug": logging.DEBUG, "info": logging.INFO, "warning": logging.WARNING, "error": logging.ERROR}


class Log:
    """The log of this process, from `start` to `close`; one at a time.

    Attributes:
        run: id of the run, put on every line; None before there is one.
        k: period, put on every line; None before the first.
    """

    def __init__(
        self, stream: IO[str], wall_ns: Callable[[], int], *, json_lines: bool, level: int, capacity: int
    ) -> None:
        self.run: str | None = None
        self.k: int | None = None
        self._wall_ns = wall_ns
        self._handler = _BoundedHandler(capacity, self._stamp)
        output = logging.StreamHandler(stream)
        output.setFormatter(formatter(render_json if json_lines else render_line))
        self._listener = _Listener(self._handler.lines, output)
        root = logging.getLogger()
        self._root_before = (root.level, root.handlers[:])
        root.handlers = [self._handler]
        root.setLevel(level)
        self._noisy_before = {name: logging.getLogger(name).level for name in NOISY}
        for name in NOISY:
            logging.getLogger(name).setLevel(max(level, logging.WARNING))
        self._listener.start()

    def tell(self, notice: Notice, k: int | None = None) -> None:
        """Log a notice; `k` where it belongs to another period than the current one. Never blocks."""
        where = {} if notice.section is None else {"section": notice.section}
        when = {} if k is None else {"k": k}
        logger = cast(FilteringBoundLogger, structlog.get_logger("lengthsman"))
        write = {"info": logger.info, "warning": logger.warning, "error": logger.error}[notice.level]
        write(notice.sentence, kind=str(notice.kind), **where, facts=dict(notice.detail), **when)

    def lost(self) -> int:
        """Lines dropped so far because the queue was full."""
        return self._handler.lost

    def close(self) -> None:
        """Write what waits, stop the thread, and leave logging as it was found; safe to call twice."""
        root = logging.getLogger()
        if self._handler not in root.handlers:
            return
        level, root.handlers = self._root_before
        root.setLevel(level)
        for name, before in self._noisy_before.items():
            logging.getLogger(name).setLevel(before)
        self._listener.stop()
        structlog.reset_defaults()

    def _stamp(self, record: logging.LogRecord) -> None:
        record.__dict__.update(wall_ns=self._wall_ns(), run=self.run, k=self.k)


def start(
    stream: IO[str],
    wall_ns: Callable[[], int],
    *,
    json_lines: bool | None = None,
    level: str = "info",
    capacity: int = CAPACITY,
) -> Log:
    """Send all logging of this process to a stream, through a thread.

    Args:
        stream: where lines go, standard error as a rule.
        wall_ns: now, Unix nanoseconds.
        json_lines: JSON objects instead of readable lines; None decides by whether the stream is a terminal.
        level: least level logged, one of `LEVELS`.
        capacity: most lines that may wait to be written.

    Raises:
        ValueError: there is no such level.
    """
    if level not in LEVELS:
        raise ValueError(f"level = {level!r}: allowed are {', '.join(LEVELS)}")
    structlog.configure(
        processors=[
            structlog.stdlib.filter_by_level,
            structlog.stdlib.add_log_level,
            structlog.processors.format_exc_info,
            structlog.stdlib.ProcessorFormatter.wrap_for_formatter,
        ],
        logger_factory=structlog.stdlib.LoggerFactory(),
        wrapper_class=structlog.stdlib.BoundLogger,
        cache_logger_on_first_use=False,
    )
    as_json = not stream.isatty() if json_lines is None else json_lines
    return Log(stream, wall_ns, json_lines=as_json, level=LEVELS[level], capacity=capacity)


class _BoundedHandler(logging.handlers.QueueHandler):
    """Stamps a record and queues it; never blocks, never raises."""

    def __init__(self, capacity: int, stamp: Callable[[logging.LogRecord], None]) -> None:
        self.lines: queue.Queue[logging.LogRecord | None] = queue.Queue(capacity)
        super().__init__(self.lines)
        self._stamp = stamp
        self._missing = 0
        self._missing_lock = threading.Lock()
        self.lost = 0

    def prepare(self, record: logging.LogRecord) -> logging.LogRecord:
        """Stamp a copy. Our records keep their facts; a library's message is put together while it is still true."""
        record = copy.copy(record)
        if not isinstance(record.msg, dict):
            record.msg, record.args = record.getMessage(), None
        self._stamp(record)
        return record

    def enqueue(self, record: logging.LogRecord) -> None:
        """Queue a record, or count it as lost."""
        with self._missing_lock:
            try:
                if self._missing:
                    self.lines.put_nowait(self._gap())
                    self._missing = 0
                self.lines.put_nowait(record)
            except queue.Full:
                self._missing += 1
                self.lost += 1

    def _gap(self) -> logging.LogRecord:
        sentence = f"The log could not be written fast enough: {self._missing} lines are missing here."
        gap = logging.LogRecord("lengthsman.log", logging.WARNING, "", 0, sentence, None, None)
        self._stamp(gap)
        return gap


class _Listener(logging.handlers.QueueListener):
    """The thread that writes."""

    def __init__(self, lines: queue.Queue[logging.LogRecord | None], output: logging.Handler) -> None:
        super().__init__(lines, output)
        self._lines = lines

    def enqueue_sentinel(self) -> None:
        """Mark the end, waiting for room: what is queued before it is written first."""
        self._lines.put(None)
