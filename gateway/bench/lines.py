"""What happens, as lines a person can follow: steps of the story, and what the gateway says in its journal.

The gateway's sentences are those of its log. Where one cause moves several sections in one period, one line tells all
of them: eight sections that freeze together are one thing that happened.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum
from itertools import groupby

from gateway.hold import State
from gateway.journal import Event
from gateway.sentences import Kind

MOST_NAMED = 3


class Source(StrEnum):
    """Who says a line."""

    STORY = "story"
    GATEWAY = "gateway"
    BENCH = "bench"


@dataclass(frozen=True)
class Line:
    """One line.

    Attributes:
        at_s: seconds after the first period.
        source: who says it.
        text: the sentence.
        for_person: whether it waits for somebody to act.
    """

    at_s: float
    source: Source
    text: str
    for_person: bool = False

    def __str__(self) -> str:
        return f"{clock_text(self.at_s)}  {self.source:<7}  {'! ' if self.for_person else ''}{self.text}"


def clock_text(seconds: float) -> str:
    """Return 75.2 as 01:15, an hour as 1:00:00."""
    whole = int(max(0.0, seconds))
    hours, rest = divmod(whole, 3600)
    text = f"{rest // 60:02d}:{rest % 60:02d}"
    return f"{hours}:{text}" if hours else text


def lines_of(events: Sequence[Event], first_ns: int, sections: int) -> list[Line]:
    """Lines of events.

    Args:
        events: in the order they were told.
        first_ns: wall-clock instant of time zero, Unix nanoseconds.
        sections: how many the plant has.
    """
    lines = []
    for _, group in groupby(events, _what):
        together = list(group)
        first = together[0]
        lines.append(
            Line(
                at_s=(first.wall_ns - first_ns) / 1e9,
                source=Source.GATEWAY,
                text=_joined(together, sections),
                for_person=needs_person(first),
            )
        )
    return lines


def needs_person(event: Event) -> bool:
    """Whether an event waits for somebody to act (alarm practice, IEC 62682: an alarm is what needs an action)."""
    if event.kind == Kind.TRANSITION:
        return event.detail.get("after") == State.HOLDING and event.detail.get("before") != State.HOLDING
    if event.kind in _FOR_PERSON:
        key, wrong = _FOR_PERSON[event.kind]
        return key is None or event.detail.get(key) in wrong
    return False


_FOR_PERSON: Mapping[str, tuple[str | None, tuple[object, ...]]] = {
    Kind.PANEL: ("tripped", (True,)),
    Kind.PERMIT: ("on", (False,)),
    Kind.LINK: ("state", ("down",)),
    Kind.JOURNAL: ("state", ("failing", "losing", "dead", "unrecordable", "moved_aside")),
    Kind.UNCLEAN_START: (None, ()),
    Kind.TASK_DIED: (None, ()),
    Kind.JOURNAL_LOST: (None, ()),
}
"""Kind of event -> which detail makes it one for a person, and its values; None: always."""


def _what(event: Event) -> tuple[object, ...]:
    """Equal for events that are one thing: transitions of one period with one cause."""
    if event.kind != Kind.TRANSITION or event.section is None:
        return (event.seq,)
    return (event.k, *(event.detail.get(key) for key in ("before", "after", "cause", "misses")))


def _joined(together: Sequence[Event], sections: int) -> str:
    first = together[0]
    if len(together) == 1 or first.section is None:
        return first.sentence
    rest = first.sentence.removeprefix(f"{first.section} goes ").replace(" It waits for ", " Each waits for ")
    names = [event.section or "" for event in together]
    if len(names) == sections:
        subject = f"All {sections} sections"
    elif len(names) <= MOST_NAMED:
        subject = f"{', '.join(names[:-1])} and {names[-1]}"
    else:
        subject = f"{len(names)} sections ({', '.join(names[:MOST_NAMED])} ...)"
    return f"{subject} go {rest}"
