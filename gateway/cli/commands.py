"""What commands there are. None of them is imported before it is called."""

from __future__ import annotations

from importlib import import_module
from importlib.metadata import PackageNotFoundError, version
from typing import Final

import click

COMMANDS: Final = {
    "check": "Say in one screen what a plant file amounts to.",
    "plant": "Serve the simulated plant over OPC UA, in real time.",
    "run": "Drive a plant: the sampling period, its journal, nothing else.",
    "bench": "Start the simulated plant and the gateway, and tell the story of one minute.",
    "ask": "Ask something of a running gateway: hold, rearm, authority, target.",
}
"""Name -> what it does, in one line. The command itself is `command` in the module of that name."""


class LazyGroup(click.Group):
    """A group whose commands are imported when they are called."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Names, in the order in which a newcomer meets them."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import one command; None when there is none of this name."""
        if cmd_name not in COMMANDS:
            return None
        command = import_module(f"gateway.cli.{cmd_name}").command
        return command if isinstance(command, click.Command) else None

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """List the commands without importing any."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


def _version() -> str:
    try:
        return version("lengthsman")
    except PackageNotFoundError:
        return "not installed"


@click.group(
    cls=LazyGroup,
    context_settings={"help_option_names": ["--help", "-h"]},
    epilog="Exit codes: 0 done, 1 criteria failed, 2 the file or the call is wrong, 3 a peer could not be reached, "
    "4 stopped by a hold, 70 our fault.",
)
@click.version_option(_version(), message="%(version)s")
def group() -> None:
    """The service between a plant of coupled sections and its distributed predictive controller.

    Not a safety system: independent trips, relief and interlocks stay in charge.
    """
