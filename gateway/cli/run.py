"""`lengthsman run`: drive a plant."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path

import click

from gateway.cli import options
from gateway.cli.facts import json_text
from gateway.cli.faults import CommandError
from gateway.cli.options import folder_of, plant_file_argument, plant_of, site_of
from gateway.control import RunOptions, StartError, run_control
from gateway.exit_codes import ExitCode
from gateway.plantfile.plant import SiteKind

CAUTIONS = (
    "Not a safety system: independent trips, relief and interlocks stay in charge; hard limits here are operating "
    "limits.",
    "Defer to the local code, the plant's own procedures and licensed practice.",
    "Never first try on a live site what was not soaked.",
)


@click.command("run")
@plant_file_argument
@click.option("--site", required=True, help="Site of the plant file to drive.")
@click.option(
    "--authority",
    type=click.Choice(["observe", "limited", "full"]),
    help="How far it may act at first; observe on a live site, full on the bench when left out.",
)
@click.option(
    "--journal", type=click.Path(path_type=Path), help="The journal; runs/PLANT/journal.sqlite when left out."
)
@click.option("--requests", type=click.Path(path_type=Path), help="The file of requests; beside the journal.")
@click.option(
    "--for",
    "for_s",
    type=options.duration,
    metavar="TIME",
    help="Stop after this time, such as 20min; runs until stopped without.",
)
@click.option("--endpoint", type=options.endpoint, metavar="URL", help="Overrides the site's endpoint.")
@click.option(
    "--without-record",
    is_flag=True,
    help="Full authority over a live site though this plant file has no passed soak record; said, and recorded.",
)
@click.option("--json", "json_wanted", is_flag=True, help="Print how the run went as one JSON object.")
def command(
    file: Path,
    site: str,
    authority: str | None,
    journal: Path | None,
    requests: Path | None,
    for_s: float | None,
    endpoint: str | None,
    *,
    without_record: bool,
    json_wanted: bool,
) -> ExitCode:
    """Drive the plant of FILE on one of its sites, one sampling period after the other.

    Listens on nothing. What happens is logged on standard error and recorded in the journal.
    """
    plant = plant_of(file)
    where = site_of(plant, file, site, endpoint)
    if where.kind is SiteKind.LIVE:
        for caution in CAUTIONS:
            click.echo(f"Caution: {caution}", err=True)
    journal = journal or folder_of(plant) / "journal.sqlite"
    try:
        result = run_control(
            RunOptions(
                plant_file=file,
                site=site,
                journal=journal,
                requests=requests or journal.with_name("requests.sqlite"),
                authority=authority,
                for_s=for_s,
                endpoint=endpoint,
                override=without_record,
            )
        )
    except StartError as error:
        raise CommandError(str(error), error.code) from error
    if json_wanted:
        tally, deadlines = asdict(result.tally), asdict(result.deadlines)
        facts = {"run": result.run, "journal": str(journal), **tally, "deadlines": deadlines, "exit": int(result.code)}
        click.echo(json_text(facts))
        return result.code
    tally_words = (
        f"Run {result.run}: {result.tally.periods} periods, {result.tally.missed} section-periods missed, "
        f"{result.tally.skipped} periods skipped."
    )
    held = f" On hold: {', '.join(result.tally.held)}." if result.tally.held else ""
    slack = result.deadlines.quantiles.get("slack_us")
    slack_words = (
        "" if slack is None else f" Slack {slack.median / 1e3:.1f} ms median, {slack.worst / 1e3:.1f} ms least."
    )
    click.echo(f"{tally_words}{slack_words}{held} Journal: {journal}")
    return result.code
