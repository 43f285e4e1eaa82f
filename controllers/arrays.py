"""Array types shared by the room, and the one way to put blocks on a diagonal."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import sparse

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]
Bools = npt.NDArray[np.bool_]


def block_diagonal(blocks: Sequence[Any]) -> sparse.csr_array:
    """Put dense or sparse blocks on a diagonal.

    Every block is made a sparse array first: when all are dense, SciPy gives a sparse matrix, and soon no longer.
    """
    return sparse.csr_array(sparse.block_diag([sparse.csr_array(block) for block in blocks], format="csr"))
