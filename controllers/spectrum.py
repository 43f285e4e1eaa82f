"""Spectral radii: of any sparse matrix, and of the loop the synthesis closes when no limit binds."""

from __future__ import annotations

import numpy as np
from scipy import sparse
from scipy.sparse.linalg import eigs, splu

from controllers.arrays import Floats
from controllers.central import assemble
from controllers.plans import Measured
from controllers.rows import RowData, RowTable

DENSE_LIMIT = 400


def spectral_radius(matrix: sparse.csr_array) -> float:
    """Largest modulus of the eigenvalues; dense below `DENSE_LIMIT`, Arnoldi with a fixed start above."""
    size = matrix.shape[0]
    if size == 0:
        return 0.0
    if size <= DENSE_LIMIT:
        return float(np.abs(np.linalg.eigvals(matrix.toarray())).max())
    start = np.random.default_rng(0).standard_normal(size)
    return float(np.abs(eigs(matrix, k=4, which="LM", v0=start, return_eigenvectors=False)).max())


def unlimited_law(table: RowTable, data: RowData) -> Floats:
    """First inputs of the whole-plant optimum without limits, linear in what a period starts from.

    Returns:
        K, (m, n + r + m): u_0 = K (x, w, u_{-1}) when all targets are zero.
    """
    net = table.network
    n, r, m = net.a.shape[0], net.e.shape[1], net.b.shape[1]
    nothing = np.full(table.count, np.inf)
    free = RowData(data.price, np.zeros(table.count), np.zeros(table.count), -nothing, nothing, -nothing, nothing)
    columns = np.eye(n + r + m)
    factor, law = None, np.zeros((m, n + r + m))
    for k, unit in enumerate(columns):
        qp = assemble(table, Measured(unit[:n], unit[n : n + r], unit[n + r :]), free)
        if factor is None:
            factor = splu(sparse.csc_matrix(sparse.block_array([[qp.p, qp.k.T], [qp.k, None]], format="csc")))
        solution = factor.solve(np.concatenate([-qp.g, qp.lower]))
        law[:, k] = solution[table.horizon * n : table.horizon * n + m]
    return law


def closed_loop_radius(table: RowTable, data: RowData) -> float:
    """Spectral radius of (x, u_{-1}) under the unlimited law; below one means the nominal loop is stable."""
    net = table.network
    n, r = net.a.shape[0], net.e.shape[1]
    law = unlimited_law(table, data)
    gain_x, gain_u = law[:, :n], law[:, n + r :]
    b = net.b.toarray()
    return spectral_radius(sparse.csr_array(np.block([[net.a.toarray() + b @ gain_x, b @ gain_u], [gain_x, gain_u]])))
