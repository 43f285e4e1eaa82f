"""Tests of `controllers.advice`: what is worth knowing about a plant before it is designed for."""

from math import inf

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from controllers.advice import About, Finding, advise, nearest_actuator
from controllers.exceptions import NotLocalizableError
from controllers.network import Network
from controllers.responses import localized_responses, require_localizable
from controllers.rows import RowTable
from tests.controllers.plants import SHAPES, everything, mixed, row, tanks, zones


def chain(diagonal: list[float], coupling: float, driven: list[int]) -> Network:
    """One state per section in a row, an input where driven."""
    size = len(diagonal)
    names = [f"s{i}" for i in range(size)]
    a = np.diag(diagonal) + coupling * (np.eye(size, k=1) + np.eye(size, k=-1))
    b = np.eye(size)[:, driven]
    return Network.from_matrices(
        a, b, states=dict.fromkeys(names, 1), inputs={name: int(i in driven) for i, name in enumerate(names)}
    )


def about(found: tuple[Finding, ...], what: About) -> list[Finding]:
    """Findings of one kind."""
    return [finding for finding in found if finding.about is what]


@pytest.mark.parametrize("network", [zones(row(5)), tanks(row(4))])
def test_a_sound_plant_gives_nothing_to_say(network: Network) -> None:
    """One piece, actuators everywhere, stable, controllable: no finding."""
    assert advise(network, 1) == ()


def test_separate_plants_are_said() -> None:
    """Each is named by its first section, with its size."""
    found = about(advise(zones((5, [(0, 2), (1, 3)])), 1), About.PIECES)
    assert [(finding.section, finding.text.split(" section(s)")[0][-1]) for finding in found] == [
        ("zone-1", "2"), ("zone-2", "2"), ("zone-5", "1")
    ]  # fmt: skip
    assert found[0].text == (
        "section 'zone-1' begins a plant of 2 section(s) by itself, one of 3; couple them if they are one plant"
    )


def test_sections_without_an_actuator_in_reach_are_named() -> None:
    """With one input at the end of a row, everything beyond the locality is named with how far the nearest is."""
    network = chain([0.8] * 5, 0.05, [0])
    found = about(advise(network, 2), About.NO_ACTUATOR)
    assert [finding.section for finding in found] == ["s3", "s4"]
    assert found[1].text == (
        "section 's4' has no actuator within 2 couplings: the nearest is 4 couplings away; "
        "raise the locality or add one"
    )
    assert nearest_actuator(network).tolist() == [0, 1, 2, 3, 4]
    assert about(advise(network, 4), About.NO_ACTUATOR) == []


def test_an_input_that_moves_nothing_is_no_actuator() -> None:
    """A column of zeros in B does not count; a plant with nothing else has no actuator at all."""
    network = Network.from_matrices([[0.5]], [[0.0]], states={"one": 1})
    assert nearest_actuator(network).tolist() == [inf]
    (finding,) = about(advise(network, 3), About.NO_ACTUATOR)
    assert "its plant has none at all" in finding.text


@pytest.mark.parametrize(
    ("block", "mode", "words"),
    [
        ([[1.05]], 1.05, "mode 1.05 grows by 5 % per period"),
        ([[1.0]], 1.0, "mode 1 drifts"),
        ([[0.8, -0.8], [0.8, 0.8]], 0.8 + 0.8j, "mode 0.8 ± 0.8i grows by 13 % per period"),
    ],
)
def test_an_unstable_section_is_said_with_its_mode(block: list[list[float]], mode: complex, words: str) -> None:
    """Once for a conjugate pair; growing and drifting are told apart."""
    size = len(block)
    network = Network.from_matrices(block, np.eye(size), states={"one": size}, inputs={"one": size})
    (finding,) = advise(network, 1)
    assert finding.about is About.UNSTABLE
    assert finding.mode == pytest.approx(mode)
    assert words in finding.text


