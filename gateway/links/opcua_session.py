"""One OPC UA session from its first byte to its last: dialled fresh, lost once, never reused.

Every call has a deadline on the injected clock. One that fails or misses it loses the session for good:

    dial -> (read | write | tend)* -> lost(reason) | closed

A peer that still answers is parted from politely, so that it frees the session; a silent one is cut off.
"""

from __future__ import annotations

import asyncio
from collections.abc import Coroutine, Sequence
from dataclasses import dataclass
from typing import Any, TypeVar

from asyncua import ua
from asyncua.client.client import Client
from asyncua.client.ua_client import UaClientState
from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.uaerrors import UaStatusCodeError

from gateway.clock import NS, Clock
from gateway.links import opcua_survey
from gateway.links.deadline import DeadlineMissedError, within
from gateway.links.opcua_client import cut, establish, farewell, fresh_client, refusal, why
from gateway.links.opcua_survey import OpcUaSite, Survey
from gateway.links.opcua_values import encode
from gateway.links.protocol import AddressUnknownError, PeerUnreachableError
from gateway.signals import Tag

T = TypeVar("T")

RENEW_AT = 0.75
"""Fraction of a channel's lifetime after which it is renewed (OPC 10000-4, 5.5.2.1)."""


@dataclass(frozen=True)
class SessionTimes:
    """Times of one session, seconds.

    Attributes:
        call_timeout_s: a call without an answer for this long loses the session.
        session_timeout_s: after this long without a request the server forgets us; short, so that the sessions a
            crash leaves behind do not fill the server.
        keep_alive_s: how often the server's state and namespaces are looked at.
        channel_lifetime_s: lifetime of the secure channel's token.

    Raises:
        ValueError: not 0 < call_timeout_s < session_timeout_s, or not 0 < keep_alive_s < session_timeout_s.
    """

    call_timeout_s: float = 0.2
    session_timeout_s: float = 10.0
    keep_alive_s: float = 2.0
    channel_lifetime_s: float = 600.0

    def __post_init__(self) -> None:
        for field in ("call_timeout_s", "keep_alive_s"):
            value = getattr(self, field)
            if not 0.0 < value < self.session_timeout_s:
                raise ValueError(f"{field} = {value}: want 0 < {field} < session_timeout_s = {self.session_timeout_s}")


class SessionLostError(Exception):
    """The session is lost; the message says why."""


