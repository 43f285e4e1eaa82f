"""The command line: `lengthsman COMMAND`, one file per command.

    commands    what there is; a command's file is imported when it is called, so that `--help` is quick
    faults      every way a command can fail, as one message and one exit code
    facts       facts as JSON
    options     types of options that several commands share
    desks       which running gateway a request goes to

What a command needs beside its words stands in files named after it: `serving` (plant), `examination`, `optimum`,
`forecast` and `dialling` (check), and the package `gateway.bench`.

`main` is the console script. It never lets a traceback out: what is the caller's to mend is said in one message that
names the place, the value and the fix; what is our fault is one sentence and the path of a file with the traceback.
"""

from __future__ import annotations

import sys
from collections.abc import Sequence

from gateway.cli.commands import group
from gateway.cli.faults import run_command
from gateway.exit_codes import ExitCode


def main(arguments: Sequence[str] | None = None) -> None:
    """Run one command and leave with its exit code (`gateway.exit_codes`)."""
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="replace")  # a sentence with a quotation mark must not end a command on an old terminal
    sys.exit(int(run_command(group, arguments)))


__all__ = ["ExitCode", "main"]
