"""The command line: what to race, and where the table and the picture go."""

from __future__ import annotations

import json
from collections.abc import Callable, Container
from pathlib import Path
from typing import TypeVar

import click

from tests.races.calibrate import Patience
from tests.races.meeting import Programme, hold
from tests.races.picture import draw, gist
from tests.races.plants import PLANTS
from tests.races.racers import ENTRIES, OURS
from tests.races.report import markdown, raw

USUAL = Programme()


Item = TypeVar("Item")


def listed(convert: Callable[[str], Item]) -> Callable[[click.Context, click.Parameter, str], tuple[Item, ...]]:
    """Read a comma-separated list."""

    def read(_context: click.Context, parameter: click.Parameter, text: str) -> tuple[Item, ...]:
        try:
            return tuple(convert(part.strip()) for part in text.split(","))
        except (ValueError, KeyError):
            raise click.BadParameter(f"{text!r} is not a list of what {parameter.name} takes") from None

    return read


def _known(names: Container[str]) -> Callable[[str], str]:
    def convert(name: str) -> str:
        if name not in names:
            raise ValueError(name)
        return name

    return convert


def _joined(values: tuple[object, ...]) -> str:
    return ",".join(f"{value:g}" if isinstance(value, float) else str(value) for value in values)


@click.command()
@click.argument("out", type=click.Path(file_okay=False, path_type=Path))
@click.option("--kinds", default=_joined(USUAL.kinds), show_default=True, callback=listed(_known(PLANTS)))
@click.option("--sizes", default=_joined(USUAL.sizes), show_default=True, callback=listed(int))
@click.option("--horizons", default=_joined(USUAL.horizons), show_default=True, callback=listed(int))
@click.option("--accuracies", default=_joined(USUAL.accuracies), show_default=True, callback=listed(float))
@click.option("--racers", default=",".join(ENTRIES), show_default=True, callback=listed(_known(ENTRIES)))
@click.option("--most-steps", default=USUAL.most_steps, show_default=True, help="Leave out cases with N T above this.")
@click.option("--periods", default=USUAL.periods, show_default=True, help="Length of a course, warm-up included.")
@click.option("--repeats", default=USUAL.repeats, show_default=True, help="How often a course is run.")
@click.option("--patience", default=USUAL.patience.period_s, show_default=True, help="Seconds a period may take.")
@click.option("--building", default=USUAL.building_s, show_default=True, help="Seconds building a design may take.")
@click.option("--alike", is_flag=True, help="All sections of a plant alike.")
@click.option("--no-published", is_flag=True, help="Leave out the published form.")
def main(
    out: Path,
    kinds: tuple[str, ...],
    sizes: tuple[int, ...],
    horizons: tuple[int, ...],
    accuracies: tuple[float, ...],
    racers: tuple[str, ...],
    most_steps: int,
    periods: int,
    repeats: int,
    patience: float,
    building: float,
    alike: bool,
    no_published: bool,
) -> None:
    """Race this synthesis against general-purpose solvers; table, picture and raw numbers go to the folder OUT."""
    programme = Programme(
        kinds, sizes, horizons, accuracies, most_steps, periods, repeats, alike, Patience(patience), building,
        not no_published,
    )  # fmt: skip
    entries = [ENTRIES[name] for name in dict.fromkeys((OURS.name, *racers))]
    out.mkdir(parents=True, exist_ok=True)
    results = []
    for result in hold(programme, entries, click.echo):
        results.append(result)
        click.echo(gist([result]))
        (out / "races.md").write_text(markdown(results, entries))
        (out / "races.json").write_text(json.dumps(raw(results), default=float))
    for horizon in sorted({result.case.horizon for result in results}):
        for accuracy in sorted({result.case.accuracy for result in results}):
            draw(results, out / f"races-T{horizon}-{accuracy:g}.png", horizon=horizon, accuracy=accuracy)
    click.echo(f"\n{gist(results)}\n\nwritten: {out / 'races.md'}")
