"""Propagation of uncertainty as the GUM has it: plain functions of components, correlations and degrees of freedom."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import stats

if TYPE_CHECKING:
    from uncertainties.core import AffineScalarFunc

Array = NDArray[np.float64]


def combined(components: ArrayLike, correlation: ArrayLike | None = None) -> float:
    """Combined standard uncertainty.

    u_c^2 = sum_ij u_i r_ij u_j,  u_i = c_i u(x_i) signed

    Parameters
    ----------
    components : array_like, shape (n,)
        Sensitivity times standard uncertainty of each input, in the unit of the result.
    correlation : array_like, shape (n, n), optional
        Correlation coefficients of the inputs [1]; none where left out.

    Returns
    -------
    float
        In the unit of the components.

    Notes
    -----
    JCGM 100:2008, equations 10 and 16.
    """
    u = np.asarray(components, dtype=np.float64)
    if correlation is None:
        return float(np.sqrt(u @ u))
    return float(np.sqrt(u @ np.asarray(correlation, dtype=np.float64) @ u))


def welch_satterthwaite(components: ArrayLike, dofs: ArrayLike, variance: ArrayLike | None = None) -> Array:
    """Effective degrees of freedom of combined standard uncertainties.

    nu = u_c^4 / sum(u_i^4 / nu_i)

    Parameters
    ----------
    components : array_like, shape (..., n)
        Components of independent inputs; those that rest on one variance estimate are to be summed beforehand.
    dofs : array_like, shape (n,)
        Degrees of freedom of each [1], inf where its u is taken as known.
    variance : array_like, shape (...), optional
        u_c^2, where it holds more than the components given, all of known u; their sum of squares if left out.

    Returns
    -------
    ndarray, shape (...)
        Effective degrees of freedom [1], inf where no component has finite ones.

    Notes
    -----
    JCGM 100:2008, equation G.2b.
    """
    u = np.asarray(components, dtype=np.float64)
    total = (u**2).sum(axis=-1) if variance is None else np.asarray(variance, dtype=np.float64)
    weighed = (u**4 / np.asarray(dofs, dtype=np.float64)).sum(axis=-1)
    known = weighed > 0.0
    return np.asarray(np.where(known, total**2 / np.where(known, weighed, 1.0), np.inf))


def coverage_factor(dof: ArrayLike, coverage: float) -> Array:
    """Factor from a standard to an expanded uncertainty, by Student's t.

    Parameters
    ----------
    dof : array_like
        Effective degrees of freedom [1]; the GUM truncates them to an integer where tables are used.
    coverage : float
        Coverage probability [1].

    Returns
    -------
    ndarray
        Coverage factor k [1].

    Notes
    -----
    JCGM 100:2008, G.3.
    """
    tail = 0.5 + coverage / 2.0
    nu = np.asarray(dof, dtype=np.float64)
    return np.asarray(np.where(np.isfinite(nu), stats.t.ppf(tail, np.minimum(nu, 1e9)), stats.norm.ppf(tail)))


def covariance(quantities: Sequence[AffineScalarFunc]) -> Array:
    """Covariance of quantities of the uncertainties library, as a product of their components.

    V = J J',  J_ik = df_i/dx_k u(x_k)

    Parameters
    ----------
    quantities : sequence of AffineScalarFunc
        n quantities that may share variables.

    Returns
    -------
    ndarray, shape (n, n)
        Products of the units. One product of two matrices; the library's own routine goes through every pair.
    """
    derivatives = [one.derivatives for one in quantities]
    columns = {variable: place for place, variable in enumerate(dict.fromkeys(v for one in derivatives for v in one))}
    root = np.zeros((len(derivatives), len(columns)))
    for row, one in enumerate(derivatives):
        for variable, slope in one.items():
            root[row, columns[variable]] = slope * variable.std_dev
    return root @ root.T
