"""`[controller]`, `[hold]`, `[panel]` and `[bench]` to their settings, and what must hold between their numbers."""

from __future__ import annotations

from typing import Any

from gateway.plantfile.mistakes import Ledger
from gateway.plantfile.plant import BenchSpec, ControllerSpec, Cutoffs, HoldSpec, PanelSpec, RowWeights
from gateway.plantfile.tables import BenchTable, ControllerTable, Document, HoldTable, Table


def read_controller(document: Document) -> ControllerSpec:
    """Return the settings of the synthesis; what the file leaves out has `ControllerSpec`'s default."""
    table = document.controller or ControllerTable()
    given = _given(table)
    given.pop("cutoffs", None)
    given["weights"] = RowWeights(**_given(table.weights)) if table.weights else RowWeights()
    if "tolerance" in given:
        given["tolerance_spans"] = given.pop("tolerance")
    return ControllerSpec(**{"horizon": 0, "locality": 0, **given})


def read_cutoffs(document: Document, ledger: Ledger) -> Cutoffs:
    """Return the cut-offs of the phases, which must follow each other."""
    table = document.controller.cutoffs if document.controller else None
    cutoffs = Cutoffs(**_given(table)) if table else Cutoffs()
    if not cutoffs.gather < cutoffs.synthesise < cutoffs.write:
        read = [cutoffs.gather, cutoffs.synthesise, cutoffs.write]
        ledger.add(("controller", "cutoffs"), read, "gather before synthesise before write")
    return cutoffs


def read_hold(document: Document, ledger: Ledger) -> HoldSpec:
    """Return the numbers of the hold table."""
    hold = HoldSpec(**_given(document.hold or HoldTable()))
    if hold.latch_after > hold.latch_window:
        allowed = f"at most latch_window, {hold.latch_window} periods; more misses never fit into it"
        ledger.add(("hold", "latch_after"), hold.latch_after, allowed)
    return hold


def read_panel(document: Document, ledger: Ledger) -> PanelSpec | None:
    """Return what is asked of the panel, None when the file has no panel."""
    table, period_s = document.panel, document.plant.period if document.plant else None
    if table is None or table.watchdog is None or table.window is None:
        return None
    if period_s is not None and table.watchdog <= period_s:
        allowed = f"longer than the period, {period_s:g} s; the heartbeat moves once in it"
        ledger.add(("panel", "watchdog"), f"{table.watchdog:g} s", allowed)
    return PanelSpec(watchdog_s=table.watchdog, window_s=table.window)


def read_bench(document: Document) -> BenchSpec:
    """Return the settings of the simulated plant."""
    given = _given(document.bench or BenchTable())
    if "substep" in given:
        given["substep_s"] = given.pop("substep")
    return BenchSpec(**given)


def _given(table: Table) -> dict[str, Any]:
    """The keys the file gives, the others keep the defaults of the resolved type."""
    return {key: value for key, value in table if value is not None}
