"""Tests of `controllers.network`."""

import networkx as nx  # type: ignore[import-untyped]
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from controllers.exceptions import NetworkError
from controllers.network import Network, span_indices
from tests.controllers.plants import SHAPES, Graph, grid, mixed, row, tanks, zones


def graph_of(graph: Graph) -> nx.Graph:
    """The same couplings for networkx."""
    size, edges = graph
    out = nx.Graph()
    out.add_nodes_from(range(size))
    out.add_edges_from(edges)
    return out


@given(shape=st.sampled_from(sorted(SHAPES)), seed=st.integers(0, 10_000), d=st.integers(0, 4))
def test_localities_are_the_sections_within_d_hops(shape: str, seed: int, d: int) -> None:
    """L_i(d) is what breadth-first search of an independent graph library finds, sorted."""
    rng = np.random.default_rng(seed)
    graph = SHAPES[shape](rng)
    reference = graph_of(graph)
    for i, found in enumerate(mixed(graph, rng).localities(d)):
        assert found.tolist() == sorted(nx.single_source_shortest_path_length(reference, i, cutoff=d))


def test_influence_is_looked_up_both_ways() -> None:
    """A coupling that acts one way only makes the two sections neighbours of each other all the same."""
    a = [[0.9, 0.0, 0.0], [0.1, 0.9, 0.0], [0.0, 0.0, 0.9]]
    network = Network.from_matrices(a, np.eye(3), states={"up": 1, "down": 1, "apart": 1})
    assert [found.tolist() for found in network.localities(1)] == [[0, 1], [0, 1], [2]]


@pytest.mark.parametrize("matrix", ["b", "e"])
def test_inputs_and_disturbances_couple_too(matrix: str) -> None:
    """A section whose input or disturbance acts on another section is its neighbour."""
    shared = np.array([[1.0, 0.0], [0.5, 1.0]])
    b, e = (shared, np.eye(2)) if matrix == "b" else (np.eye(2), shared)
    network = Network.from_matrices(np.eye(2), b, states={"one": 1, "other": 1}, e=e)
    assert network.localities(1)[0].tolist() == [0, 1]


@given(sizes=st.lists(st.integers(1, 4), min_size=1, max_size=4), seed=st.integers(0, 1000))
def test_pieces_counts_separate_plants(sizes: list[int], seed: int) -> None:
    """Plants put side by side without a coupling are counted as so many pieces."""
    edges, first = [], 0
    for size in sizes:
        edges += [(first + i, first + j) for i, j in row(size)[1]]
        first += size
    assert mixed((first, edges), np.random.default_rng(seed)).pieces == len(sizes)


def test_explicit_zeros_do_not_couple() -> None:
    """A stored zero is no influence."""
    stored = zones(row(2)).a.copy()
    stored.data[:] = np.where(np.isin(stored.data, stored.diagonal()), stored.data, 0.0)
    network = Network.from_matrices(stored, np.eye(2), states={"one": 1, "other": 1})
    assert network.pieces == 2


def test_left_out_sizes_are_one_each() -> None:
    """Inputs default to one per section, disturbances to none, and every state is measured."""
    network = Network.from_matrices(np.eye(3), np.ones((3, 2)), states={"one": 2, "other": 1})
    assert (network.u_at.tolist(), network.w_at.tolist(), network.y_at.tolist()) == ([0, 1, 2], [0, 0, 0], [0, 2, 3])
    assert (network.c.toarray() == np.eye(3)).all()


def test_sections_find_their_states_and_inputs() -> None:
    """Positions of states and inputs follow the order of the sections."""
    network = tanks(grid(2, 2))
    assert network.states_of(np.array([0, 2])).tolist() == [0, 1, 4, 5]
    assert network.inputs_of(np.array([3])).tolist() == [3]
    assert network.section_of_input().tolist() == [0, 1, 2, 3]
    assert span_indices(network.x_at, np.zeros(0, dtype=np.int64)).tolist() == []


def test_index_finds_a_name() -> None:
    """A section is found by its name."""
    assert zones(row(5)).index("zone-4") == 3


@pytest.mark.parametrize(
    ("wrong", "message"),
    [
        ({"a": np.eye(3)}, r"A is 3 x 3, but the sections given make it 2 x 2"),
        ({"b": np.eye(3)}, r"B is 3 x 3, but the sections given make it 2 x 2"),
        ({"e": np.eye(3)}, r"E is 3 x 3, but the sections given make it 2 x 2"),
        ({"c": np.eye(3)}, r"C is 3 x 3, but the sections given make it 2 x 2"),
        ({"a": [[1.0, 0.0], [np.nan, 1.0]]}, r"A\[1, 0\] is nan; every entry must be finite"),
        ({"b": [[1.0, 0.0], [0.0, np.inf]]}, r"B\[1, 1\] is inf; every entry must be finite"),
        ({"inputs": {"one": 1, "third": 1}}, r"inputs: 'third' is not a section"),
        ({"disturbances": {"third": 1}, "e": np.eye(2)}, r"disturbances: 'third' is not a section"),
        ({"outputs": {"third": 1}, "c": np.eye(2)}, r"outputs: 'third' is not a section"),
        ({"states": {"one": 2, "other": 0}}, r"states of section 'other': 0 is not allowed; give one or more"),
        ({"inputs": {"one": 3, "other": -1}}, r"inputs of section 'other': -1 is not allowed; give zero or more"),
    ],
)
def test_what_does_not_fit_is_refused(wrong: dict[str, object], message: str) -> None:
    """Sizes, names and numbers that do not fit together are named with their place, value and fix."""
    right: dict[str, object] = {"a": np.eye(2), "b": np.eye(2), "states": {"one": 1, "other": 1}}
    with pytest.raises(NetworkError, match=message):
        Network.from_matrices(**(right | wrong))  # type: ignore[arg-type]


def test_an_unknown_section_is_named_with_the_known_ones() -> None:
    """The message lists what there is, shortened when there is much."""
    with pytest.raises(NetworkError, match=r"no section is called 'zone-x'; sections are zone-1, .*zone-8, \.\.\.$"):
        zones(row(9)).index("zone-x")
