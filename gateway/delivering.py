"""Write: one set of inputs out, and what its outcomes say of every section."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from controllers.arrays import Bools, Floats
from gateway.design import PlantDesign
from gateway.inputs import Outgoing
from gateway.links.protocol import WriteOutcome
from gateway.panel_view import PanelView
from gateway.signals import Tag
from gateway.standing import SentSet
from gateway.tags import in_charge_tag, panel_tag

Written = float | int | bool


@dataclass(frozen=True)
class OutgoingSet:
    """One period's write.

    Attributes:
        values: in the order in which the panel wants them.
        sends: per section (N,), whether it has inputs among them.
    """

    values: tuple[tuple[Tag, Written], ...]
    sends: Bools


def compose_set(
    design: PlantDesign, tags: Mapping[str, Tag], parts: Sequence[Outgoing], view: PanelView, k: int, heartbeat: int
) -> OutgoingSet:
    """Order one set of inputs as the panel wants it: charge, values, expiry, then the counter that commits it.

    The heartbeat goes last, with or without inputs: it says that this period was completed. It is withheld while the
    panel believes somebody drives a section that is only watched: its watchdog shall find out. Without a readable panel
    clock no input is sent, since nobody could tell how long it stays valid.
    """
    panel = design.plant.panel
    names = [section.name for section in design.plant.sections]
    sends = np.array([bool(part.values) for part in parts]) & (view.clock_ms is not None)
    out: list[tuple[Tag, Written]] = []
    for i, part in enumerate(parts):
        if panel is not None and (part.hand_back or (part.take and sends[i])):
            out.append((tags[in_charge_tag(names[i])], not part.hand_back))
    for i, part in enumerate(parts):
        if sends[i]:
            out.extend((tags[tag], value) for tag, value in part.values.items())
    if panel is None:
        return OutgoingSet(tuple(out), sends)
    if sends.any() and view.clock_ms is not None:
        out.append((tags[panel_tag("expires")], view.clock_ms + round(panel.window_s * 1e3)))
        out.append((tags[panel_tag("period")], k))
    if not any(part.abandoned for part in parts):
        out.append((tags[panel_tag("heartbeat")], heartbeat))
    return OutgoingSet(tuple(out), sends)


@dataclass(frozen=True)
class Delivery:
    """What became of one set.

    Attributes:
        lost: per section (N,), inputs that should have been written and were not, or nobody knows.
        written: inputs acknowledged (m,), engineering units, NaN where none were.
        doubtful: inputs (m,) whose write was not answered: where they are is unknown until they are read back.
        charge_expected: per section (N,), whether the panel must show it in our charge next period: taken now, or ours
            already and not handed back for certain.
        sent: the set, None when it did not leave this process.
        unknown: tags whose write was not answered.
    """

    lost: Bools
    written: Floats
    doubtful: Bools
    charge_expected: Bools
    sent: SentSet | None
    unknown: tuple[str, ...]

    @classmethod
    def of(
        cls,
        design: PlantDesign,
        parts: Sequence[Outgoing],
        outgoing: OutgoingSet,
        outcomes: Mapping[str, WriteOutcome],
        view: PanelView,
        k: int,
    ) -> Delivery:
        """Read the outcomes of a write."""

        def arrived(tag: str) -> bool:
            return outcomes.get(tag) is WriteOutcome.WRITTEN

        names = [section.name for section in design.plant.sections]
        commit = () if design.plant.panel is None else (panel_tag("expires"), panel_tag("period"))
        lost = np.array(
            [
                bool(part.values) and not (outgoing.sends[i] and all(map(arrived, (*part.values, *commit))))
                for i, part in enumerate(parts)
            ]
        )
        silence = [any(outcomes.get(tag) is WriteOutcome.UNKNOWN for tag in (*part.values, *commit)) for part in parts]
        doubtful = outgoing.sends & np.array(silence)
        left = outgoing.sends.any() and all(outcomes.get(tag) is not WriteOutcome.NOT_SENT for tag in commit)
        taken = [
            bool(outgoing.sends[i]) and part.take and arrived(in_charge_tag(names[i])) for i, part in enumerate(parts)
        ]
        kept = [
            view.in_charge[i] and not part.abandoned and not (part.hand_back and arrived(in_charge_tag(names[i])))
            for i, part in enumerate(parts)
        ]
        sent = {tag.name: value for tag, value in outgoing.values}
        good = outgoing.sends & ~lost
        return cls(
            lost=lost,
            written=np.array(
                [
                    float(sent[signal.tag]) if good[i] else np.nan
                    for signal, i in zip(design.inputs, design.section_of_input, strict=True)
                ]
            ),
            doubtful=doubtful[list(design.section_of_input)],
            charge_expected=np.array(taken) | np.array(kept),
            sent=SentSet(k, outgoing.sends, lost & ~doubtful) if left else None,
            unknown=tuple(tag for tag, outcome in outcomes.items() if outcome is WriteOutcome.UNKNOWN),
        )
