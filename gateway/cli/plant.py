"""`lengthsman plant`: the simulated plant as a process of its own."""

from __future__ import annotations

import asyncio
import sys
from pathlib import Path

import click

from controllers import EquilibriumError
from gateway import logs
from gateway.cli import options
from gateway.cli.faults import CommandError
from gateway.cli.options import plant_file_argument, plant_of, site_of
from gateway.cli.serving import serve
from gateway.clock import RealClock
from gateway.exit_codes import ExitCode
from gateway.simulated import simulated_plant


@click.command("plant")
@plant_file_argument
@click.option("--site", help="Site whose addresses are served; the first bench site when left out.")
@click.option(
    "--endpoint",
    type=options.endpoint,
    metavar="URL",
    help="Where to listen instead of the site's own; port 0 takes a free one.",
)
@click.option("--away", type=click.FloatRange(-40, 40), default=0.0, help="Start this far off the targets, % of span.")
@click.option("--quiet", is_flag=True, help="Say nothing but where it listens, and what is wrong.")
@click.option("--until-eof", is_flag=True, help="Stop when standard input ends: for whoever starts it as a child.")
def command(
    file: Path, site: str | None, endpoint: str | None, away: float, *, quiet: bool, until_eof: bool
) -> ExitCode:
    """Serve the simulated plant of FILE over OPC UA, in real time, until it is stopped.

    Takes lines on standard input that make it misbehave, such as “freeze tank-4.level for 20 s”; each is answered in
    one line. “help” lists them.
    """
    plant = plant_of(file)
    where = site_of(plant, file, site, endpoint)
    try:
        spec = simulated_plant(plant, away_spans=away / 100)
    except (EquilibriumError, ValueError) as error:
        raise CommandError(f"{file}: {error}") from error
    clock = RealClock()
    log = logs.start(sys.stderr, clock.wall_ns, level="warning" if quiet else "info")
    try:
        asyncio.run(serve(spec, where, clock, until_eof=until_eof))
    finally:
        log.close()
    return ExitCode.DONE
