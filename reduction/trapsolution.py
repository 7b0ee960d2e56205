"""From the drawing of the electrodes to the trap's constants: faults of the outlines, the solution, and its keeping."""

from __future__ import annotations

import tempfile
from pathlib import Path

import numpy as np

from reduction.conductors import Arc, Array, DrawingError, Electrodes
from reduction.drawing import Drawing
from reduction.drawingcheck import check_outlines, column_of
from reduction.electrodes import NoCentre, solve
from reduction.errors import Faults
from reduction.meridian import NotConverged
from reduction.tolerances import tolerance_budget
from reduction.trapconstants import CHANGE, Axis, Dimension, Map, Outline, TrapConstants, from_plain
from reduction.trapfield import TrapField, departures, usable_height
from reduction.wholefile import read_json, write_json

ACROSS, UP = 45, 81  # points of the map of potentials
DIGITS = 6  # of potentials kept for drawing


def constants_of(
    drawing: Drawing, path: str, *, faults: Faults, keep: Path | None = None, name: str = ""
) -> TrapConstants | None:
    """Constants of a drawing: those computed before, or computed now and kept.

    Parameters
    ----------
    drawing : Drawing
        As read.
    path : str
        File it stands in, for faults.
    faults : Faults
        What is wrong with the outlines, or why the field could not be computed.
    keep : Path, optional
        Folder of constants computed before.
    name : str
        Digest of the drawing, which names its file there.

    Returns
    -------
    TrapConstants or None
        None, with a fault, where there is no field to be trusted.
    """
    file = None if keep is None or not name else keep / f"{name}.json"
    if file is not None and file.is_file():
        return from_plain(read_json(file))
    before = len(faults)
    check_outlines(drawing, path, faults=faults)
    if len(faults) > before:
        return None
    try:
        found = computed(drawing)
    except (DrawingError, NotConverged, NoCentre) as error:
        line, column = column_of(drawing, str(getattr(error, "conductor", "")))
        faults.add(path, line=line, column=column, found=str(error), expected="electrodes whose field can be computed",
                   advice="Correct the drawing there.")  # fmt: skip
        return None
    if file is not None:
        _keep(found, file)
    return found


def _keep(found: TrapConstants, file: Path) -> None:
    """Write a file that appears whole, whoever else may be writing the same one."""
    file.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(dir=file.parent, prefix=".") as scratch:
        part = Path(scratch) / file.name
        write_json(part, found.to_plain())
        part.replace(file)


def computed(drawing: Drawing) -> TrapConstants:
    """Solve a drawing, with the sensitivities to its dimensions and what its page shows."""
    electrodes = drawing.electrodes(drawing.nominal)
    field = solve(electrodes)
    slopes = _sensitivities(drawing, field)
    dimensions = tuple(
        Dimension(name, one.estimate, one.u, one.shape if one.u else "exact", *map(float, slope))
        for (name, one), slope in zip(drawing.dimensions.items(), slopes, strict=True)
    )
    powers = field.reach ** np.arange(1, len(field.drive_terms) + 1)
    return from_plain(
        TrapConstants(
            dc_field=float(field.dc_field_per_volt),
            ac_gradient=float(field.ac_gradient_per_volt),
            solution_u=float(field.numerical_u),
            centre=float(field.centre),
            reach=float(field.reach),
            usable_height=float(usable_height(field, CHANGE)),
            drive_terms=tuple((np.array(field.drive_terms) / powers).tolist()),
            dc_terms=tuple((np.array(field.dc_terms) / powers).tolist()),
            dimensions=dimensions,
            capacitances=tuple(tuple(row) for row in field.capacitances.tolist()),
            outlines=_outlines(electrodes),
            map=_map(field, electrodes),
            axis=_axis(field),
            dc_applied=drawing.dc_applied,
        ).to_plain()
    )


def _sensitivities(drawing: Drawing, field: TrapField) -> Array:
    """Of ln D, ln A and the centre to each dimension, (K, 3)."""
    try:
        found = tolerance_budget(drawing.electrodes, drawing.nominal, drawing.u, field=field).sensitivities
    except DrawingError as error:
        what = str(error).removeprefix(f"{error.conductor}: ")
        raise DrawingError(error.conductor, f"with one dimension off by its own u it {what}") from error
    return found.reshape(-1, 3)


def _outlines(electrodes: Electrodes) -> tuple[Outline, ...]:
    """Conductors as runs of points fit to be drawn."""
    found = []
    for conductor in electrodes.conductors:
        r: list[float] = [conductor.pieces[0].start[0]]
        z: list[float] = [conductor.pieces[0].start[1]]
        for piece in conductor.pieces:
            across, up = piece.points(np.linspace(0.0, 1.0, 49 if isinstance(piece, Arc) else 2)[1:])
            r += [float(one) for one in across]
            z += [float(one) for one in up]
        solid = conductor.closed or all(
            conductor.on_axis(end) for end in (conductor.pieces[0].start, conductor.pieces[-1].end)
        )
        found.append(Outline(conductor.name, conductor.carries, tuple(r), tuple(z), solid))
    return tuple(found)


def _map(field: TrapField, electrodes: Electrodes) -> Map:
    """Potentials over what carries a voltage, with some room around it."""
    live = [piece for one in electrodes.conductors if one.carries != "ground" for piece in one.pieces]
    points = np.concatenate([np.column_stack(piece.points(np.linspace(0.0, 1.0, 33))) for piece in live])
    radius, low, high = points[:, 0].max(), points[:, 1].min(), points[:, 1].max()
    room = 0.15 * max(radius, high - low)
    r = np.linspace(0.0, radius + room, ACROSS)
    z = np.linspace(low - room, high + room, UP)
    drive, dc = field.potential(r[None, :], z[:, None])
    rounded = [tuple(tuple(row) for row in np.round(one, DIGITS).tolist()) for one in (drive, dc)]
    return Map(tuple(r.tolist()), tuple(z.tolist()), *rounded)


def _axis(field: TrapField) -> Axis:
    """The fields over the ideal ones, as far as three usable heights or half the way to the nearest conductor."""
    reach = min(max(3.0 * usable_height(field, CHANGE), 0.1 * field.reach), 0.6 * field.reach)
    z = np.linspace(-reach, reach, 121)
    away = departures(field, z)
    return Axis(*(tuple(np.round(one, 12).tolist()) for one in (z, 1.0 + away.drive_field, 1.0 + away.dc_field)))
