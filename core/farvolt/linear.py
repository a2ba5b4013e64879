"""Linear equations of a network: dense for small plans, sparse for large ones, behind one call."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from farvolt.network import Floats

DENSE_LIMIT = 200
"""Up to this many unknowns a dense factorisation is the faster one, and no sparse library is loaded."""


class SingularError(Exception):
    """A matrix without an inverse; never leaves the solver."""


@dataclass(frozen=True)
class Factor:
    """A matrix ready to solve with: `solve(b)`, which may raise SingularError, and whether it is positive definite."""

    solve: Callable[[Floats], Floats]
    positive: bool


def factor(size: int, rows: np.ndarray, columns: np.ndarray, values: Floats, *, symmetric: bool) -> Factor:
    """Factorise the matrix of the summed entries (rows, columns, values). Raises SingularError.

    `positive` of a matrix that is not symmetric is told from its pivots, which is enough to see a fold.
    """
    if size == 0:
        return Factor(lambda right: right, True)
    build = _dense if size <= DENSE_LIMIT else _sparse
    return build(size, rows, columns, values, symmetric)


def _dense(size: int, rows: np.ndarray, columns: np.ndarray, values: Floats, symmetric: bool) -> Factor:
    matrix = np.zeros((size, size))
    np.add.at(matrix, (rows, columns), values)
    try:
        if symmetric:
            positive = _has_cholesky(matrix)
        else:
            sign, _ = np.linalg.slogdet(matrix)
            positive = bool(sign > 0) and _has_cholesky((matrix + matrix.T) / 2 + _skew_allowance(matrix))
    except np.linalg.LinAlgError:
        raise SingularError from None

    def solve(right: Floats) -> Floats:
        try:
            return np.asarray(np.linalg.solve(matrix, right))
        except np.linalg.LinAlgError:
            raise SingularError from None

    return Factor(solve, positive)


def _skew_allowance(matrix: Floats) -> Floats:
    """What a converter's one-sided coupling takes off the symmetric part: it says nothing of stability."""
    skew = np.abs(matrix - matrix.T) / 2
    return np.diag(skew.sum(axis=1))


def _has_cholesky(matrix: Floats) -> bool:
    try:
        np.linalg.cholesky(matrix)
    except np.linalg.LinAlgError:
        return False
    return True


def _sparse(size: int, rows: np.ndarray, columns: np.ndarray, values: Floats, symmetric: bool) -> Factor:
    from scipy.sparse import coo_array
    from scipy.sparse.linalg import splu

    matrix = coo_array((values, (rows, columns)), shape=(size, size)).tocsc()
    try:
        factors = splu(matrix, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True})
    except RuntimeError:
        raise SingularError from None
    positive = bool(np.all(factors.U.diagonal() > 0))

    def solve(right: Floats) -> Floats:
        first = factors.solve(right)
        return np.asarray(first + factors.solve(right - matrix @ first))

    return Factor(solve, positive)
