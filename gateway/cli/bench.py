"""`lengthsman bench`: the simulated plant, the gateway, and the story of one minute."""

from __future__ import annotations

import asyncio
from datetime import UTC, datetime
from itertools import chain, count
from pathlib import Path

import click
from rich.console import Console

from gateway.bench.bench import Bench, BenchFiles, BenchOptions, BenchResult
from gateway.bench.children import ChildEndedError
from gateway.bench.closing import closing_words, exit_code_of, facts_of, words_in_lines
from gateway.bench.story import Times, story_of
from gateway.cli import options
from gateway.cli.facts import json_text
from gateway.cli.faults import CommandError
from gateway.cli.options import folder_of, plant_file_argument, plant_of, site_of
from gateway.clock import RealClock
from gateway.exit_codes import ExitCode
from gateway.plantfile.plant import Plant, SiteKind

FREE_PORT = "opc.tcp://127.0.0.1:0"


@click.command("bench")
@plant_file_argument
@click.option("--for", "for_s", type=options.duration, metavar="TIME", help="How long; the story's minute if left out.")
@click.option("--quiet-plant", is_flag=True, help="Nothing breaks; consumers open and shut by their own profiles.")
@click.option("--site", help="Bench site to use; the first one when left out.")
@click.option("--endpoint", type=options.endpoint, metavar="URL", help="Where the plant listens; a free port without.")
@click.option("--out", type=click.Path(path_type=Path), metavar="DIR", help="A new folder for what it writes.")
@click.option("--json", "json_wanted", is_flag=True, help="Print the summary as one JSON object; lines go to stderr.")
def command(
    file: Path,
    for_s: float | None,
    site: str | None,
    endpoint: str | None,
    out: Path | None,
    *,
    quiet_plant: bool,
    json_wanted: bool,
) -> ExitCode:
    """Start the simulated plant of FILE and the gateway that drives it, and watch what happens.

    Ends with a summary and the paths of what was written. Exit code 1 when something was missed that nothing provoked,
    4 when a section is on hold at the end.
    """
    plant = plant_of(file)
    where = site_of(plant, file, site, endpoint or FREE_PORT)
    if where.kind is not SiteKind.BENCH:
        raise CommandError(f"{file}: site {where.name} is {where.kind}; the bench drives bench sites only")
    files = _new_folder(plant, out)
    console = Console(stderr=json_wanted)
    steps = story_of(plant, quiet=quiet_plant)
    bench = BenchOptions(file, plant, where, steps, for_s or Times.of(plant).end, files)
    if left_out := [step.name for step in steps if step.at_s > bench.for_s]:
        console.print(f"The time is too short for: {', '.join(left_out)}.", soft_wrap=True)
    try:
        result = asyncio.run(Bench(bench, console, RealClock()).run())
    except ChildEndedError as error:
        theirs = {int(code): code for code in (ExitCode.WRONG_CALL, ExitCode.UNREACHABLE)}
        raise CommandError(str(error), theirs.get(error.code or 0, ExitCode.OUR_FAULT)) from error
    if result is None:
        console.print("Stopped before the first period; nothing was driven.")
        return ExitCode.DONE
    return _close(result, bench, console, json_wanted=json_wanted)


def _close(result: BenchResult, bench: BenchOptions, console: Console, *, json_wanted: bool) -> ExitCode:
    """Show the summary, write it down, say where everything is."""
    code = exit_code_of(result.figures, result.criteria)
    wrote = {
        "journal": str(bench.files.journal),
        "summary": str(bench.files.summary),
        "gateway's log": str(bench.files.gateway_log),
        "plant's log": str(bench.files.plant_log),
    }
    text = json_text(facts_of(result.figures, result.criteria, code, wrote))
    try:
        bench.files.summary.write_text(text + "\n", encoding="utf-8")
    except OSError as error:
        del wrote["summary"]
        console.print(f"The summary could not be written: {error.strerror}", style="bold yellow")
    if json_wanted:
        click.echo(text)
    else:
        words = closing_words(bench.plant, result.figures, result.criteria)
        if console.is_terminal:
            console.print(words)
        else:
            click.echo(words_in_lines(words))
        console.print()
        for name, path in wrote.items():
            console.print(f"{name:<14} {path}", soft_wrap=True, highlight=False)
    return code


def _new_folder(plant: Plant, out: Path | None) -> BenchFiles:
    """Make the folder of this bench; one that has a journal already is another run's.

    Raises:
        CommandError: it cannot be made or written to, or is not a new one.
    """
    folder = _unused(folder_of(plant) / f"bench-{datetime.now(UTC):%Y%m%d-%H%M%S}") if out is None else out
    files = BenchFiles(folder)
    try:
        folder.mkdir(parents=True, exist_ok=True)
        if files.journal.exists():
            raise CommandError(f"{folder} has a journal already; give a new folder with --out")
        files.gateway_log.touch()
    except OSError as error:
        raise CommandError(
            f"{folder} cannot be written: {error.strerror or error}; give another folder with --out"
        ) from error
    return files


def _unused(folder: Path) -> Path:
    """This folder, or with a number added when there is one already: two benches may start in one second."""
    others = (folder.with_name(f"{folder.name}-{number}") for number in count(2))
    return next(path for path in chain([folder], others) if not path.exists())
