"""A design as bytes and back: the documented, versioned form in which it is kept between runs.

An uncompressed NPZ archive (NumPy Enhancement Proposal 1) without pickled objects:

    format              ()      "lengthsman design", then the version, a line each
    about               (k,)    JSON in UTF-8, infinities as Infinity: names, horizon, locality, settings, forecast,
                                quantities, reports
    x_at u_at w_at y_at (N+1,)  offsets of the network's blocks
    a_data a_indices a_indptr   A of (1) in compressed sparse rows; likewise b, e, c
    rows row_at                 rows every response touches, side by side, and their offsets (N+1,)
    gain_of basis_of    (N,)    which gain and which basis a section has: equal sections share theirs
    gain_0 gain_1 ...           the different H, (rows, parameters) each, weighted rows
    basis_0 basis_1 ...         the different N, (rows, freedom) each
    digest              ()      SHA-256 (FIPS 180-4) of the names, kinds, shapes and bytes of all the others, in hex

`unpack` trusts nothing: format, version, digest, shapes, indices, finiteness and orthonormality are checked, and
network and quantities pass the same checks as if they were new. A digest finds damage, not malice. Reading and writing
files is the caller's; write to a new file and rename it.
"""

from __future__ import annotations

import hashlib
import io
import json
import zipfile
from collections.abc import Mapping
from dataclasses import asdict
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import sparse

from controllers.arrays import Floats, Ints
from controllers.exceptions import ControllerError, StoredDesignError
from controllers.network import Network
from controllers.plans import Settings
from controllers.quantities import Of, Quantity, Term
from controllers.responses import Localizability, Response
from controllers.rows import RowTable
from controllers.synthesis import Design

FORMAT = "lengthsman design"
VERSION = 1
ORTHONORMAL_TOLERANCE = 1e-9
_SPARSE = ("data", "indices", "indptr")

Arrays = dict[str, npt.NDArray[Any]]


def pack(design: Design) -> bytes:
    """Write a design; the same design gives the same bytes."""
    net, table = design.table.network, design.table
    gains, gain_of = _shared([response.gain for response in design.responses])
    bases, basis_of = _shared([response.basis for response in design.responses])
    about = {
        "names": net.names,
        "horizon": table.horizon,
        "locality": design.locality,
        "forecast": design.forecast,
        "settings": asdict(design.settings),
        "quantities": [asdict(quantity) | {"of": quantity.of.value} for quantity in table.quantities],
        "reports": [asdict(response.report) for response in design.responses],
    }
    arrays: Arrays = {
        "format": np.array(f"{FORMAT}\n{VERSION}"),
        "about": np.frombuffer(json.dumps(about, default=lambda of: of.value).encode(), dtype=np.uint8),
        "x_at": net.x_at, "u_at": net.u_at, "w_at": net.w_at, "y_at": net.y_at,
        **{f"{letter}_{part}": getattr(getattr(net, letter), part) for letter in "abec" for part in _SPARSE},
        "rows": np.concatenate([response.rows for response in design.responses]),
        "row_at": np.concatenate([[0], np.cumsum([len(response.rows) for response in design.responses])]),
        "gain_of": gain_of, "basis_of": basis_of,
        **{f"gain_{k}": gain for k, gain in enumerate(gains)},
        **{f"basis_{k}": basis for k, basis in enumerate(bases)},
    }  # fmt: skip
    arrays["digest"] = np.array(_digest(arrays))
    out = io.BytesIO()
    np.savez(out, **arrays)  # type: ignore[arg-type]  # none of them holds objects, so nothing is pickled
    return out.getvalue()


def unpack(stored: bytes) -> Design:
    """Read a design that `pack` wrote, checked throughout.

    Raises:
        StoredDesignError: not such a file, another version, damaged, or contradicting itself; says which.
    """
    arrays = _read(stored)
    try:
        design = _rebuilt(arrays, json.loads(arrays["about"].tobytes()))
    except ControllerError as error:
        raise StoredDesignError(f"the stored design is not sound: {error}; build it again") from error
    except (KeyError, TypeError, ValueError, IndexError) as error:
        raise StoredDesignError(f"the stored design is incomplete ({error!r}); build it again") from error
    return design


def _read(stored: bytes) -> Arrays:
    """All arrays, once format, version and digest are right."""
    try:
        with np.load(io.BytesIO(stored), allow_pickle=False) as archive:
            arrays: Arrays = {name: archive[name] for name in archive.files}
        name, version = str(arrays["format"]).split("\n")
    except (OSError, EOFError, ValueError, KeyError, AttributeError, zipfile.BadZipFile) as error:
        raise StoredDesignError("this is not a stored design, or it is cut short; build it again") from error
    if name != FORMAT:
        raise StoredDesignError(f"this holds a {name!r}, not a {FORMAT!r}")
    if version != str(VERSION):
        raise StoredDesignError(f"the stored design has version {version}, this reads {VERSION}; build it again")
    digest = str(arrays.pop("digest", ""))
    if digest != _digest(arrays):
        raise StoredDesignError("the stored design is damaged: its digest does not match; build it again")
    return arrays


