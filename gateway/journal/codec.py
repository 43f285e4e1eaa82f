"""Between records and the columns of their tables; the layout of `rows` is told at the package's head.

Columns carry the names of the fields they hold, so that a table is named by a tuple of field names. Three sorts of
field are text or bytes in the file: `detail`, `versions` and `layout` are JSON, `rows` is MessagePack.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from math import isfinite
from typing import TypeVar

import msgspec

from gateway.journal.records import (
    Event,
    Layout,
    Loss,
    Outcome,
    PeriodRecord,
    RunRecord,
    RunStart,
    SectionRow,
    SignalRow,
    Timing,
    whole,
)

Column = str | bytes | int | float | None
"""What a column can hold."""

Record = TypeVar("Record", bound=msgspec.Struct)

RUN = ("id", "started_ns", "plant", "fingerprint", "versions", "host", "site", "layout", "canonical")
RUN_END = ("ended_ns", "how")
TIMING = ("start_us", "gather_us", "estimate_us", "synthesise_us", "write_us", "total_us")
PERIOD = ("k", "due_ns", *TIMING, "iterations", "worst_residual_spans", "slack_us", "rows")
EVENT = ("k", "wall_ns", "kind", "section", "detail", "sentence")
OUTCOME = ("k", "wall_ns", "request", "asked_ns", "who", "words", "state", "reason")
LOSS = ("wall_ns", "what", "cause", "count", "first_k", "last_k", "first_ns", "last_ns")


def _plain(value: object) -> object:
    """Numbers of arrays come as their library's own types; anything else is not ours to guess."""
    if hasattr(value, "tolist"):
        return value.tolist()
    raise TypeError(f"{type(value).__name__} cannot be recorded")


_rows_encoder = msgspec.msgpack.Encoder(enc_hook=_plain)
_rows_decoder = msgspec.msgpack.Decoder(tuple[tuple[SignalRow, ...], tuple[SectionRow, ...]])
_json_encoder = msgspec.json.Encoder(enc_hook=_plain, order="deterministic")
_json_decoders: Mapping[str, msgspec.json.Decoder[object]] = {
    "detail": msgspec.json.Decoder(dict[str, object]),
    "versions": msgspec.json.Decoder(dict[str, str]),
    "layout": msgspec.json.Decoder(Layout),
}


def run_columns(run: RunStart) -> tuple[Column, ...]:
    """Columns `RUN` of a run that starts."""
    return _columns(run, RUN)


def run_of(row: Sequence[object]) -> RunRecord:
    """Run of its columns `RUN`, `RUN_END`."""
    return _record(RunRecord, (*RUN, *RUN_END), row)


def period_columns(record: PeriodRecord) -> tuple[Column, ...]:
    """Columns `PERIOD` of a period.

    Raises:
        TypeError, OverflowError: a field holds what its type does not allow.
    """
    rows = _rows_encoder.encode((record.panel, record.sections))
    timing = _columns(record.timing, TIMING)
    return (record.k, record.due_ns, *timing, *_columns(record, PERIOD[-4:-1]), rows)


def period_of(row: Sequence[object]) -> PeriodRecord:
    """Period of its columns `PERIOD`."""
    fields = dict(zip(PERIOD, row, strict=True))
    timing = {name: fields.pop(name) for name in TIMING}
    panel, sections = _rows_decoder.decode(msgspec.convert(fields.pop("rows"), bytes))
    return msgspec.convert(
        {**fields, "timing": msgspec.convert(timing, Timing), "panel": panel, "sections": sections}, PeriodRecord
    )


def event_columns(event: Event) -> tuple[Column, ...]:
    """Columns `EVENT` of an event."""
    return _columns(event, EVENT)


def event_of(row: Sequence[object]) -> Event:
    """Event of its columns: seq, then `EVENT`."""
    return _record(Event, ("seq", *EVENT), row)


def outcome_columns(outcome: Outcome) -> tuple[Column, ...]:
    """Columns `OUTCOME` of a request's outcome."""
    return _columns(outcome, OUTCOME)


def outcome_of(row: Sequence[object]) -> Outcome:
    """Outcome of its columns: seq, then `OUTCOME`."""
    return _record(Outcome, ("seq", *OUTCOME), row)


def loss_columns(loss: Loss) -> tuple[Column, ...]:
    """Columns `LOSS` of a loss."""
    return _columns(loss, LOSS)


def loss_of(row: Sequence[object]) -> Loss:
    """Loss of its columns: seq, then `LOSS`."""
    return _record(Loss, ("seq", *LOSS), row)


def _columns(record: msgspec.Struct, names: Sequence[str]) -> tuple[Column, ...]:
    return tuple(_column(name, getattr(record, name)) for name in names)


def _column(name: str, value: object) -> Column:
    if name == "detail":
        return _detail(value)
    if name in _json_decoders:
        return _json_encoder.encode(value).decode()
    if isinstance(value, float):  # numpy's float64 among them
        return float(value) if isfinite(value) else None
    if isinstance(value, str):
        return whole(str(value))
    if value is None or isinstance(value, bytes | int):
        return value
    plain = _plain(value)
    if isinstance(plain, str | bytes | int | float):
        return plain
    raise TypeError(f"{name} = {value!r} cannot be recorded: a column holds one number or one text")


def _detail(value: object) -> str:
    """Facts as JSON; an event is worth more than its facts, so those that cannot be written become text."""
    try:
        return _json_encoder.encode(value).decode()
    except (TypeError, ValueError, OverflowError):
        return _json_encoder.encode({"unrecordable": whole(repr(value))}).decode()


def _record(record: type[Record], names: Sequence[str], row: Sequence[object]) -> Record:
    fields = {
        name: _json_decoders[name].decode(str(value)) if name in _json_decoders else value
        for name, value in zip(names, row, strict=True)
    }
    return msgspec.convert(fields, record)
