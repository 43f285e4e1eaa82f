"""asyncua's client, used as a codec and a socket only.

Its own supervisor, watchdog, reconnection and channel renewal are never started, because they would die or block
unseen; its timeouts are set out of the way, because the caller has a deadline for everything here.

A silent peer is cut off with a reset, so that a request it has not taken yet is thrown away by our kernel instead of
being delivered when a dead network comes back: a late input is worse than none. What the peer has taken already, only
its own validity window can refuse.
"""

from __future__ import annotations

import contextlib
import logging
import socket
import struct

from asyncua.client.client import Client
from asyncua.ua.uaerrors import UaStatusCodeError

from gateway.clock import NS, Clock
from gateway.links.deadline import within
from gateway.links.opcua_survey import OpcUaSite, Survey, survey
from gateway.status_codes import name

LIBRARY_TIMEOUT_S = 60.0
"""asyncua's own timeout: only so that nothing of it waits for ever, ours always comes first."""

_RESET_ON_CLOSE = struct.pack("ii", 1, 0)


def hush_library() -> None:
    """Keep asyncua's log to its errors: its warnings are about what this link expects and reports itself."""
    logger = logging.getLogger("asyncua")
    if logger.level == logging.NOTSET:
        logger.setLevel(logging.ERROR)


def fresh_client(endpoint: str, session_timeout_s: float, channel_lifetime_s: float) -> Client:
    """Build a client that has not dialled yet; it is used for one session."""
    client = Client(endpoint, timeout=LIBRARY_TIMEOUT_S)
    client.name = "Lengthsman"
    client.description = "Lengthsman gateway"
    client.application_uri = "urn:lengthsman:gateway"
    client.product_uri = "urn:lengthsman"
    client.session_timeout = round(session_timeout_s * 1e3)
    client.secure_channel_timeout = round(channel_lifetime_s * 1e3)
    return client


async def establish(client: Client, site: OpcUaSite) -> Survey:
    """Dial, open channel and session, survey the server; no deadline of its own, the caller sets one."""
    await client.connect_socket()
    await client.send_hello()
    await client.open_secure_channel()
    await client.create_session()
    await client.activate_session()
    return await survey(client, site)


async def farewell(client: Client, clock: Clock, timeout_s: float) -> None:
    """Close session, channel and socket if the peer still plays along, cut the socket otherwise."""

    async def part() -> None:
        await client.uaclient.close_session(delete_subscriptions=True)
        await client.close_secure_channel()

    parted = False
    try:
        with contextlib.suppress(Exception):  # it is over either way
            await within(clock, clock.monotonic_ns() + round(timeout_s * NS), part())
            parted = True
    finally:
        if parted:
            client.disconnect_socket()
        else:
            cut(client)


def cut(client: Client) -> None:
    """Reset the socket and forget what it has not delivered."""
    protocol = client.uaclient.protocol
    transport = None if protocol is None else protocol.transport
    if transport is None:
        return
    wire = transport.get_extra_info("socket")
    if wire is not None:
        with contextlib.suppress(OSError):  # closed already: then nothing is left to throw away
            wire.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, _RESET_ON_CLOSE)
    transport.abort()


def why(error: Exception) -> str:
    """Say what went wrong in an exchange."""
    if isinstance(error, UaStatusCodeError):
        return f"the server answered {name(error.code)}"
    if isinstance(error, ConnectionError):
        return f"the connection broke ({error})" if str(error) else "the connection broke"
    return f"{type(error).__name__}: {error}" if str(error) else type(error).__name__


def refusal(endpoint: str, error: Exception) -> str:
    """Say why a server cannot be reached, and what to do about it."""
    match error:
        case ConnectionRefusedError():
            fix = "nobody listens there: start the server, or correct the site's endpoint"
        case socket.gaierror():
            fix = "the host name is not known: correct the site's endpoint, or the name service"
        case UaStatusCodeError():
            fix = f"{why(error)} while the session was opened: see the server's log for its reason"
        case OSError():
            fix = f"{error.strerror or error}: correct the site's endpoint, or the network"
        case _:
            fix = f"{why(error)} while the session was opened: is it an OPC UA server at all?"
    return f"{endpoint} cannot be reached: {fix}"
