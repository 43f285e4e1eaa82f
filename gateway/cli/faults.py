"""Every way a command can end that is not its proper end: one message, one exit code."""

from __future__ import annotations

import sys
import tempfile
import time
import traceback
from collections.abc import Sequence
from difflib import get_close_matches
from pathlib import Path

import click

from gateway.exit_codes import ExitCode


class CommandError(Exception):
    """A command cannot do what was asked; the message is for the person, the code for the shell."""

    def __init__(self, message: str, code: ExitCode = ExitCode.WRONG_CALL) -> None:
        super().__init__(message)
        self.code = code


def run_command(command: click.Command, arguments: Sequence[str] | None = None) -> ExitCode:
    """Run a command; whatever it raises becomes a message on standard error and a code."""
    try:
        code = command.main(
            args=None if arguments is None else list(arguments), prog_name="lengthsman", standalone_mode=False
        )
        return code if isinstance(code, ExitCode) else ExitCode.DONE
    except CommandError as error:
        return _say(str(error), error.code)
    except click.ClickException as error:
        return _say(_of_click(error), ExitCode.WRONG_CALL)
    except (click.Abort, KeyboardInterrupt):
        return _say("Stopped.", ExitCode.DONE)
    except BrokenPipeError:
        sys.stdout = None  # whoever read us is gone; nothing is left to be said, not even by the interpreter's end
        return ExitCode.DONE
    except Exception as error:  # noqa: BLE001 - the last resort: anything that gets here is our fault
        return _our_fault(error)


def _say(message: str, code: ExitCode) -> ExitCode:
    click.echo(message, err=True)
    return code


def _of_click(error: click.ClickException) -> str:
    """One line with the command, what is wrong, and what would be right."""
    where = f"{error.ctx.command_path}: " if isinstance(error, click.UsageError) and error.ctx is not None else ""
    text = error.format_message()
    if isinstance(error, click.UsageError) and error.ctx is not None and text.startswith("No such command"):
        from gateway.cli.commands import COMMANDS  # noqa: PLC0415 - only now are their names of interest

        wrong = text.split("'")[1] if "'" in text else ""
        close = get_close_matches(wrong, COMMANDS, n=1)
        hint = f"; nearest: {close[0]}" if close else ""
        return f"{where}there is no command “{wrong}”; commands are {', '.join(COMMANDS)}{hint}"
    helped = f" Try “{error.ctx.command_path} --help”." if isinstance(error, click.UsageError) and error.ctx else ""
    return f"{where}{text}{helped}"


def _our_fault(error: Exception) -> ExitCode:
    """Keep the traceback where it can be found, and say so in one sentence."""
    text = "".join(traceback.format_exception(error))
    stamp = time.strftime("%Y%m%dT%H%M%SZ", time.gmtime())
    kept = "it could not be kept anywhere, so here it is:\n" + text
    for folder in (Path(tempfile.gettempdir()), Path.cwd()):
        path = folder / f"lengthsman-fault-{stamp}.txt"
        try:
            path.write_text(text, encoding="utf-8")
        except OSError:
            continue
        kept = f"the traceback is in {path}"
        break
    summary = f"{type(error).__name__}: {error}".splitlines()[0]
    return _say(f"Our fault, not yours: {summary}; {kept}", ExitCode.OUR_FAULT)
