"""The readings with the smallest sum of absolute errors: few large errors instead of many small ones."""

import numpy as np
from scipy.optimize import linprog
from scipy.sparse import csr_array, hstack

from dec.arrays import FloatArray
from dec.audit.adjusted.adjustment import Adjustment
from dec.audit.given.model import Model
from dec.errors import AccuracyError, InputError
from dec.topology.edges import edge_coboundary

__all__ = ["LARGEST", "least_absolute"]

LARGEST = 50_000


def least_absolute(model: Model, adjustment: Adjustment, *, balance: bool) -> FloatArray:
    """What is to be added to each reading so that the law holds and sum |change| / sd is smallest.

    A second opinion beside least squares, which spreads one large error over its neighbours.

    Parameters
    ----------
    model : Model
    adjustment : Adjustment
    balance : bool
        Which law.

    Returns
    -------
    float64 array, shape (m,)
        0 where nothing can contradict the reading, nan where there is none.

    Raises
    ------
    InputError
        If there are more than 50,000 readings.
    AccuracyError
        If the linear program was not solved.

    Notes
    -----
    A linear program, solved by HiGHS through SciPy: Huangfu and Hall, Math. Programming Computation 10 (2018). Common
    errors are not told from others here. Source of the idea: Claerbout and Muir, Geophysics 38 (1973).
    """
    used = np.flatnonzero(adjustment.standing == "checked")
    found = np.where(model.measured, 0.0, np.nan)
    if len(used) > LARGEST:
        message = f"the robust comparison takes at most {LARGEST} checked readings, got {len(used)}; leave it out"
        raise InputError(message)
    if not len(used):
        return found
    group = adjustment.group
    difference = edge_coboundary(group[model.tail[used]], group[model.head[used]], int(group.max()) + 1)
    scale = float(np.median(model.sd[used]))
    error = -adjustment.correction[used] / scale
    price = np.tile(scale / model.sd[used], 2)
    if balance:
        gather = csr_array(difference.T.astype(np.float64))
        matrix, right = hstack([gather, -gather]), gather @ error
    else:
        step = csr_array(difference.astype(np.float64))
        one = csr_array((np.ones(len(used)), (np.arange(len(used)), np.arange(len(used)))))
        matrix, right = hstack([one, -one, -step]), error
        price = np.append(price, np.zeros(step.shape[1]))
    free = np.arange(len(price)) >= 2 * len(used)
    bounds = np.stack([np.where(free, -np.inf, 0.0), np.full(len(price), np.inf)], axis=1)
    answer = linprog(price, A_eq=matrix.tocsc(), b_eq=right, bounds=bounds, method="highs")  # type: ignore[call-overload]
    if answer.x is None:
        message = f"the robust comparison was not solved: {answer.message}; leave it out"
        raise AccuracyError(message)
    k = len(used)
    found[used] = -(answer.x[:k] - answer.x[k : 2 * k]) * scale
    return found
