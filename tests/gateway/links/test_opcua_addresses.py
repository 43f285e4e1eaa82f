"""Addresses as a plant file writes them, and the nodes a session finds by them."""

from __future__ import annotations

import uuid

import pytest
from asyncua import ua
from hypothesis import given
from hypothesis import strategies as st

from gateway.links.opcua_addresses import STANDARD_NAMESPACE, checked_endpoint, parse, parse_all
from gateway.signals import Tag

SITE = "urn:example:panel"
SERVER = [STANDARD_NAMESPACE, "urn:server", "urn:other", SITE]


@pytest.mark.parametrize(
    ("text", "index", "identifier"),
    [
        ("tank-3/level", 3, "tank-3/level"),
        ("TR.tank-3.level", 3, "TR.tank-3.level"),
        ("ns=2;s=TarnRow/tank-3/level", 3, "TarnRow/tank-3/level"),
        ("ns=2;s=a;b=c", 3, "a;b=c"),
        ("nsu=urn:other;s=level", 2, "level"),
        ("nsu=urn:other;i=7", 2, 7),
        ("i=2258", 0, 2258),
        ("ns=0;i=2258", 0, 2258),
        ("ns=1;i=4294967295", 3, 4294967295),
        ("ns=2;g=12345678-9abc-def0-1234-56789abcdef0", 3, uuid.UUID("12345678-9abc-def0-1234-56789abcdef0")),
        ("ns=2;b=AP8=", 3, b"\x00\xff"),
    ],
)
def test_an_address_leads_to_a_node(text: str, index: int, identifier: object) -> None:
    """Every form leads to the node of this index and identifier on a server with this NamespaceArray."""
    node = parse(text, SITE).node_id(SERVER)
    assert node is not None
    assert (node.NamespaceIndex, node.Identifier) == (index, identifier)


def test_the_index_follows_the_uri() -> None:
    """The same address finds the namespace wherever the server puts it; the index it was written with means nothing."""
    address = parse("ns=2;s=level", SITE)
    for table in ([STANDARD_NAMESPACE, SITE], [STANDARD_NAMESPACE, "a", "b", "c", SITE]):
        node = address.node_id(table)
        assert node is not None
        assert node.NamespaceIndex == table.index(SITE)


def test_a_namespace_the_server_lacks_leads_nowhere() -> None:
    """No index is guessed."""
    assert parse("level", SITE).node_id([STANDARD_NAMESPACE, "urn:server"]) is None


def test_reserved_characters_of_a_uri_are_escaped() -> None:
    """A semicolon or percent sign within a URI is written as OPC 10000-6, 5.3.1.11 says."""
    assert parse("nsu=urn:a%3Bb%25c%253B;s=x", SITE).namespace == "urn:a;b%c%3B"


@given(st.text(min_size=1).filter(lambda text: "=" not in text))
def test_text_without_an_equals_sign_is_an_identifier_as_it_is(text: str) -> None:
    """Whatever a site calls its nodes, plain text is taken literally."""
    address = parse(text, SITE)
    assert (address.namespace, address.identifier) == (SITE, text)


@pytest.mark.parametrize(
    ("text", "complaint"),
    [
        ("", "address is empty"),
        ("ns=two;s=level", "malformed: want"),
        ("ns=2;level", "malformed: want"),
        ("nsu=;s=level", "malformed: want"),
        ("ns=2;s=", "malformed: want"),
        ("i=-1", "wants a number from 0 to 4294967295"),
        ("i=4294967296", "wants a number from 0 to 4294967295"),
        ("i=seven", "wants a number"),
        ("g=1234", "wants a GUID"),
        ("b=!", "wants base64"),
    ],
)
def test_a_malformed_address_says_what_is_allowed(text: str, complaint: str) -> None:
    """What starts like a formal address must be one."""
    with pytest.raises(ValueError, match=complaint):
        parse(text, SITE)


def test_a_malformed_address_names_its_tag() -> None:
    """Among many tags the wrong one is named."""
    with pytest.raises(ValueError, match=r"tank-2\.level: address 'i=x' is malformed"):
        parse_all([Tag("tank-1.level", "a"), Tag("tank-2.level", "i=x")], SITE)


def test_two_indices_on_one_site_are_ambiguous() -> None:
    """An index stands for the site's one namespace, so two different ones cannot both."""
    tags = [Tag("tank-1.level", "ns=2;s=a"), Tag("panel.permit", "ns=3;s=b")]
    with pytest.raises(ValueError, match=r"tank-1\.level is addressed by ns=2 but panel\.permit by ns=3.*write nsu="):
        parse_all(tags, SITE)


def test_names_used_twice_are_refused() -> None:
    """Readings and outcomes go by name."""
    with pytest.raises(ValueError, match=r"tags named twice: tank-1\.level"):
        parse_all([Tag("tank-1.level", "a"), Tag("tank-1.level", "b")], SITE)


@pytest.mark.parametrize("text", ["opc.tcp://127.0.0.1:4840", "opc.tcp://[::1]:4840/a/b", "opc.tcp://panel.example:1"])
def test_an_endpoint_says_where_to_dial(text: str) -> None:
    """Host and port, IPv6 in brackets, a path if need be."""
    assert checked_endpoint(text) == text


@pytest.mark.parametrize("text", ["", "127.0.0.1:4840", "http://127.0.0.1:4840", "opc.tcp://panel", "opc.tcp://:4840"])
def test_an_endpoint_without_host_or_port_is_refused(text: str) -> None:
    """Nothing is dialled on a guess."""
    with pytest.raises(ValueError, match=r"want opc\.tcp://host:port"):
        checked_endpoint(text)


def test_nodes_are_the_librarys_own() -> None:
    """What comes out goes straight into a request."""
    assert isinstance(parse("level", SITE).node_id(SERVER), ua.NodeId)
