"""Several operators for one state: the generalised eigenvalue problem.

C(t) v = lambda(t, t0) C(t0) v has lambda = exp(-E_n (t - t0)) up to states beyond the number of operators
(Lüscher and Wolff, Nucl. Phys. B 339 (1990) 222; Blossier et al., JHEP 04 (2009) 094). The gap is read from the
principal correlator v^T C(t) v with the vector of one pair of times: an error of v enters in second order only.
"""

import numpy as np
from scipy.linalg import LinAlgError, eigh

from quarterturn.errors import EstimateError
from quarterturn.estimates.series import Array


def eigenvalue_energies(matrices: Array, t: Array, t0: int) -> Array:
    """Effective energies -ln lambda_n(t, t0) / (t - t0), ascending; nan where they do not exist.

    Parameters
    ----------
    matrices
        C_ij(t), symmetric, shape (T, n, n).
    t
        Times, shape (T,).
    t0
        Index of the reference time.

    Returns
    -------
    Shape (T, n), in inverse units of t.

    Raises
    ------
    EstimateError
        C(t0) is not positive definite.
    """
    energies = np.full(matrices.shape[:2], np.nan)
    for index in range(len(t)):
        if index == t0:
            continue
        values, _ = _solve(matrices[index], matrices[t0])
        values = values[::-1] if t[index] > t[t0] else values
        real = values > 0
        energies[index, real] = -np.log(values[real]) / (t[index] - t[t0])
    return energies


def ground_vector(early: Array, late: Array) -> Array:
    """Combination of operators with the slowest decay from C(t0) = `early` to C(t1) = `late`, shape (n,).

    Normalised to v^T C(t0) v = 1, the sign such that the largest component (in units of the operators' own
    sizes) is positive.

    Raises
    ------
    EstimateError
        `early` is not positive definite: the operators can't be told apart within their errors.
    """
    _, vectors = _solve(late, early)
    vector = vectors[:, -1]
    largest = np.argmax(np.abs(vector) * np.sqrt(np.diag(early)))
    return np.asarray(vector * np.sign(vector[largest]))


def _solve(matrix: Array, metric: Array) -> tuple[Array, Array]:
    size = np.sqrt(np.abs(np.diag(metric)))
    if not np.all(size > 0):
        raise EstimateError("an operator of the correlation matrix has no correlator at the reference time")
    outer = np.outer(size, size)
    try:
        values, vectors = eigh((matrix + matrix.T) / (2 * outer), (metric + metric.T) / (2 * outer))
    except LinAlgError as error:
        raise EstimateError(
            "the correlation matrix is not positive definite at the reference time: within their errors the"
            " operators can't be told apart"
        ) from error
    return values, vectors / size[:, None]
