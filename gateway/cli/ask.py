"""`lengthsman ask`: ask something of a running gateway, and wait for its answer."""

from __future__ import annotations

from pathlib import Path

import click

from gateway.cli.desks import requests_file
from gateway.cli.facts import json_text
from gateway.cli.faults import CommandError
from gateway.exit_codes import ExitCode
from gateway.journal import StorageError
from gateway.requests import Answer, NobodyThereError, RequestError, RequestState, ask, whoami


@click.command("ask", context_settings={"ignore_unknown_options": True})
@click.option(
    "--at", type=click.Path(path_type=Path), metavar="PATH", help="Folder, journal or file of requests of the run."
)
@click.option("--json", "json_wanted", is_flag=True, help="Print the answer as one JSON object.")
@click.argument("words", nargs=-1, required=True)
def command(at: Path | None, words: tuple[str, ...], *, json_wanted: bool) -> ExitCode:
    """Ask a running gateway for something and print its answer.

    \b
    hold SECTION|all                    put a section on hold
    rearm SECTION|all                   end a hold
    authority observe|limited|full      how far the gateway may act
    target TAG VALUE                    ask target tank-3.level 18.5
    rehearse slow PERIODS               on a bench: so many syntheses come late

    Exit code 1 when it is refused, 3 when nobody answers.
    """
    path = requests_file(at)
    try:
        answer = ask(path, " ".join(words), who=whoami())
    except RequestError as error:
        raise CommandError(str(error)) from error
    except (NobodyThereError, StorageError) as error:
        raise CommandError(str(error), ExitCode.UNREACHABLE) from error
    code = _code(answer)
    if json_wanted:
        facts = {"number": answer.number, "run": answer.run, "state": answer.state, "reason": answer.reason}
        click.echo(json_text({**facts, "k": answer.k, "exit": int(code)}))
        return code
    because = f": {answer.reason}" if answer.reason else ""
    period = "" if answer.k is None else f" in period {answer.k}"
    click.echo(f"“{' '.join(words)}” is {answer.state}{period}{because}")
    return code


def _code(answer: Answer) -> ExitCode:
    """Nobody answered when nobody took it: it is pending still, or was withdrawn without a period."""
    if answer.state is RequestState.APPLIED:
        return ExitCode.DONE
    if answer.state is RequestState.PENDING or "withdrawn" in answer.reason:
        return ExitCode.UNREACHABLE
    return ExitCode.CRITERIA_FAILED
