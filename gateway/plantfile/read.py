"""`read_plant`: a plant file to a resolved plant, or all its mistakes at once."""

from __future__ import annotations

from pathlib import Path

from gateway.plantfile.catalogue import Catalogue, built_in
from gateway.plantfile.document import parse
from gateway.plantfile.mistakes import Mistake, PlantFileError
from gateway.plantfile.plant import Plant
from gateway.plantfile.resolve_couplings import read_couplings
from gateway.plantfile.resolve_sections import read_sections
from gateway.plantfile.resolve_settings import read_bench, read_controller, read_cutoffs, read_hold, read_panel
from gateway.plantfile.resolve_sites import read_sites


def read_plant(path: Path, catalogue: Catalogue | None = None) -> Plant:
    """Read, check and resolve a plant file.

    Args:
        path: the file, TOML 1.0 in UTF-8.
        catalogue: the physics it may name, those of `sim_plant` unless given.

    Raises:
        PlantFileError: it can't be read, or something in it is wrong; carries every mistake.
    """
    return read_plant_text(_text(path), path.name, catalogue)


def read_plant_text(text: str, source: str, catalogue: Catalogue | None = None) -> Plant:
    """As `read_plant`, from the text of a file; `source` names it in the error.

    Raises:
        PlantFileError: something in it is wrong; carries every mistake.
    """
    catalogue = catalogue or built_in()
    document, ledger = parse(text, source)
    sections = read_sections(document, catalogue, ledger)
    couplings = read_couplings(document, [section.name for section in sections], catalogue, ledger)
    controller, bench = read_controller(document), read_bench(document)
    cutoffs, hold, panel = read_cutoffs(document, ledger), read_hold(document, ledger), read_panel(document, ledger)
    sites = read_sites(document, ledger)
    mistakes = ledger.mistakes()
    if mistakes:
        raise PlantFileError(source, mistakes)
    plant = document.plant
    if plant is None or plant.name is None or plant.period is None:
        raise RuntimeError(f"{source}: no mistake found, yet [plant] is incomplete; this is our fault")
    return Plant(
        name=plant.name,
        period_s=plant.period,
        sections=sections,
        couplings=couplings,
        controller=controller,
        cutoffs=cutoffs,
        hold=hold,
        panel=panel,
        sites=sites,
        bench=bench,
    )


def _text(path: Path) -> str:
    try:
        # Some editors put a byte order mark in front of UTF-8; it means nothing.
        return path.read_bytes().decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = error.object[: error.start].count(b"\n") + 1
        mistake = Mistake("", line, f"byte 0x{error.object[error.start]:02x}", "text in UTF-8")
        raise PlantFileError(path.name, (mistake,)) from error
    except OSError as error:
        mistake = Mistake("", None, str(path), f"a file that can be read ({error.strerror or error})")
        raise PlantFileError(path.name, (mistake,)) from error
