"""Sentences about a run as a whole: how it starts and ends."""

from __future__ import annotations

from gateway.sentences.notice import Kind, Level, Notice, counted


def run_started(plant: str, site: str, authority: str, fingerprint: str, period_s: float, sections: int) -> Notice:
    """The gateway begins its periods."""
    return Notice(
        Kind.RUN_STARTED,
        Level.INFO,
        f"{plant} starts on site {site} with authority {authority}: {sections} sections, one period every "
        f"{period_s * 1e3:g} ms, fingerprint {fingerprint[:12]}.",
        detail={
            "plant": plant,
            "site": site,
            "authority": authority,
            "fingerprint": fingerprint,
            "period_s": period_s,
            "sections": sections,
        },
    )


def run_ended(how: str, periods: int, missed: int) -> Notice:
    """The gateway ended its periods in order. `missed` counts section-periods."""
    return Notice(
        Kind.RUN_ENDED,
        Level.ERROR if how == "failed" else Level.INFO,
        f"The run {_ENDS.get(how, how)} after {counted(periods, 'period')}, "
        f"{counted(missed, 'section-period')} missed.",
        detail={"how": how, "periods": periods, "missed": missed},
    )


_ENDS = {
    "completed": "is complete",
    "stopped": "was stopped",
    "held": "ended with sections on hold, which the next one starts with,",
    "failed": "failed",
}


def unclean_start(previous: str | None) -> Notice:
    """The previous run has no orderly end, or ended on hold, so every section starts held."""
    which = "An earlier run" if previous is None else f"Run {previous}"
    return Notice(
        Kind.UNCLEAN_START,
        Level.ERROR,
        f"{which} did not end in order, or ended on hold: every section comes up on hold. "
        "Look at the plant, then rearm.",
        detail={"previous": previous},
    )


def insecure(endpoint: str) -> Notice:
    """A live site is used without security; said at every start."""
    return Notice(
        Kind.INSECURE,
        Level.WARNING,
        f"The connection to {endpoint} is neither signed nor encrypted: anybody on its network can write to the plant.",
        detail={"endpoint": endpoint},
    )
