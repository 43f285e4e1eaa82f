"""Tests of `controllers.storage`: a design as bytes and back, and every way the bytes can be wrong."""

import io
import json
from collections.abc import Callable
from dataclasses import fields
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest

from controllers import storage
from controllers.exceptions import StoredDesignError
from controllers.network import Network
from controllers.plans import Settings
from controllers.quantities import Of, Quantity, Term
from controllers.storage import pack, unpack
from controllers.synthesis import Design
from controllers.terminal import terminal_quantities
from tests.controllers.plants import SHAPES, anywhere, row, tank_quantities, tanks, zone_quantities, zones

Arrays = dict[str, npt.NDArray[Any]]


def rich(shape: str, *, forecast: bool = False, late: bool = False) -> Design:
    """A design with everything in it: terminal prices, a shared quantity, price sequences, leaks where late."""
    rng = np.random.default_rng(4)
    network = tanks(SHAPES[shape](rng), rng, late=late)
    quantities = tank_quantities(network, rng)
    near, far = (network.names[i] for i in network.localities(1)[0][:2])
    quantities += terminal_quantities(network, quantities, 5)
    quantities += [
        Quantity("supply", near, Of.INPUT, span=90, hard=(-80, 70), plus=(Term(far, Of.INPUT),)),
        Quantity("late", network.names[1], Of.STATE, (0.0, 2.0), price=(0.0, 0.1, 0.2, 0.3, 0.4)),
    ]
    return Design.build(
        network,
        quantities,
        horizon=5,
        locality=1 if late else 2,
        settings=Settings(rho=0.7, chunk=3),
        truncated=late,
        forecast=forecast,
    )


def small() -> Design:
    """Five equal zones."""
    network = zones(row(5))
    return Design.build(network, zone_quantities(network), horizon=4, locality=1)


@pytest.mark.parametrize("shape", sorted(SHAPES))
@pytest.mark.parametrize(("forecast", "late"), [(False, False), (True, False), (False, True)])
def test_a_design_comes_back_as_it_was(shape: str, forecast: bool, late: bool) -> None:
    """Structure, settings, reports and every bit of the responses are the same, and so is the plan."""
    design = rich(shape, forecast=forecast, late=late)
    again = unpack(pack(design))
    assert again.table.quantities == design.table.quantities
    assert (again.settings, again.locality, again.forecast) == (design.settings, design.locality, forecast)
    assert again.table.horizon == design.table.horizon
    assert again.leaks == design.leaks
    assert bool(again.leaks) is late
    net, before = again.table.network, design.table.network
    assert net.names == before.names
    for letter in "abec":
        assert (getattr(net, letter) != getattr(before, letter)).nnz == 0
    for one, other in zip(again.responses, design.responses, strict=True):
        assert one.report == other.report
        assert (one.rows == other.rows).all()
        assert one.gain.tobytes() == other.gain.tobytes()
        assert one.basis.tobytes() == other.basis.tobytes()
    measured = anywhere(net, np.random.default_rng(0), 5.0)
    assert again.solve(measured)[0].rows.tobytes() == design.solve(measured)[0].rows.tobytes()


def test_sections_that_shared_still_share() -> None:
    """Equal sections are stored once and hold the same arrays afterwards, so that a large plant stays small."""
    network = zones(row(40))
    design = Design.build(network, zone_quantities(network), horizon=4, locality=1)
    stored = pack(design)
    again = unpack(stored)
    assert len({id(response.basis) for response in again.responses}) == 5
    assert again.flat.basis.size == design.flat.basis.size
    assert len(stored) < len(pack(small())) + 40 * 1000


def test_the_same_design_gives_the_same_bytes() -> None:
    """Built twice, packed twice, or packed after a round trip: one fingerprint."""
    assert pack(small()) == pack(small()) == pack(unpack(pack(small())))


def arrays_of(stored: bytes) -> Arrays:
    """All arrays of a stored design."""
    with np.load(io.BytesIO(stored), allow_pickle=False) as archive:
        return {name: archive[name] for name in archive.files}


def written(arrays: Arrays, *, sealed: bool = True) -> bytes:
    """An archive of these arrays, with a digest that matches them when sealed."""
    if sealed:
        arrays = {name: array for name, array in arrays.items() if name != "digest"}
        arrays["digest"] = np.array(storage._digest(arrays))
    out = io.BytesIO()
    np.savez(out, **arrays)  # type: ignore[arg-type]
    return out.getvalue()


@pytest.mark.parametrize("name", sorted(arrays_of(pack(small()))))
def test_any_damage_is_found(name: str) -> None:
    """One array changed, left out or of another kind, and the digest no longer matches, whichever it is."""
    arrays = arrays_of(pack(small()))
    if name in ("format", "digest"):
        arrays[name] = np.array(str(arrays[name]) + " ")
    elif arrays[name].size:
        changed = arrays[name].copy()
        changed.reshape(-1)[-1] += 1
        arrays[name] = changed
    else:
        arrays[name] = arrays[name].astype(np.float32)
    with pytest.raises(StoredDesignError, match=r"damaged: its digest does not match|has version 1 , this reads 1"):
        unpack(written(arrays, sealed=False))
    del arrays[name]
    with pytest.raises(StoredDesignError):
        unpack(written(arrays, sealed=False))


