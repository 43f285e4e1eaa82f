"""Requests: what people ask of a running gateway, through a small SQLite file of their own.

Problem. Page and command line must be able to ask for a hold while control drives the plant, without an open port on
control, without ever delaying a period, and without an old request acting on a later run.

Who does what:

    page, command line   `ask` (`asking`) posts one row and waits for its answer
    control's thread     `RequestDesk` (`desk`) claims pending rows into a bounded inbox, and writes answers back
    control's period     takes what is in the inbox at its start, applies or refuses each, hands the answers to the desk
                         and to the journal; neither call touches the file

One request (`file`): number (never used twice), run, asked_ns, who ("user@host"), words, taken_ns, state, reason,
answered_ns, k. Instants are Unix nanoseconds: all parties share one host and its wall clock. Its life:

    pending --claimed by the desk--> pending, taken --control's answer--> applied | refused (reason)
    pending --void, or withdrawn by whoever asked--> refused (reason)

Claiming and withdrawing exclude each other, so that what was withdrawn is never acted on. A request is **void**, and
refused, when it is taken (`void_reason`): addressed to another run, older than 10 s, or dated in the future (somebody
set the clock back). Age is judged twice, by the desk and again by the period that takes it.

The words (`words`):

    hold SECTION|all        rearm SECTION|all        authority observe|limited|full        target TAG VALUE [UNIT]
    rehearse slow PERIODS        on a bench only: so many syntheses come late
"""

from gateway.requests.asking import Answer, NobodyThereError, ask, whoami
from gateway.requests.desk import Asked, DeskStatistics, RequestDesk, Taken
from gateway.requests.file import RequestState, void_reason
from gateway.requests.words import Hold, Rearm, Rehearse, Request, RequestError, SetAuthority, SetTarget, parse_request

__all__ = [
    "Answer",
    "Asked",
    "DeskStatistics",
    "Hold",
    "NobodyThereError",
    "Rearm",
    "Rehearse",
    "Request",
    "RequestDesk",
    "RequestError",
    "RequestState",
    "SetAuthority",
    "SetTarget",
    "Taken",
    "ask",
    "parse_request",
    "void_reason",
    "whoami",
]
