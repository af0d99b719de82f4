"""The small quadratic programme inside each scoring step."""

import numpy as np

from stillbench.foundation.arrays import FloatArray

MOST_CHANGES = 40


def solve_nonnegative(
    hessian: FloatArray, linear: FloatArray, weights: FloatArray | None = None, total: float = 0.0
) -> FloatArray:
    """Minimise x'Hx/2 - b'x over x >= 0, and over w'x = total when weights are given, by active sets.

    Parameters
    ----------
    hessian : (a, a) float array
        Positive definite on the free coordinates.
    linear : (a,) float array
    weights : (a,) float array or None
        Not negative, one at least positive.
    total : float
        Not negative.

    Returns
    -------
    (a,) float array

    References
    ----------
    C. L. Lawson and R. J. Hanson, Solving Least Squares Problems (1974), chapter 23, with one equality added.
    """
    size = linear.size
    free = np.ones(size, dtype=bool)
    solution = np.zeros(size)
    for _ in range(MOST_CHANGES):
        index = np.flatnonzero(free)
        solution = np.zeros(size)
        multiplier = 0.0
        if index.size:
            block = hessian[np.ix_(index, index)]
            if weights is not None:
                edge = weights[index]
                bordered = np.zeros((index.size + 1, index.size + 1))
                bordered[:-1, :-1] = block
                bordered[:-1, -1] = bordered[-1, :-1] = edge
                answer = _solve(bordered, np.append(linear[index], total))
                solution[index], multiplier = answer[:-1], answer[-1]
            else:
                solution[index] = _solve(block, linear[index])
        if solution.min(initial=0.0) < 0.0:
            worst = int(np.argmin(solution))
            others = free.copy()
            others[worst] = False
            if weights is None or (weights[others] > 0).any():
                free = others
                continue
            solution = np.maximum(solution, 0.0)
        gradient = hessian @ solution - linear
        if weights is not None:
            gradient = gradient + multiplier * weights
        pull = np.where(free, 0.0, gradient)
        if pull.min(initial=0.0) < -1e-9 * (1.0 + np.abs(linear).max(initial=0.0)):
            free[int(np.argmin(pull))] = True
            continue
        break
    return np.maximum(solution, 0.0)


def _solve(matrix: FloatArray, right: FloatArray) -> FloatArray:
    try:
        return np.asarray(np.linalg.solve(matrix, right), dtype=np.float64)
    except np.linalg.LinAlgError:
        return np.asarray(np.linalg.lstsq(matrix, right, rcond=None)[0], dtype=np.float64)
