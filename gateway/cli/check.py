"""`lengthsman check`: one screen that says what a plant file amounts to."""

from __future__ import annotations

import asyncio
from collections.abc import Sequence
from dataclasses import asdict
from pathlib import Path

import click
from rich.console import Console
from rich.table import Table
from rich.text import Text

from controllers import ControllerError
from gateway.cli import options
from gateway.cli.dialling import Reached, reach
from gateway.cli.examination import examine, lines_of, reached_lines
from gateway.cli.facts import json_text
from gateway.cli.faults import CommandError
from gateway.cli.options import plant_file_argument, plant_of, site_of
from gateway.clock import RealClock
from gateway.design import PlantDesign, build_design
from gateway.exit_codes import ExitCode
from gateway.links.protocol import AddressUnknownError, PeerUnreachableError
from gateway.plantfile.plant import Plant, SiteSpec


@click.command("check")
@plant_file_argument
@click.option("--site", help="Dial this site too: read every address once, write nothing.")
@click.option("--endpoint", type=options.endpoint, metavar="URL", help="Dial here instead of at the site's endpoint.")
@click.option("--json", "json_wanted", is_flag=True, help="Print the same facts as one JSON object.")
def command(file: Path, site: str | None, endpoint: str | None, *, json_wanted: bool) -> ExitCode:
    """Say in one screen what FILE amounts to: plant, controller, stability, time per period on this host, dangers.

    Exit code 1 when the loop is unstable or a period does not fit into its budget here.
    """
    plant = plant_of(file)
    dialled = None if site is None else site_of(plant, file, site, endpoint)
    reached = None if dialled is None else _reach(plant, dialled)
    found = examine(_design(plant, file), RealClock())
    code = ExitCode.DONE if found.stable and found.in_time else ExitCode.CRITERIA_FAILED
    if json_wanted:
        facts = {
            "plant": plant.name,
            **asdict(found),
            "headroom": found.forecast.headroom,
            "sites": {one.name: {"kind": one.kind, "endpoint": one.endpoint} for one in plant.sites.values()},
            "reached": None if reached is None else asdict(reached),
            "exit": int(code),
        }
        click.echo(json_text(facts))
        return code
    lines = lines_of(plant, found)
    if dialled is not None and reached is not None:
        lines[-1:-1] = reached_lines(dialled, reached)
    _print(f"{plant.name}, {file}", lines)
    return code


def _design(plant: Plant, file: Path) -> PlantDesign:
    try:
        return build_design(plant)
    except ControllerError as error:
        raise CommandError(f"{file}: {error}") from error


def _reach(plant: Plant, site: SiteSpec) -> Reached:
    try:
        return asyncio.run(reach(plant, site, RealClock()))
    except (PeerUnreachableError, AddressUnknownError) as error:
        raise CommandError(str(error), ExitCode.UNREACHABLE) from error
    except ValueError as error:
        raise CommandError(f"site {site.name}: {error}") from error


def _print(title: str, lines: Sequence[tuple[str, str]]) -> None:
    """Two columns; on a terminal the second one is wrapped into its column, off it lines are as long as they are."""
    console = Console()
    if not console.is_terminal:
        click.echo(title)
        for what, how in lines:
            click.echo(f"{what:<16} {how}")
        return
    table = Table.grid(padding=(0, 2, 0, 0))
    table.add_column(no_wrap=True)
    table.add_column()
    for what, how in lines:
        style = "bold yellow" if how.startswith("!") else ""
        table.add_row(Text(what, style="bright_black"), Text(how, style=style))
    console.print(Text(title, style="bold"))
    console.print(table)
