"""What is worth a line in the log, as the pure rooms hand it out; only those with a clock and a wire log it."""

from __future__ import annotations

import logging
from dataclasses import dataclass

from sim_plant.panel import EventKind, PanelEvent

_LEVELS = {
    EventKind.TRIPPED: logging.WARNING,
    EventKind.UNTRIPPED: logging.INFO,
    EventKind.PERMIT: logging.WARNING,
    EventKind.TAKEN: logging.INFO,
    EventKind.HANDED_BACK: logging.INFO,
    EventKind.REFUSED: logging.WARNING,
    EventKind.REFUSED_AGAIN: logging.DEBUG,
    EventKind.ACCEPTED_AGAIN: logging.INFO,
    EventKind.CLAMPED: logging.WARNING,
}


@dataclass(frozen=True)
class Note:
    """One sentence: name of its logger, its level, and itself."""

    logger: str
    level: int
    text: str

    def log(self) -> None:
        """Write it to the log."""
        logging.getLogger(self.logger).log(self.level, "%s", self.text)


def of_panel(event: PanelEvent) -> Note:
    """Return the panel's event as a note."""
    return Note("sim_plant.panel", _LEVELS[event.kind], event.text)


def of_fault(text: str) -> Note:
    """Return what happened to a fault as a note."""
    return Note("sim_plant.faults", logging.WARNING, text)


def of_plant(text: str) -> Note:
    """Return what the physics did as a note."""
    return Note("sim_plant.plant", logging.WARNING, text)
