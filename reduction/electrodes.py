"""Trap constants from the electrode drawing: Laplace's equation by axisymmetric boundary elements.

`solve` finds the charge on the panels of `meridian` that puts each conductor at its voltage (`boundary`), with 10, 13
and 16 nodes a panel, and estimates its error from how D, A and the centre settle. Panels are halved where the charge is
not yet a polynomial. A drawing that does not settle is an error that says where, never a number.

In the package: `trapfield.TrapField`, `departures`, `usable_height`; `tolerances.tolerance_budget`, `monte_carlo`;
`clearances.crossings`, `enclosed`, `smallest_gaps`; the drawing itself in `conductors`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.linalg import LinAlgError

from reduction.boundary import Boundary, axial_field
from reduction.clearances import require_clear
from reduction.conductors import Array, Electrodes, place
from reduction.errors import ReductionError
from reduction.meridian import MOST, Mesh, NotConverged, first_mesh, panels_of
from reduction.trapfield import TERMS, TrapField, capacitances_of, terms_about

ORDERS = (10, 13, 16)  # nodes a panel, coarse to fine
FLOOR = 5e-11  # rounding and quadrature: no error is called smaller
SCAN = 401  # points of the axis in which the centre is looked for
FEEBLE = 1e-7  # potential per volt over the reach below which a field is none


class NoCentre(ReductionError, ValueError):
    """A drawing whose drive makes no trap: no point of vanishing field on the axis, or no field at all."""


@dataclass(frozen=True)
class Solution:
    """One mesh solved at one order: what settles under refinement."""

    boundary: Boundary
    charges: Array
    centre: float
    drive: Array  # E_z of the drive as powers of z - centre
    dc: Array
    capacitances: Array


def solve(electrodes: Electrodes, *, relative_u: float = 1e-6) -> TrapField:
    """The trap's constants and field.

    Parameters
    ----------
    electrodes : Electrodes
        The drawing.
    relative_u : float
        Largest relative error of D and A that is let through, 1e-9 or more.

    Returns
    -------
    TrapField
        With its error estimated from refinement.

    Raises
    ------
    DrawingError
        If outlines touch or cross, or one lies in another's metal.
    NotConverged
        If refinement does not reach `relative_u`; says which electrode to draw otherwise.
    NoCentre
        If the drive's field vanishes nowhere on the axis.
    """
    if relative_u < 1e-9:
        raise ValueError(f"relative_u {relative_u:g} asks for more than double precision gives here, 1e-9 at best")
    require_clear(electrodes)
    mesh = first_mesh(electrodes.conductors)
    near: float | None = None
    while True:
        steps: list[Solution] = []
        for order in ORDERS:
            steps.append(solution(electrodes, mesh, order, near=near))
            near = steps[-1].centre
        if abs(steps[-1].dc[0]) * _reach(steps[-1]) < FEEBLE:
            raise NoCentre(
                "dc makes no field at the centre: check which conductors carry dc_above and dc_below, and that no "
                "conductor hides the axis from them"
            )
        if steps[-1].dc[0] < 0.0:
            raise NoCentre("dc pushes down where it should lift: what carries dc_above lies below; exchange the two")
        errors = refinement_errors(steps)
        if errors[0] <= relative_u:
            return _field(electrodes, mesh, steps[-1], errors)
        last = steps[-1]
        tails = _tails(last)
        coarse = np.flatnonzero(tails >= 0.05 * tails.max())
        if not len(coarse) or len(last.boundary.panels) + len(coarse) > MOST:
            raise NotConverged(_advice(electrodes, last, tails, errors[0], relative_u))
        mesh = mesh.halved(coarse)


def solution(electrodes: Electrodes, mesh: Mesh, order: int, *, near: float | None = None) -> Solution:
    """One mesh solved at one order; `near`: about where the centre is [m], looked for along the axis by default."""
    boundary = Boundary(panels_of(electrodes.conductors, mesh), order)
    count = len(electrodes.conductors)
    try:
        charges = boundary.unit_charges(count)
    except (LinAlgError, ValueError) as error:
        raise NotConverged(f"the equations of this drawing cannot be solved ({error})") from error
    shares = np.column_stack([electrodes.drive_shares, electrodes.dc_shares])
    fields = charges @ shares
    centre = None if near is None else _settled(boundary, fields[:, :1], near)
    if centre is None:
        centre = _centre(electrodes, boundary, fields[:, :1])
    terms = terms_about(boundary, fields, centre, TERMS + 2)
    return Solution(boundary, charges, centre, terms[:, 0], terms[:, 1], capacitances_of(boundary, charges, count))


def _centre(electrodes: Electrodes, boundary: Boundary, charges: Array) -> float:
    """Where the drive's field vanishes on the axis, nearest to the middle of the drive's height [m]."""
    driven = [k for k, conductor in enumerate(electrodes.conductors) if conductor.carries == "drive"]
    own = np.isin(np.repeat(boundary.panels.conductor, boundary.order), driven)
    middle = float(0.5 * (boundary.z[own].min() + boundary.z[own].max()))
    ends = [
        point[1]
        for conductor in electrodes.conductors
        for point in (conductor.pieces[0].start, conductor.pieces[-1].end)
        if not conductor.closed and conductor.on_axis(point)
    ]
    low = max([z for z in ends if z < middle], default=float(boundary.z.min()))
    high = min([z for z in ends if z > middle], default=float(boundary.z.max()))
    z = np.linspace(low, high, SCAN)[1:-1]
    field = (boundary.rows(np.zeros_like(z), z, of=axial_field) @ charges)[:, 0]
    change = np.flatnonzero(field[:-1] * field[1:] <= 0.0)
    for k in change[np.argsort(np.abs(z[change] - middle), kind="stable")]:
        centre = _settled(boundary, charges, float(0.5 * (z[k] + z[k + 1])))
        if centre is not None and abs(centre - 0.5 * (z[k] + z[k + 1])) <= 2.0 * (z[1] - z[0]):
            return centre
    raise NoCentre(
        f"the drive's field vanishes nowhere on the axis between {place((0.0, low))} and {place((0.0, high))}: "
        "check what each conductor carries, and that no conductor hides the axis from the drive"
    )


def _settled(boundary: Boundary, charges: Array, start: float) -> float | None:
    """Newton's way from near a vanishing axial field to it [m]; None where there is none near."""
    centre, reach = start, float(np.hypot(boundary.r, boundary.z - start).min())
    for _ in range(30):
        field, gradient = terms_about(boundary, charges, centre, 2)[:, 0]
        if abs(gradient) * reach**2 < FEEBLE:
            return None
        centre -= field / gradient
        if not abs(centre - start) < 0.3 * reach:
            return None
        if abs(field / gradient) <= 1e-15 * (reach + abs(centre)):
            return float(centre)
    return float(centre) if abs(field / gradient) < 1e-12 * reach else None


