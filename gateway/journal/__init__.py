"""The journal: one SQLite file of everything that happened, written by control alone.

Problem. A night must be told, and any stretch of it replayed bit for bit, from one file that survives `kill -9`, a
full disk and a cut supply, and whose writing never delays a sampling period.

How. Control puts frozen records into a bounded backlog (`backlog`) and goes on. One thread (`writer`) commits what it
finds there (`recorder`, `store`): write-ahead log, `synchronous = FULL`, so that what is committed is on the disk.
Readers (`reader`) open the same file read-only, at any time. The file is opened, checked and if need be moved aside by
`database`. What a record holds is in `records`.

Symbols and units. k counts periods (`gateway.clock`). Columns end in their unit: `_ns` Unix nanoseconds of the wall
clock or, for what a peer stamped, of its clock; `_us` microseconds; residuals in spans. Signals are in their own
engineering unit, estimates in SI.

Schema, version 1 (`schema`; every table's first column that is not named here is a running number):

    runs      id, started_ns, ended_ns, how (null: still running, or it never ended), plant, fingerprint,
              versions (JSON: name -> version), host, site, layout (JSON, `records.Layout`),
              canonical (the canonical plant file, bytes)
    periods   run, k, due_ns, start_us (lateness of the start), gather_us, estimate_us, synthesise_us, write_us,
              total_us, iterations, worst_residual_spans, slack_us, rows
    events    run, k, wall_ns, kind, section, detail (JSON), sentence
    outcomes  run, k, wall_ns, request, asked_ns, who, words, state, reason        what became of each request
    lost      run, wall_ns, what, cause, count, first_k, last_k, first_ns, last_ns  what could not be recorded

`periods.rows` is one MessagePack array `[panel, sections]`. `panel` holds one reading per panel signal, `sections` one
array per section, both in the order of the run's `layout`, which names what is where:

    section   [state, verdict, measured, estimates, wanted, written]
    measured  one reading per measured signal: [value as it came, status, source_ns, server_ns, quality]
    estimates float64 per state, then per disturbance; NaN where there is none
    wanted    float64 per driven signal, before saturation; NaN where there is none
    written   float64 per driven signal, as written; NaN where nothing was written

A number in a column that is not finite is stored as null; inside `rows` every float keeps its bits.
"""

from gateway.journal.exceptions import (
    StorageBusyError,
    StorageDamagedError,
    StorageError,
    StorageForeignError,
    StorageMissingError,
    StorageUnwritableError,
    StorageVersionError,
)
from gateway.journal.previous import LastRun, Previous, last_run
from gateway.journal.reader import JournalReader
from gateway.journal.recorder import Alarm, AlarmKind
from gateway.journal.records import (
    Event,
    Layout,
    Loss,
    Outcome,
    PeriodRecord,
    RunEnd,
    RunRecord,
    RunStart,
    SectionLayout,
    SectionRow,
    SignalRow,
    Timing,
    new_run_id,
)
from gateway.journal.writer import Journal, JournalStatistics

__all__ = [
    "Alarm",
    "AlarmKind",
    "Event",
    "Journal",
    "JournalReader",
    "JournalStatistics",
    "LastRun",
    "Layout",
    "Loss",
    "Outcome",
    "PeriodRecord",
    "Previous",
    "RunEnd",
    "RunRecord",
    "RunStart",
    "SectionLayout",
    "SectionRow",
    "SignalRow",
    "StorageBusyError",
    "StorageDamagedError",
    "StorageError",
    "StorageForeignError",
    "StorageMissingError",
    "StorageUnwritableError",
    "StorageVersionError",
    "Timing",
    "last_run",
    "new_run_id",
]
