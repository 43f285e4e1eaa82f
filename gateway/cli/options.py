"""Types of options that several commands share, and how a plant file and a site are got from them."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path

import click

from gateway.cli.faults import CommandError
from gateway.plantfile.mistakes import PlantFileError, nearest
from gateway.plantfile.plant import Plant, SiteKind, SiteSpec
from gateway.plantfile.read import read_plant
from gateway.plantfile.units import UnitError, seconds

LONGEST_S = 400 * 86400.0


def duration(text: str) -> float:
    """Type of an option that is a time with its unit, "90 s", "20min"; seconds.

    Raises:
        BadParameter: it is no time above zero.
    """
    try:
        read = seconds(text)
    except UnitError:
        raise click.BadParameter(
            f"“{text}” is no time; give a number with its unit, such as 90s, 20min or 8h."
        ) from None
    if not 0.0 < read <= LONGEST_S:
        raise click.BadParameter(f"“{text}” is out of range; give more than nothing and at most 400 days.")
    return read


def endpoint(text: str) -> str:
    """Type of an option that is an endpoint, `opc.tcp://host:port`.

    Raises:
        BadParameter: it is none.
    """
    if not _ENDPOINT.fullmatch(text):
        raise click.BadParameter(f"“{text}” is no endpoint; give opc.tcp://host:port.")
    return text


_ENDPOINT = re.compile(r"opc\.tcp://([^/:\s]+|\[[0-9A-Fa-f:.]+\]):\d{1,5}(/\S*)?")

plant_file_argument = click.argument("file", type=click.Path(path_type=Path), metavar="FILE")


def plant_of(file: Path) -> Plant:
    """Read a plant file.

    Raises:
        CommandError: it is wrong; the message has every mistake.
    """
    try:
        return read_plant(file)
    except PlantFileError as error:
        raise CommandError(str(error)) from error


def site_of(plant: Plant, file: Path, name: str | None, leads_to: str | None = None) -> SiteSpec:
    """Return a site by name, the first bench site without one; `leads_to` overrides its endpoint.

    Raises:
        CommandError: there is no such site.
    """
    if name is None:
        benches = [site for site in plant.sites.values() if site.kind is SiteKind.BENCH]
        if not benches:
            raise CommandError(f"{file}: no site of kind bench; add a [sites.bench] that leads to the simulated plant")
        site = benches[0]
    elif name in plant.sites:
        site = plant.sites[name]
    else:
        close = nearest(name, plant.sites)
        hint = f"; nearest: {close}" if close else ""
        raise CommandError(f"{file}: no site is called “{name}”; sites are {', '.join(plant.sites)}{hint}")
    return site if leads_to is None else replace(site, endpoint=leads_to)


def folder_of(plant: Plant) -> Path:
    """Where a plant's runs are kept unless somebody says otherwise: runs/tarn-row."""
    slug = re.sub(r"[^a-z0-9]+", "-", plant.name.lower()).strip("-")
    return Path("runs") / (slug or "plant")