def _rebuilt(arrays: Arrays, about: Mapping[str, Any]) -> Design:
    names: list[str] = about["names"]
    sizes = {letter: dict(zip(names, np.diff(arrays[f"{letter}_at"]).tolist(), strict=True)) for letter in "xuwy"}
    shapes = {"a": ("x", "x"), "b": ("x", "u"), "e": ("x", "w"), "c": ("y", "x")}
    matrix = {
        letter: sparse.csr_array(
            tuple(arrays[f"{letter}_{part}"] for part in _SPARSE),
            shape=(sum(sizes[down].values()), sum(sizes[across].values())),
        )
        for letter, (down, across) in shapes.items()
    }
    for stored in matrix.values():
        stored.check_format(full_check=True)
    network = Network.from_matrices(
        matrix["a"], matrix["b"], states=sizes["x"], inputs=sizes["u"],
        c=matrix["c"], outputs=sizes["y"], e=matrix["e"], disturbances=sizes["w"],
    )  # fmt: skip
    quantities = [_quantity(each) for each in about["quantities"]]
    table = RowTable.build(network, quantities, about["horizon"])
    table.require_within_reach(about["locality"])
    if [quantity.name for quantity in table.quantities] != [quantity.name for quantity in quantities]:
        raise StoredDesignError("quantities are not in the order of their sections")
    gains, bases = ([arrays[f"{what}_{k}"] for k in arrays[f"{what}_of"].tolist()] for what in ("gain", "basis"))
    row_at = arrays["row_at"]
    if len(row_at) != network.size + 1 or len(gains) != network.size:
        raise StoredDesignError(f"there are {min(len(row_at) - 1, len(gains))} responses for {network.size} sections")
    reports = [Localizability(**report) for report in about["reports"]]
    forecast = bool(about["forecast"])
    responses = []
    checked: set[int] = set()
    for i, (gain, basis, report) in enumerate(zip(gains, bases, reports, strict=True)):
        response = Response(arrays["rows"][row_at[i] : row_at[i + 1]], gain, basis, report)
        _check(table, i, response, forecast, checked)
        responses.append(response)
    return Design.assemble(table, about["locality"], Settings(**about["settings"]), responses, forecast=forecast)


def _check(table: RowTable, i: int, response: Response, forecast: bool, checked: set[int]) -> None:
    """Check one response against the table; arrays that sections share are looked through once."""
    net, name = table.network, table.network.names[i]
    n, m, r = (int(at[i + 1] - at[i]) for at in (net.x_at, net.u_at, net.w_at))
    rows, width = response.rows, n + m + r * (table.horizon if forecast else 1)
    inside = len(rows) == 0 or 0 <= rows[0] <= rows[-1] < table.count
    if rows.dtype != np.int64 or (np.diff(rows) <= 0).any() or not inside:
        raise StoredDesignError(f"rows of section {name!r} are not rows of the table")
    if response.gain.shape != (len(rows), width) or response.basis.shape[:1] != (len(rows),):
        raise StoredDesignError(
            f"response of section {name!r} has shapes {response.gain.shape} and {response.basis.shape}, "
            f"not ({len(rows)}, {width}) and ({len(rows)}, ...)"
        )
    if response.report.section != name:
        raise StoredDesignError(f"the report of section {name!r} is about {response.report.section!r}")
    for what, array in (("gain", response.gain), ("basis", response.basis)):
        if id(array) in checked:
            continue
        checked.add(id(array))
        if array.dtype != np.float64 or not np.isfinite(array).all():
            raise StoredDesignError(f"{what} of section {name!r} holds what is not a finite number")
        skew = array.T @ array - np.eye(array.shape[1])
        if what == "basis" and np.abs(skew).max(initial=0.0) > ORTHONORMAL_TOLERANCE:
            raise StoredDesignError(f"basis of section {name!r} is not orthonormal")


def _quantity(stored: Mapping[str, Any]) -> Quantity:
    """A quantity from JSON, where tuples became lists."""
    values: dict[str, Any] = {
        name: tuple(value) if isinstance(value, list) else value for name, value in stored.items()
    }
    plus = tuple(Term(term["section"], Of(term["of"]), tuple(term["mix"])) for term in stored["plus"])
    return Quantity(**(values | {"of": Of(stored["of"]), "plus": plus}))


def _shared(arrays: list[Floats]) -> tuple[list[Floats], Ints]:
    """The different arrays, and which of them every section has."""
    place: dict[int, int] = {}
    different: list[Floats] = []
    for array in arrays:
        if id(array) not in place:
            place[id(array)] = len(different)
            different.append(array)
    return different, np.array([place[id(array)] for array in arrays], dtype=np.int64)


def _digest(arrays: Mapping[str, npt.NDArray[Any]]) -> str:
    digest = hashlib.sha256()
    for name in sorted(arrays):
        array = np.ascontiguousarray(arrays[name])
        digest.update(f"{name} {array.dtype.str} {arrays[name].shape}\n".encode())
        digest.update(array.tobytes())
    return digest.hexdigest()
