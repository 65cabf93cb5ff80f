"""The long run of a Markov chain, without subtractions: small shares keep their digits.

References
----------
W. K. Grassmann, M. I. Taksar and D. P. Heyman, Oper. Res. 33 (1985), 1107-1116 (from memory).
"""

from __future__ import annotations

import numpy as np

from steelyard.core.parameter import Floats


def stationary(matrix: Floats) -> Floats:
    """Return the long-run shares of a chain's states by elimination of one state after the other.

    Parameters
    ----------
    matrix : ndarray of float, shape (states, states)
        Chances to go from row to column. Some states, or all, are reached again and again from every one.

    Examples
    --------
    >>> stationary(np.array([[0.9, 0.1], [0.5, 0.5]])).round(4).tolist()
    [0.8333, 0.1667]
    """
    left, base = np.array(matrix, dtype=float), 0
    for k in range(len(left) - 1, 0, -1):
        out = left[k, :k].sum()
        if out == 0:  # the states before are left for good
            base = k
            break
        left[:k, k] /= out
        left[:k, :k] += np.outer(left[:k, k], left[k, :k])
    weights = np.zeros(len(left))
    weights[base] = 1.0
    for k in range(base + 1, len(left)):
        weights[k] = weights[base:k] @ left[base:k, k]
    return np.asarray(weights / weights.sum())
