"""Localized predictive control by explicit synthesis: pure numerics, arrays in, arrays out.

Problem. A plant of coupled sections (`network`) is to be driven to targets within limits (`quantities`, `rows`), every
section using only what happens a few couplings away (`responses`), inside a sampling period (`synthesis`, loops in
`kernels`). `linearise` makes the network from physics, `observer` the measurement, `central` the answer to compare
with, and `spectrum` says whether the loop is stable. `terminal` prices what lies beyond the horizon, counted from where
the plant will `rest`; `contradiction` names hard limits that cannot all be met, `advice` what a plant lacks; `storage`
turns a design into bytes and back. No clock, no I/O, no logging.

    network -> quantities -> rows -> responses -> plans -> synthesis -> central, spectrum -> observer
"""

from controllers.advice import About, Finding, advise
from controllers.contradiction import Contradiction, Limit, find_contradiction
from controllers.exceptions import (
    ControllerError,
    EquilibriumError,
    ForecastError,
    NetworkError,
    NotFiniteError,
    NotLocalizableError,
    ObserverError,
    ReferenceSolveError,
    RowError,
    StoredDesignError,
    TerminalPriceError,
)
from controllers.network import Network
from controllers.observer import Estimate, Noise, Observer
from controllers.plans import Iterate, Measured, Outcome, Plan, Settings
from controllers.quantities import Of, Quantity, Term
from controllers.rest import Rest
from controllers.row_rule import Region
from controllers.rows import RowData, RowTable
from controllers.storage import pack, unpack
from controllers.synthesis import Design
from controllers.terminal import terminal_quantities

__all__ = [
    "About",
    "Contradiction",
    "ControllerError",
    "Design",
    "EquilibriumError",
    "Estimate",
    "Finding",
    "ForecastError",
    "Iterate",
    "Limit",
    "Measured",
    "Network",
    "NetworkError",
    "Noise",
    "NotFiniteError",
    "NotLocalizableError",
    "Observer",
    "ObserverError",
    "Of",
    "Outcome",
    "Plan",
    "Quantity",
    "ReferenceSolveError",
    "Region",
    "Rest",
    "RowData",
    "RowError",
    "RowTable",
    "Settings",
    "StoredDesignError",
    "Term",
    "TerminalPriceError",
    "advise",
    "find_contradiction",
    "pack",
    "terminal_quantities",
    "unpack",
]
