"""Addresses of OPC UA nodes as a plant file writes them, and how a session finds the node.

    tank-3/level                     string identifier in the site's namespace
    ns=2;s=tank-3/level              the same: an index is only what somebody once saw, it may change at any restart
    nsu=urn:example:panel;s=level    identifier in the namespace of this URI (OPC 10000-6, 5.3.1.11)
    i=2258, ns=0;i=2258              identifier in the standard's own namespace, whose index is fixed

Kinds of identifier: `s` string, `i` number, `g` GUID, `b` base64 bytes. Within a URI, `%3B` stands for `;` and `%25`
for `%`. Indices are looked up in the server's NamespaceArray once per session, by URI.
"""

from __future__ import annotations

import binascii
import re
import uuid
from base64 import b64decode
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

from asyncua import ua

from gateway.signals import Tag

STANDARD_NAMESPACE = "http://opcfoundation.org/UA/"
LARGEST_NUMBER = 0xFFFF_FFFF

_ENDPOINT = re.compile(r"opc\.tcp://([^/:]+|\[[0-9A-Fa-f:.]+\]):\d{1,5}(/.*)?")
_LOOKS_FORMAL = re.compile(r"(ns|nsu|s|i|g|b)=", re.IGNORECASE)
_FORMAL = re.compile(r"(?:ns=(?P<index>\d+);|nsu=(?P<uri>[^;]+);)?(?P<kind>[sigb])=(?P<identifier>.+)", re.DOTALL)


@dataclass(frozen=True)
class Address:
    """One address, read; `seen_index` is the index it was written with, for the consistency check alone."""

    text: str
    namespace: str
    identifier: str | int | uuid.UUID | bytes
    seen_index: int | None = None

    def node_id(self, namespaces: Sequence[str]) -> ua.NodeId | None:
        """Node on a server with this NamespaceArray, None when the array lacks the namespace."""
        if self.namespace == STANDARD_NAMESPACE:
            return node_id(self.identifier, 0)
        if self.namespace not in namespaces:
            return None
        return node_id(self.identifier, namespaces.index(self.namespace))


def checked_endpoint(text: str) -> str:
    """Return an endpoint as it is if it says where to dial.

    Raises:
        ValueError: it is not `opc.tcp://host:port[/path]`.
    """
    if not _ENDPOINT.fullmatch(text):
        raise ValueError(f"endpoint {text!r} is malformed: want opc.tcp://host:port")
    return text


def node_id(identifier: Any, index: Any = 0) -> ua.NodeId:
    """Node of this plain identifier; the library's annotations would have its own integers, its code takes ours."""
    return ua.NodeId(identifier, index)


def parse(text: str, site_namespace: str) -> Address:
    """Read one address of a site whose namespace has this URI.

    Raises:
        ValueError: the text starts like a formal address but is none; the message says what is allowed.
    """
    if not _LOOKS_FORMAL.match(text):
        if not text:
            raise ValueError("address is empty: give a string identifier or a formal address such as 'ns=2;s=name'")
        return Address(text=text, namespace=site_namespace, identifier=text)
    formal = _FORMAL.fullmatch(text)
    if formal is None:
        raise _malformed(text, "want '[ns=<index>;|nsu=<uri>;]<s|i|g|b>=<identifier>'")
    index = None if formal["index"] is None else int(formal["index"])
    if formal["uri"] is not None:
        namespace = formal["uri"].replace("%3B", ";").replace("%25", "%")
    else:
        namespace = site_namespace if index else STANDARD_NAMESPACE
    identifier = _identifier(text, formal["kind"], formal["identifier"])
    return Address(text=text, namespace=namespace, identifier=identifier, seen_index=index or None)


def parse_all(tags: Iterable[Tag], site_namespace: str) -> tuple[Address, ...]:
    """Read the addresses of all tags of one site.

    Raises:
        ValueError: a name is used twice, some address is malformed, or two carry different indices, so that no one
            namespace can be meant; the message names the tags.
    """
    tags = tuple(tags)
    twice = [name for name, count in Counter(tag.name for tag in tags).items() if count > 1]
    if twice:
        raise ValueError(f"tags named twice: {', '.join(twice)}; every tag of a link needs a name of its own")
    addresses: list[Address] = []
    first_seen: tuple[str, int] | None = None
    for tag in tags:
        try:
            address = parse(tag.address, site_namespace)
        except ValueError as error:
            raise ValueError(f"{tag.name}: {error}") from None
        if address.seen_index is not None:
            first_seen = first_seen or (tag.name, address.seen_index)
            if address.seen_index != first_seen[1]:
                raise ValueError(
                    f"{first_seen[0]} is addressed by ns={first_seen[1]} but {tag.name} by ns={address.seen_index}: "
                    f"an index stands for the site's one namespace ({site_namespace}); "
                    "write nsu=<namespace uri>; for a node in another"
                )
        addresses.append(address)
    return tuple(addresses)


def _identifier(text: str, kind: str, value: str) -> str | int | uuid.UUID | bytes:
    match kind:
        case "i":
            if not value.isdecimal() or int(value) > LARGEST_NUMBER:
                raise _malformed(text, f"i= wants a number from 0 to {LARGEST_NUMBER}")
            return int(value)
        case "g":
            try:
                return uuid.UUID(value)
            except ValueError:
                raise _malformed(text, "g= wants a GUID such as 12345678-9abc-def0-1234-56789abcdef0") from None
        case "b":
            try:
                return b64decode(value, validate=True)
            except binascii.Error:
                raise _malformed(text, "b= wants base64") from None
    return value


def _malformed(text: str, allowed: str) -> ValueError:
    return ValueError(f"address {text!r} is malformed: {allowed}")
