"""The panel: the PLC that owns the actuators, as an I/O-free state machine.

Problem: a controller on the far side of a network sends inputs. Some arrive late, twice, half, out of range, or not at
all any more. Only the receiver can tell, so the panel decides what reaches an actuator, and what happens when nobody
decides any longer. Symbols, all times in milliseconds of the panel's own monotonic clock:

    t      clock                  h      heartbeat counter, any change counts
    t_h    since when h is still  W      watchdog: tripped when t − t_h ≥ W while any section is in charge of control
    k      period counter of a set of inputs, k_a that of the last set accepted
    t_e    the set is void once t > t_e        V      longest validity accepted, t_e − t ≤ V

A **set** of inputs is one request that carries driven values, then `panel.expires` (t_e), then `panel.period` (k);
the arrival of k commits or refuses it whole. It is accepted when

    permit on,  every value finite,  t ≤ t_e ≤ t + V,  k > k_a  (after a trip or a restart of the panel: any k)

and then moves the actuators of those sections that are in charge of control, no others. Nothing of a set outlives its
request, so values nobody committed can't slip into a later set.

`state` names the cast, `charge` is the transition table of a section, `timing` moves the clock (watchdog, local
action), `acceptance` takes requests, `readings` shows what there is to see.
"""

from sim_plant.panel.acceptance import Outcome, Written, write
from sim_plant.panel.charge import Charge
from sim_plant.panel.readings import readings
from sim_plant.panel.state import (
    KEEP,
    DrivenPoint,
    EventKind,
    LocalAction,
    PanelEvent,
    PanelSettings,
    PanelState,
    power_up,
)
from sim_plant.panel.timing import set_permit, tick

__all__ = [
    "KEEP",
    "Charge",
    "DrivenPoint",
    "EventKind",
    "LocalAction",
    "Outcome",
    "PanelEvent",
    "PanelSettings",
    "PanelState",
    "Written",
    "power_up",
    "readings",
    "set_permit",
    "tick",
    "write",
]
