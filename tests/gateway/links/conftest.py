"""One real server per module, because building its address space takes a second; a namespace of its own per test."""

from __future__ import annotations

from collections.abc import AsyncIterator

import pytest
import pytest_asyncio
from asyncua.server.server import Server

from gateway.clock import VirtualClock
from tests.gateway.links.peers import Bench, running_server


@pytest_asyncio.fixture(scope="module", loop_scope="module")
async def server() -> AsyncIterator[Server]:
    """Give a real server on loopback."""
    async with running_server() as running:
        yield running


@pytest_asyncio.fixture(loop_scope="module")
async def bench(server: Server) -> AsyncIterator[Bench]:
    """Give the server with a fresh namespace."""
    async with Bench(server) as fresh:
        yield fresh


@pytest.fixture
def clock() -> VirtualClock:
    """Give a clock that stands still."""
    return VirtualClock(seed=7)
