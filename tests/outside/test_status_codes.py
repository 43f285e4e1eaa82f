"""Status codes against the published table (check 16).

Source: OPC 10000-6, annex A, the CSV of StatusCodes, as the installed asyncua carries it; severity by OPC 10000-4,
7.39. The prefix of a name (`Good`, `Uncertain`, `Bad`) is the table's own statement of the severity, independent of the
bits.
"""

from __future__ import annotations

from collections.abc import AsyncIterator

import pytest
import pytest_asyncio
from asyncua.ua.status_codes import StatusCodes, code_to_name_doc

from gateway.clock import VirtualClock
from gateway.links.opcua import OpcUaLink
from gateway.signals import Tag
from gateway.status_codes import Severity, name, severity
from tests.gateway.links.peers import Bench, ahead, answer, running_server, soon

TABLE = {named: code for named, code in vars(StatusCodes).items() if not named.startswith("_")}
PREFIXES = {"Good": Severity.GOOD, "Uncertain": Severity.UNCERTAIN, "Bad": Severity.BAD}


def test_the_table_is_the_real_one() -> None:
    """The library carries the whole table and not a handful, with the values of the standard where we know them."""
    assert len(TABLE) > 200
    assert TABLE["BadUnexpectedError"] == 0x80010000
    assert TABLE["UncertainLastUsableValue"] == 0x40900000
    assert TABLE["GoodLocalOverride"] == 0x00960000


@pytest.mark.parametrize("named", TABLE)
def test_severity_of_every_code_agrees_with_its_name(named: str) -> None:
    """Two independent statements, the prefix and the bits, agree for each code."""
    (expected,) = (judged for prefix, judged in PREFIXES.items() if named.startswith(prefix))
    assert severity(TABLE[named]) is expected


@pytest.mark.parametrize("named", TABLE)
def test_every_code_is_found_by_number(named: str) -> None:
    """Name to number and back (names that share a number share a meaning)."""
    assert TABLE[name(TABLE[named])] == TABLE[named]


@pytest_asyncio.fixture
async def bench() -> AsyncIterator[Bench]:
    """Give a real server with a namespace of its own."""
    async with running_server() as server, Bench(server, disposable=True) as fresh:
        yield fresh


@pytest.mark.wire
async def test_every_code_survives_a_read_over_the_wire(bench: Bench) -> None:
    """One gather of one value per code: none raises, each keeps its code, whatever the others say."""
    sent = dict(TABLE) | {f"Unlisted-{code:08X}": code for code in (0x0000_0480, 0x4000_0300, 0x8034_0401, 0xC0FF_0000)}
    for named, code in sent.items():
        node = await bench.add(named, 1.0)
        await node.write_value(answer(1.0, code))
    clock = VirtualClock()
    link = OpcUaLink(bench.endpoint, bench.uri, [Tag(named, named) for named in sent], clock)
    await soon(link.open(5.0))
    try:
        gathered = await soon(link.gather(ahead(clock, 0.1)))
    finally:
        await soon(link.close())

    assert gathered.complete
    assert {named: reading.status for named, reading in gathered.readings.items()} == sent
    assert set(code_to_name_doc) <= set(sent.values())