@pytest.mark.parametrize("keep", [0, 1, 100, -1, -300])
def test_bytes_cut_short_are_refused(keep: int) -> None:
    """An empty, a torn and a foreign file are not a stored design."""
    stored = pack(small())
    with pytest.raises(StoredDesignError, match="not a stored design, or it is cut short; build it again"):
        unpack(stored[:keep])
    with pytest.raises(StoredDesignError, match="not a stored design"):
        unpack(b"tank-1.level,tank-2.level\n1.0,2.0\n")


def test_objects_are_never_unpickled() -> None:
    """An archive that hides an object array is refused before it is loaded."""
    arrays = arrays_of(pack(small()))
    arrays["gain_0"] = np.array([{"a": 1}], dtype=object)
    with pytest.raises(StoredDesignError, match="not a stored design"):
        unpack(written(arrays, sealed=False))


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("lengthsman design\n2", "the stored design has version 2, this reads 1; build it again"),
        ("lengthsman plan\n1", "this holds a 'lengthsman plan', not a 'lengthsman design'"),
    ],
)
def test_another_version_or_format_is_refused(text: str, message: str) -> None:
    """What was written by another program or version is not guessed at."""
    arrays = arrays_of(pack(small()))
    arrays["format"] = np.array(text)
    with pytest.raises(StoredDesignError, match=message):
        unpack(written(arrays))


def other(name: str, change: Callable[[npt.NDArray[Any]], npt.NDArray[Any]]) -> Callable[[Arrays], None]:
    """Change one array."""

    def apply(arrays: Arrays) -> None:
        arrays[name] = change(arrays[name])

    return apply


def told(**changes: Any) -> Callable[[Arrays], None]:
    """Change what the JSON says."""

    def apply(arrays: Arrays) -> None:
        about = json.loads(arrays["about"].tobytes())
        for key, value in changes.items():
            about[key] = value(about[key])
        arrays["about"] = np.frombuffer(json.dumps(about).encode(), dtype=np.uint8)

    return apply


def spoiled(array: npt.NDArray[Any], value: float) -> npt.NDArray[Any]:
    """The array with its first number replaced."""
    out = array.copy()
    out.reshape(-1)[0] = value
    return out


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (other("gain_0", lambda gain: spoiled(gain, np.nan)), "gain of section 'zone-1' holds what is not a finite"),
        (
            other("basis_0", lambda basis: spoiled(basis, np.inf)),
            "basis of section 'zone-1' holds what is not a finite",
        ),
        (other("basis_0", lambda basis: 1.01 * basis), "basis of section 'zone-1' is not orthonormal"),
        (other("gain_0", lambda gain: gain[:, :-1]), r"response of section 'zone-1' has shapes \(16, 2\)"),
        (other("basis_0", lambda basis: basis[:-1]), "response of section 'zone-1' has shapes"),
        (other("rows", lambda rows: rows + 1000), "rows of section 'zone-1' are not rows of the table"),
        (other("rows", lambda rows: rows[::-1].copy()), "rows of section 'zone-1' are not rows of the table"),
        (other("row_at", lambda at: at[:-1]), "4 responses for 5 sections"),
        (other("gain_of", lambda of: of + 99), "incomplete .*gain_99"),
        (other("a_data", lambda data: spoiled(data, np.nan)), "every entry must be finite"),
        (other("a_indices", lambda indices: indices + 99), "incomplete"),
        (told(names=lambda names: names[:-1]), "incomplete"),
        (told(horizon=lambda _: 5), "quantity 'zone-5.temperature' shows nothing of the plant"),
        (told(forecast=lambda _: True), "has shapes"),
        (told(quantities=lambda quantities: quantities[:-1]), "not rows of the table"),
        (told(quantities=lambda quantities: quantities[::-1]), "not in the order of their sections"),
        (told(quantities=lambda quantities: [q | {"span": -1.0} for q in quantities]), "give a positive, finite span"),
        (told(quantities=lambda quantities: [q | {"colour": 1} for q in quantities]), "incomplete .*colour"),
        (told(reports=lambda reports: reports[::-1]), "the report of section 'zone-1' is about 'zone-5'"),
        (told(settings=lambda _: {"rho": 1.0, "speed": 2}), "incomplete .*speed"),
    ],
)
def test_a_design_that_contradicts_itself_is_refused(change: Callable[[Arrays], None], message: str) -> None:
    """Even with a digest that matches, everything is checked against everything else, and the section is named."""
    arrays = arrays_of(pack(small()))
    change(arrays)
    with pytest.raises(StoredDesignError, match=message):
        unpack(written(arrays))


def test_a_network_without_inputs_or_disturbances_is_kept() -> None:
    """Empty blocks come back empty."""
    network = Network.from_matrices([[0.5]], np.zeros((1, 0)), states={"one": 1}, inputs={"one": 0})
    design = Design.build(network, [Quantity("x", "one", Of.STATE, price=1.0)], horizon=3, locality=0)
    again = unpack(pack(design))
    for field in fields(network):
        if field.name.endswith("_at"):
            assert (getattr(again.table.network, field.name) == getattr(network, field.name)).all()
    assert again.table.network.b.shape == (1, 0)
