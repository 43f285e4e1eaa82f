"""The estimate of one period: predict with what the actuators were told, correct with what was admitted."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from controllers import Estimate
from controllers.arrays import Bools, Floats
from controllers.observer import seed
from gateway.admit import Admitted
from gateway.design import PlantDesign


@dataclass(frozen=True)
class Seen:
    """One period's admitted measurements, scaled deviations.

    Attributes:
        y: outputs (p,), anything where not used.
        used: (p,) which of them were admitted.
        known: measured disturbances at their place in w (r,), zero elsewhere; the last good value where unusable.
        returned: (N,) sections that see again after they were blind, all their outputs usable.
    """

    y: Floats
    used: Bools
    known: Floats
    returned: Bools

    @classmethod
    def of(
        cls,
        design: PlantDesign,
        admitted: Mapping[str, Admitted],
        returned: frozenset[str],
        known_before: Floats,
    ) -> Seen:
        """Scale what was admitted.

        Args:
            admitted: judged readings by tag.
            returned: names of the sections that see again.
            known_before: measured disturbances of the last period, kept where one is unusable now.
        """
        values = [admitted[signal.tag].value for signal in design.outputs]
        used = np.array([value is not None for value in values], dtype=bool)
        y = np.array([np.nan if value is None else value for value in values])
        known = known_before.copy()
        for one in design.known:
            value = admitted[one.signal.tag].value
            if value is not None:
                rest = design.scaling.w_zero[one.place]
                known[one.place] = (one.signal.scale.to_physics(value) - rest) / design.scaling.w_unit[one.place]
        unseen = {signal.section for signal, good in zip(design.outputs, used, strict=True) if not good}
        back = np.array([section.name in returned - unseen for section in design.plant.sections], dtype=bool)
        return cls(design.scaling.y(y), used, known, back)


def estimate_period(
    design: PlantDesign, before: Estimate | None, u_before: Floats, known_before: Floats, seen: Seen
) -> tuple[Estimate, Floats]:
    """Estimate states and disturbances at the start of the period.

    Args:
        before: the last period's estimate; None at the first, which is seeded from the outputs at rest.
        u_before: inputs that acted since, (m,), engineering units.
        known_before: measured disturbances of the last period, (r,), scaled.
        seen: what this period measured.

    Returns:
        The estimate, and the innovations (p,) in spans: how far the plant was from the prediction.
    """
    network, u = design.network, design.scaling.u(u_before)
    if before is None:
        x = seed(network, np.where(seen.used, seen.y, 0.0), u)
        return Estimate(x, np.zeros(network.e.shape[1])), np.zeros(len(seen.y))
    predicted = design.observer.predict(before, u, known_before)
    estimate, innovation = design.observer.correct(predicted, seen.y, seen.used)
    if seen.returned.any():
        # After coasting blind the prediction is worth less than the plant itself: start again from what it shows.
        fresh = seed(network, np.where(seen.used, seen.y, 0.0), u)
        again = np.repeat(seen.returned, np.diff(network.x_at))
        estimate = Estimate(np.where(again, fresh, estimate.x), estimate.w)
    return estimate, innovation
