"""The link without a wire: the simulated plant in this process, for virtual time.

It answers at once, so its deadlines never pass; faults of a wire are provoked by `cut` (nothing arrives any more) and
`drop_answers` (writes arrive, their answers do not). Everything else is as over any link.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from gateway.links.protocol import Gathered, LinkState, LinkStatistics, WriteOutcome
from gateway.signals import Reading, Tag
from gateway.status_codes import Severity, severity
from sim_plant.direct import DirectPlant


class DirectLink:
    """A `Link` to a plant in this process.

    Attributes:
        cut: while true, no reading arrives and nothing is sent.
        drop_answers: while true, writes arrive but are never answered.
    """

    def __init__(self, plant: DirectPlant, tags: Sequence[Tag]) -> None:
        self._plant = plant
        self._tags = tuple(tags)
        self._writable = {tag.name for tag in tags if tag.writable}
        self._reads = self._read_failures = self._writes = self._write_failures = 0
        self.cut = False
        self.drop_answers = False

    async def open(self, timeout_s: float) -> None:
        """Nothing to connect to."""

    async def gather(self, due_ns: int) -> Gathered:
        """Read every tag at once."""
        self._reads += 1
        if self.cut:
            self._read_failures += 1
            return Gathered({}, complete=False)
        samples = self._plant.read_all()
        return Gathered(
            {
                tag.name: Reading(one.value, one.status, one.source_time_ns, one.source_time_ns)
                for tag in self._tags
                if (one := samples.get(tag.name)) is not None
            },
            complete=True,
        )

    async def write(self, values: Sequence[tuple[Tag, float | int | bool]], due_ns: int) -> Mapping[str, WriteOutcome]:
        """Hand the request to the plant's panel in this order.

        Raises:
            ValueError: a tag that is not writable.
        """
        for tag, _ in values:
            if tag.name not in self._writable:
                raise ValueError(f"{tag.name} is not writable: mark it in the plant file, or do not write it")
        self._writes += 1
        if self.cut:
            self._write_failures += 1
            return {tag.name: WriteOutcome.NOT_SENT for tag, _ in values}
        codes = self._plant.write([(tag.name, value) for tag, value in values])
        if self.drop_answers:
            self._write_failures += 1
            return {tag.name: WriteOutcome.UNKNOWN for tag, _ in values}
        return {
            tag.name: WriteOutcome.WRITTEN if severity(code) is Severity.GOOD else WriteOutcome.REJECTED
            for (tag, _), code in zip(values, codes, strict=True)
        }

    async def close(self) -> None:
        """Nothing to close."""

    def statistics(self) -> LinkStatistics:
        """Counters so far."""
        state = LinkState.DOWN if self.cut else LinkState.UP
        return LinkStatistics(state, 1, 0, self._reads, self._read_failures, self._writes, self._write_failures, "")