class OpcUaSession:
    """An activated session that has surveyed its server; `lost` gets the reason when it is over."""

    def __init__(self, client: Client, site: OpcUaSite, known: Survey, clock: Clock, times: SessionTimes) -> None:
        self._client = client
        self._site = site
        self._known = known
        self._clock = clock
        self._times = times
        self._nodes = dict(zip((tag.name for tag in site.tags), known.nodes, strict=True))
        self._gathered = (opcua_survey.STATE, *known.nodes)
        self._renew_ns = self._renewal_ns()
        self._keep_alive_ns = clock.monotonic_ns() + round(times.keep_alive_s * NS)
        self.lost: asyncio.Future[str] = asyncio.get_running_loop().create_future()
        self._watch = asyncio.create_task(self._watch_socket())

    @classmethod
    async def dial(cls, site: OpcUaSite, clock: Clock, times: SessionTimes, timeout_s: float) -> OpcUaSession:
        """Connect, open a session and survey the server, all within `timeout_s`.

        Raises:
            PeerUnreachableError: nobody answered in time, or the peer refused; names the endpoint and the fix.
            AddressUnknownError: some tags cannot be used there.
        """
        client = fresh_client(site.endpoint, times.session_timeout_s, times.channel_lifetime_s)
        due_ns = clock.monotonic_ns() + round(timeout_s * NS)
        try:
            known = await within(clock, due_ns, establish(client, site))
            return cls(client, site, known, clock, times)
        except (PeerUnreachableError, AddressUnknownError):
            await farewell(client, clock, times.call_timeout_s)
            raise
        except UaStatusCodeError as error:
            await farewell(client, clock, times.call_timeout_s)
            raise PeerUnreachableError(refusal(site.endpoint, error)) from error
        except DeadlineMissedError:
            cut(client)
            raise PeerUnreachableError(
                f"{site.endpoint} did not answer within {timeout_s:g} s: is the server hung, or the network between?"
            ) from None
        except Exception as error:  # anything from OSError to struct.error
            cut(client)
            raise PeerUnreachableError(refusal(site.endpoint, error)) from error
        except BaseException:
            cut(client)
            raise

    @property
    def usable(self) -> bool:
        """Whether a request would leave this process."""
        return not self.lost.done() and self._client.state is UaClientState.CONNECTED

    @property
    def next_ns(self) -> int:
        """Instant at which `tend` has something to do."""
        return min(self._renew_ns, self._keep_alive_ns)

    async def read(self) -> list[ua.DataValue]:
        """Answers in order of the site's tags, in one request (several only where the server limits its size).

        Raises:
            SessionLostError: it failed, or the server is no longer Running; the session is lost.
        """
        state, *answers = await self._call(self._read(self._gathered))
        await self._end_if(opcua_survey.not_running(state))
        return answers

    def encode(self, values: Sequence[tuple[Tag, float | bool]]) -> ua.WriteParameters:
        """Request that writes these values in this order, each as the type of its node, values only.

        Raises:
            UnencodableError: a node's type cannot hold its value.
        """
        return ua.WriteParameters(
            NodesToWrite=[
                ua.WriteValue(
                    NodeId=self._nodes[tag.name],
                    AttributeId=AttributeIds.Value,
                    Value=encode(value, self._known.wire_types[tag.name]),
                )
                for tag, value in values
            ]
        )

    async def write(self, request: ua.WriteParameters) -> list[int]:
        """Status codes in order of the request.

        Raises:
            SessionLostError: no proper answer came; the server may still take the values. The session is lost.
        """
        answers = await self._call(self._client.uaclient.write(request))
        if len(answers) != len(request.NodesToWrite):
            await self._end_if("a Write was answered with the wrong number of results")
        return [int(answer.value) for answer in answers]

    async def tend(self) -> None:
        """Do what is due: look whether the server still is what was surveyed, renew the channel.

        Raises:
            SessionLostError: it is not, or it failed; the session is lost.
        """
        now_ns = self._clock.monotonic_ns()
        if now_ns >= self._renew_ns:
            await self._call(self._client.open_secure_channel(renew=True))
            self._renew_ns = self._renewal_ns()
        if now_ns >= self._keep_alive_ns:
            state, namespaces = await self._call(self._read((opcua_survey.STATE, opcua_survey.NAMESPACES)))
            await self._end_if(opcua_survey.not_running(state))
            if opcua_survey.indices_of(namespaces, self._site.addresses) != self._known.indices:
                await self._end_if("the server renumbered its namespaces")
            self._keep_alive_ns = self._clock.monotonic_ns() + round(self._times.keep_alive_s * NS)

    def lose(self, reason: str) -> None:
        """End the session at once, without another word to the peer; the first reason counts."""
        self._over(reason)
        cut(self._client)

    async def close(self) -> None:
        """End the session politely, so that the server frees it, but within one call's timeout."""
        if self.usable:
            await self._part("closed by us")
        else:
            self.lose("closed by us")

    async def _read(self, nodes: Sequence[ua.NodeId]) -> list[ua.DataValue]:
        answers = await opcua_survey.read_in_batches(self._client, nodes, self._known.most_read)
        if len(answers) != len(nodes):
            raise RuntimeError("a Read was answered with the wrong number of results")
        return answers

    async def _call(self, work: Coroutine[Any, Any, T]) -> T:
        """Do one exchange within the call timeout; whatever goes wrong loses the session."""
        due_ns = self._clock.monotonic_ns() + round(self._times.call_timeout_s * NS)
        try:
            return await within(self._clock, due_ns, work)
        except DeadlineMissedError:
            self.lose(f"no answer within {self._times.call_timeout_s * 1e3:g} ms")
        except UaStatusCodeError as error:
            await self._part(why(error))
        except Exception as error:  # noqa: BLE001 - whatever the library raises, the session is over
            self.lose(why(error))
        raise SessionLostError(self.lost.result())

    async def _end_if(self, reason: str) -> None:
        """End the session for something a living peer said; no reason, no end."""
        if reason:
            await self._part(reason)
            raise SessionLostError(self.lost.result())

    async def _part(self, reason: str) -> None:
        self._over(reason)
        await farewell(self._client, self._clock, self._times.call_timeout_s)

    def _over(self, reason: str) -> None:
        if not self.lost.done():
            self.lost.set_result(reason)
        self._watch.cancel()

    def _renewal_ns(self) -> int:
        lifetime_ms: int = self._client.secure_channel_timeout
        return self._clock.monotonic_ns() + round(RENEW_AT * lifetime_ms * 1_000_000)

    async def _watch_socket(self) -> None:
        """Notice a closed socket between calls."""
        async with self._client.subscribe_state() as changes:
            while self._client.state is UaClientState.CONNECTED:
                await changes.next_change()
        self.lose("the peer closed the connection")
