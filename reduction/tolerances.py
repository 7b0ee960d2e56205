"""How the trap constants follow the dimensions of the drawing: sensitivities, and a Monte Carlo check of them.

A shape is a function from dimensions (lengths, any number) to `Electrodes`; each dimension moves by its own u up and
down. All drawings of one shape share the cuts of the nominal one, so that what the panels miss cancels in differences.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from reduction.clearances import require_clear
from reduction.conductors import Array, Electrodes
from reduction.electrodes import solution, solve
from reduction.trapfield import TrapField

ORDER = 10  # nodes a panel: constants to 1e-7 or so, differences better
RESULTS = ("ln_dc_field_per_volt", "ln_ac_gradient_per_volt", "centre")
Shape = Callable[[Array], Electrodes]


@dataclass(frozen=True)
class ToleranceBudget:
    """First-order budget of a drawing, K dimensions.

    Attributes
    ----------
    nominal, u : array, shape (K,)
        Dimensions and their standard uncertainties [unit of the dimension].
    sensitivities : array, shape (K, 3)
        Of `RESULTS`: ln D, ln A [1] and the centre [m], per unit of the dimension; 0 where u is 0.
    """

    nominal: Array
    u: Array
    sensitivities: Array

    @property
    def components(self) -> Array:
        """Signed contributions, sensitivity times u, shape (K, 3); a result's u is their root sum of squares."""
        return self.sensitivities * self.u[:, None]

    @property
    def u_results(self) -> Array:
        """Standard uncertainties of `RESULTS`, shape (3,)."""
        u: Array = np.sqrt((self.components**2).sum(axis=0))
        return u


def tolerance_budget(shape: Shape, nominal: Array, u: Array, *, field: TrapField | None = None) -> ToleranceBudget:
    """Sensitivities of ln D, ln A and the centre to each dimension, by central differences over one u either way.

    Parameters
    ----------
    shape : callable
        From dimensions, shape (K,), to Electrodes; the number of pieces must not change.
    nominal, u : array, shape (K,)
        Estimates and standard uncertainties.
    field : TrapField, optional
        The nominal drawing solved, if it is at hand.

    Raises
    ------
    DrawingError
        Where a dimension off by u makes electrodes touch.
    NotConverged, NoCentre
        As `electrodes.solve`.
    """
    nominal, u = np.asarray(nominal, float), np.asarray(u, float)
    field = solve(shape(nominal)) if field is None else field
    sensitivities = np.zeros((len(nominal), len(RESULTS)))
    for k in np.flatnonzero(u):
        step = np.where(np.arange(len(nominal)) == k, u, 0.0)
        above, below = (_results(shape(nominal + sign * step), field) for sign in (1.0, -1.0))
        sensitivities[k] = (above - below) / (2.0 * u[k])
    return ToleranceBudget(nominal, u, sensitivities)


def monte_carlo(shape: Shape, draws: Array, *, field: TrapField) -> Array:
    """Logarithms of D and A, and the centre [m], for each draw of the dimensions: shape (trials, 3) from (trials, K).

    What the first-order budget is held against: means and standard deviations of the columns.

    Parameters
    ----------
    shape : callable
        As for `tolerance_budget`.
    draws : array, shape (trials, K)
        Dimensions, drawn from their distributions.
    field : TrapField
        The nominal drawing solved.
    """
    return np.array([_results(shape(draw), field) for draw in np.asarray(draws, float)])


def _results(electrodes: Electrodes, field: TrapField) -> Array:
    """`RESULTS` of a drawing close to one that is solved, with its cuts."""
    require_clear(electrodes)
    solved = solution(electrodes, field.mesh, ORDER, near=field.centre)
    return np.array([np.log(np.abs(solved.dc[0])), np.log(np.abs(solved.drive[1])), solved.centre])
