"""The simulated plant told to misbehave: one OPC UA client beside the gateway's, calling one method.

Control does not know of it, as it would not know what breaks on a real plant.
"""

from __future__ import annotations

import asyncio
from types import TracebackType
from typing import Any, Self

from asyncua import ua
from asyncua.client.client import Client
from asyncua.ua.uaerrors import UaError

from gateway.links.opcua_addresses import node_id
from gateway.links.opcua_client import hush_library
from sim_plant.servers.address_space import PROVOKE, REHEARSAL

CALL_TIMEOUT_S = 5.0
REFUSED = "refused: "
"""What the plant's answer begins with when it does not do what a line says."""


class ProvokeError(Exception):
    """The simulated plant did not answer, or refused the line; the message is its reason."""


class Rehearsal:
    """A connection to the simulated plant's method, as an asynchronous context manager.

    Args:
        endpoint: where the plant is served.
        namespace: URI of its namespace.
    """

    def __init__(self, endpoint: str, namespace: str) -> None:
        hush_library()
        self._endpoint = endpoint
        self._namespace = namespace
        self._client = Client(endpoint, timeout=CALL_TIMEOUT_S)
        self._client.name = "Lengthsman rehearsal"
        self._index = 0

    async def __aenter__(self) -> Self:
        """Connect.

        Raises:
            ProvokeError: nobody answers there, or it is no simulated plant.
        """
        try:
            async with asyncio.timeout(2 * CALL_TIMEOUT_S):
                await self._client.connect()
                self._index = await self._client.get_namespace_index(self._namespace)
        except (OSError, TimeoutError, UaError, ValueError) as error:
            raise ProvokeError(f"{self._endpoint}: {error or type(error).__name__}") from error
        return self

    async def __aexit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        """Disconnect; a plant that is gone already is no error."""
        try:
            async with asyncio.timeout(CALL_TIMEOUT_S):
                await self._client.disconnect()
        except (OSError, TimeoutError, UaError):
            return

    async def provoke(self, line: str) -> str:
        """Hand over one line of fault; returns what the plant says it did.

        Raises:
            ProvokeError: the plant refused the line, or did not answer.
        """
        rehearsal = self._client.get_node(node_id(REHEARSAL, self._index))
        argument: Any = ua.Variant(line, ua.VariantType.String)
        try:
            async with asyncio.timeout(CALL_TIMEOUT_S):
                answer = str(await rehearsal.call_method(node_id(PROVOKE, self._index), argument))
        except (OSError, TimeoutError, UaError) as error:
            raise ProvokeError(f"“{line}” was not answered: {error or type(error).__name__}") from error
        if answer.startswith(REFUSED):
            raise ProvokeError(f"“{line}” was {answer}")
        return answer
