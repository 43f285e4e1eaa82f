"""Plain values as the OPC UA library wants them; its annotations ask for integers and times of its own making."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from typing import Any

from asyncua import ua

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


def node_id(identifier: Any, index: Any = 0) -> ua.NodeId:
    """Return the node of a plain identifier in the namespace with this index."""
    return ua.NodeId(identifier, index)


def new_node_id(index: Any) -> ua.NodeId:
    """Return what asks the server to choose an identifier in the namespace with this index."""
    return ua.NodeId(NamespaceIndex=index)


def status_code(value: Any) -> ua.StatusCode:
    """Return a status code by its number."""
    return ua.StatusCode(value)


def stamp(unix_ns: int) -> Any:
    """Return Unix nanoseconds as a time stamp; a float on the way would lose its microseconds."""
    return _EPOCH + timedelta(microseconds=unix_ns // 1000)
