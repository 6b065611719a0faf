"""Linear systems of many cases at once, with singular ones kept apart."""

from __future__ import annotations

import numpy as np

RANK = 1e-12  # singular values below this part of the largest count as zero


def newton_step(jacobian: np.ndarray, lead: np.ndarray) -> np.ndarray:
    """Solve (I - jacobian) step = lead, case by case.

    Where the matrix is singular the shortest step is taken: a variable that nothing in the loop
    decides, such as the pressure of a recycle that never is the lowest, stays as it is.

    Parameters
    ----------
    jacobian : (m, n, n)
    lead : (m, n) or (m, n, k)

    Returns
    -------
    array of the shape of lead
        NaN for the cases whose numbers are not finite.
    """
    count = jacobian.shape[-1]
    matrix = np.eye(count) - jacobian
    several = lead if lead.ndim == 3 else lead[..., None]
    answer = np.full(several.shape, np.nan)
    if np.isfinite(matrix.sum()) and np.isfinite(several.sum()):
        good = slice(None)
    else:
        good = np.isfinite(matrix).all(axis=(1, 2)) & np.isfinite(several).all(axis=(1, 2))
    try:
        answer[good] = np.linalg.solve(matrix[good], several[good])
    except np.linalg.LinAlgError:  # one singular matrix refuses the whole stack
        for case in np.arange(len(matrix))[good]:
            answer[case] = _one(matrix[case], several[case])
    return answer.reshape(lead.shape)


def _one(matrix: np.ndarray, right: np.ndarray) -> np.ndarray:
    try:
        return np.linalg.solve(matrix, right)
    except np.linalg.LinAlgError:
        return np.linalg.lstsq(matrix, right, rcond=RANK)[0]