def test_a_mode_that_nothing_moves_is_said_and_whether_it_settles() -> None:
    """A state that neither the input nor a neighbour reaches: stable, it is said; unstable, nothing can hold it."""
    for pole, words in ((0.7, "it settles by itself"), (1.1, "nothing can hold it: add an actuator")):
        network = Network.from_matrices([[0.5, 0.2], [0.0, pole]], [[1.0], [0.0]], states={"one": 2})
        (finding,) = about(advise(network, 1), About.UNCONTROLLABLE)
        assert finding.mode == pytest.approx(pole)
        assert words in finding.text


def test_a_neighbour_that_moves_a_mode_counts() -> None:
    """An unstable section without input is controllable through the driven one beside it; it is said to be unstable."""
    network = chain([1.2, 0.5], 0.3, [1])
    assert {finding.about for finding in advise(network, 1)} == {About.UNSTABLE}


def test_a_mode_of_sections_together_is_found() -> None:
    """Two equal unstable sections driven by the same input can only be moved alike: what they do apart is nobody's."""
    network = Network.from_matrices(
        np.diag([1.1, 1.1, 0.5]) + 0.1 * np.array([[0, 0, 1], [0, 0, 1], [0, 0, 0]]),
        [[0.0], [0.0], [1.0]],
        states={"left": 1, "right": 1, "middle": 1},
        inputs={"middle": 1},
    )
    (finding,) = about(advise(network, 1), About.UNCONTROLLABLE)
    assert finding.section in {"left", "right"}
    assert finding.mode == pytest.approx(1.1)


@settings(max_examples=25)
@given(st.sampled_from(sorted(SHAPES)), st.integers(0, 1000), st.floats(0.5, 2.5))
def test_a_plant_that_is_said_to_be_out_of_hand_is(shape: str, seed: int, gain: float) -> None:
    """A mode is called out of hand just where the part of the plant that no input reaches does not settle."""
    rng = np.random.default_rng(seed)
    plain = mixed(SHAPES[shape](rng), rng)
    sizes = dict(zip(plain.names, np.diff(plain.x_at).tolist(), strict=True))
    inputs = dict(zip(plain.names, np.diff(plain.u_at).tolist(), strict=True))
    b = plain.b.toarray()
    if rng.random() < 0.5:
        b[:] = 0.0
    network = Network.from_matrices(gain * plain.a.toarray(), b, states=sizes, inputs=inputs)
    a = network.a.toarray()
    reach = [b]
    for _ in range(len(a) - 1):
        step = a @ reach[-1]
        reach.append(step / max(np.abs(step).max(initial=0.0), 1e-300))
    left, values, _ = np.linalg.svd(np.hstack(reach))
    unreached = left[:, int((values > 1e-8 * max(values.max(initial=0.0), 1e-300)).sum()) :]
    modes = np.linalg.eigvals(unreached.T @ a @ unreached) if unreached.size else np.zeros(0)
    lost = bool((np.abs(modes) >= 1).any())
    said = [
        finding for finding in about(advise(network, 1), About.UNCONTROLLABLE) if "nothing can hold" in finding.text
    ]
    assert bool(said) is lost


def test_the_error_of_a_plant_that_no_locality_helps_says_who_lacks_what() -> None:
    """Without any actuator by the section's name; with too few by what cannot be stopped."""
    size = 12
    bare = chain([1.0] * size, 1.0, [])
    table = RowTable.build(bare, everything(bare), 12)
    with pytest.raises(NotLocalizableError, match=r"within reach: 's0' and 11 more \(its plant has none at all\)$"):
        require_localizable(table, localized_responses(table, 1), search_up_to=3)
    far = chain([1.0] * size, 1.0, [0])
    table = RowTable.build(far, everything(far), 12)
    with pytest.raises(NotLocalizableError, match=r"within reach: 's4' and 7 more \(nearest 4 couplings away\)$"):
        require_localizable(table, localized_responses(table, 1), search_up_to=3)
    few = chain([1.0] * size, 1.0, [1, 4, 7, 10])
    table = RowTable.build(few, everything(few), 12)
    with pytest.raises(
        NotLocalizableError, match=r"'s1' has too few inputs near it to stop what its states do before 's3' feels it$"
    ):
        require_localizable(table, localized_responses(table, 1), search_up_to=2)
