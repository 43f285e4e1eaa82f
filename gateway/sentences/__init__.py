"""Every sentence a person reads in the log and in the journal's events, in one place.

One function per thing that can happen. It takes what happened as typed values and returns a `Notice`: the sentence, and
the same facts as data. The same notice becomes one log line (`gateway.logs`) and one journal event
(`gateway.journal.Event.of`), so that both tell one story in one wording.

A sentence stands alone: it names the section, the peer or the person, says what is so now, and, where somebody has to
do something about it, what. Numbers carry their unit. Levels: `info` is the ordinary course of a night, `warning` is
what the gateway copes with, `error` is what waits for a person. The module is long because it is the one place.
"""

from gateway.sentences.notice import Kind, Level, Notice
from gateway.sentences.people import authority, authority_denied, rehearsal, request
from gateway.sentences.run import insecure, run_ended, run_started, unclean_start
from gateway.sentences.sections import quality, transition, transitions
from gateway.sentences.service import Interval, clock_stepped, skipped, summary, synthesis_broken, task_died
from gateway.sentences.storage import (
    journal_behind,
    journal_dead,
    journal_failing,
    journal_losing,
    journal_lost,
    journal_recovered,
    journal_unfinished,
    journal_unrecordable,
    moved_aside,
    requests_dead,
    requests_failing,
    requests_recovered,
)
from gateway.sentences.wires import (
    hand_back_unanswered,
    link_lost,
    link_retry,
    link_up,
    panel,
    permit,
    set_refused,
    write_unknown,
)

__all__ = [
    "Interval",
    "Kind",
    "Level",
    "Notice",
    "authority",
    "authority_denied",
    "clock_stepped",
    "hand_back_unanswered",
    "insecure",
    "journal_behind",
    "journal_dead",
    "journal_failing",
    "journal_losing",
    "journal_lost",
    "journal_recovered",
    "journal_unfinished",
    "journal_unrecordable",
    "link_lost",
    "link_retry",
    "link_up",
    "moved_aside",
    "panel",
    "permit",
    "quality",
    "rehearsal",
    "request",
    "requests_dead",
    "requests_failing",
    "requests_recovered",
    "run_ended",
    "run_started",
    "set_refused",
    "skipped",
    "summary",
    "synthesis_broken",
    "task_died",
    "transition",
    "transitions",
    "unclean_start",
    "write_unknown",
]
