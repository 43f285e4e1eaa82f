"""What a log line looks like, and what must never be in one. Works on one record at a time, in the log's own thread.

A record arrives stamped (`gateway.logs`) with `wall_ns`, `run` and `k`. Secrets are taken out before anything is
rendered: values under a name that means one, the same inside text ("password=..."), and user and password inside an
address. That is the last net; nothing secret should be logged in the first place.
"""

from __future__ import annotations

import re
from collections.abc import Callable, MutableMapping
from datetime import UTC, datetime
from typing import cast

import msgspec
import structlog
from structlog.typing import EventDict, WrappedLogger

SECRET_NAMES = ("password", "passphrase", "passwd", "secret", "token", "private_key", "credential", "authorization")
HIDDEN = "(hidden)"

_SECRET_IN_TEXT = re.compile(
    rf"""(?i)([\w-]*(?:{"|".join(SECRET_NAMES)})[\w-]*["']?\s*[=:]\s*)("[^"]*"|'[^']*'|(?:bearer\s+|basic\s+)?\S+)"""
)
_USER_IN_ADDRESS = re.compile(r"(?i)\b([a-z][a-z0-9+.-]*://)[^\s/]+@")

Render = Callable[[WrappedLogger, str, EventDict], str]


def formatter(render: Render) -> structlog.stdlib.ProcessorFormatter:
    """Formatter for our records and those of libraries: stamped, without secrets, rendered."""
    return structlog.stdlib.ProcessorFormatter(
        foreign_pre_chain=[structlog.stdlib.add_log_level, _name_library, structlog.processors.format_exc_info],
        processors=[_add_stamp, structlog.stdlib.ProcessorFormatter.remove_processors_meta, _redact, render],
    )


def render_json(logger: WrappedLogger, method: str, event: EventDict) -> str:
    """One JSON object; a number that is not finite is null."""
    return msgspec.json.encode(dict(event)).decode()


def render_line(logger: WrappedLogger, method: str, event: EventDict) -> str:
    """One line to read. A notice's sentence holds its facts already, other lines show theirs behind it.

    Of a traceback the last line is shown; JSON lines have it whole. Nothing a peer sent can move the cursor.
    """
    time = str(event["time"]).replace("T", " ").removesuffix("Z")
    k = f"k={event['k']}  " if "k" in event else ""
    library = f"{event['library']}: " if "library" in event else ""
    exception = str(event.get("exception", "")).strip().rpartition("\n")[2]
    tail = f" ({exception})" if exception else ""
    shown = {} if "kind" in event else {name: event[name] for name in event if name not in _PLACED}
    facts = "".join(f"  {name}={value}" for name, value in shown.items())
    line = f"{time}  {str(event['level']).upper():7}  {k}{library}{event['event']}{tail}{facts}"
    return "".join(character if character.isprintable() else " " for character in line)


_PLACED = frozenset({"time", "level", "event", "run", "k", "library", "exception"})


def redacted(value: object, name: str = "") -> object:
    """Return the value without secrets, as JSON types; objects become their `repr`.

    Args:
        value: what is to be logged.
        name: what it goes under.
    """
    if any(secret in name.lower() for secret in SECRET_NAMES):
        return HIDDEN
    if value is None or isinstance(value, bool | float) or (isinstance(value, int) and abs(value) < 2**63):
        return value
    if isinstance(value, dict):
        return {str(redacted(str(key))): redacted(item, str(key)) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [redacted(item) for item in value]
    text = value if isinstance(value, str) else repr(value)
    text = text.encode("utf-8", "replace").decode()  # Half characters come from file names, and are no JSON.
    return _USER_IN_ADDRESS.sub(rf"\1{HIDDEN}@", _SECRET_IN_TEXT.sub(rf"\1{HIDDEN}", text))


def _name_library(logger: WrappedLogger, method: str, event: EventDict) -> EventDict:
    record = event["_record"]
    event["library"] = record.name
    if record.exc_info:
        event["exc_info"] = record.exc_info
    return event


def _add_stamp(logger: WrappedLogger, method: str, event: EventDict) -> EventDict:
    record = event["_record"]
    stamped: dict[str, object] = {
        "time": _utc(record.wall_ns),
        "level": event.pop("level"),
        "event": event.pop("event"),
    }
    if record.run is not None:
        stamped["run"] = record.run
    k = event.pop("k", record.k)
    if k is not None:
        stamped["k"] = k
    return {**stamped, **event}


def _utc(wall_ns: int) -> str:
    seconds, rest_ns = divmod(wall_ns, 10**9)
    return f"{datetime.fromtimestamp(seconds, UTC):%Y-%m-%dT%H:%M:%S}.{rest_ns // 10**6:03d}Z"


def _redact(logger: WrappedLogger, method: str, event: EventDict) -> EventDict:
    return cast(MutableMapping[str, object], redacted(dict(event)))