def refinement_errors(steps: list[Solution]) -> tuple[float, float, float]:
    """Errors of the last step: relative of D and A, of the centre [m], of the capacitances over the largest."""
    worst = max(_error([step.dc[0] for step in steps]), _error([step.drive[1] for step in steps]))
    reach = _reach(steps[-1])
    centre = _error([step.centre for step in steps], size=reach) * reach
    largest = float(np.abs(steps[-1].capacitances).max())
    return worst, centre, _error([step.capacitances for step in steps], size=largest)


def _error(values: Sequence[Array | float], size: float | None = None) -> float:
    """Relative error of the last of three refinements: its last step, or a hundredth of the one before.

    Not from how the steps shrink: where a drawing has several scales they shrink unevenly, and that would flatter.
    """
    before, after = (float(np.abs(np.subtract(b, a)).max()) for a, b in zip(values, values[1:], strict=False))
    size = float(np.abs(values[-1]).max()) if size is None else size
    error = max(after, 0.01 * before) / size if size > 0.0 else np.inf
    return max(error, FLOOR) if np.isfinite(error) else np.inf


def _reach(solved: Solution) -> float:
    """Distance from the centre to the nearest conductor [m]."""
    panels = solved.boundary.panels
    r, z, _ = panels.at(np.arange(len(panels)), np.broadcast_to(np.linspace(0.0, 1.0, 65), (len(panels), 65)))
    return float(np.hypot(r, z - solved.centre).min())


def _tails(solved: Solution) -> Array:
    """How far the charge of each panel is from a polynomial: last two coefficients over all charge."""
    spectrum = np.abs(solved.boundary.spectrum(solved.charges))
    tails: Array = (spectrum[:, -2:].sum(axis=1) / np.abs(solved.charges).sum(axis=0)).max(axis=1)
    return tails


def _advice(electrodes: Electrodes, solved: Solution, tails: Array, error: float, wanted: float) -> str:
    panels, worst = solved.boundary.panels, int(tails.argmax())
    r, z, _ = panels.at(np.array([worst]), np.array([[0.5]]))
    name = electrodes.conductors[int(panels.conductor[worst])].name
    return (
        f"the field has not settled: relative error {error:.1g} with {len(solved.charges)} nodes, {wanted:.1g} wanted. "
        f"The charge is least known on {name} near {place((r[0, 0], z[0, 0]))}: widen a very narrow gap there, "
        "round the edge, or draw fewer fine details"
    )


def _field(electrodes: Electrodes, mesh: Mesh, solved: Solution, errors: tuple[float, float, float]) -> TrapField:
    d, a = float(solved.dc[0]), float(solved.drive[1])
    reach = _reach(solved)
    powers = reach ** np.arange(1, TERMS + 1)
    return TrapField(
        electrodes=electrodes,
        dc_field_per_volt=d,
        ac_gradient_per_volt=abs(a),
        ac_sign=float(np.sign(a)),
        centre=solved.centre,
        reach=reach,
        drive_terms=tuple((solved.drive[2 : TERMS + 2] / a * powers).tolist()),
        dc_terms=tuple((solved.dc[1 : TERMS + 1] / d * powers).tolist()),
        capacitances=solved.capacitances,
        numerical_u=errors[0],
        numerical_u_centre=errors[1],
        numerical_u_capacitance=errors[2],
        mesh=mesh,
        boundary=solved.boundary,
        charges=solved.charges,
    )
