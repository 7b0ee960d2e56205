"""Panels along the outlines of the electrodes: where the charge is sought, finer towards edges, corners and gaps.

A panel is a stretch of one piece, run through by t from 0 to 1. Towards an edge or corner the distance d goes as
d = t^p: charge per length goes there as d^(pi/beta - 1), beta the angle outside the metal (Jackson, Classical
Electrodynamics, section 2.11), and with p = m beta/pi, m whole, charge per t is smooth, a polynomial will do.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np
from scipy.spatial import cKDTree

from reduction.clearances import gap_between
from reduction.conductors import Arc, Array, Conductor, Flags, Indices, Piece, place
from reduction.errors import ReductionError

SMOOTH = 1e-6  # [rad] a turn smaller than this is none
MOST = 312  # panels of one drawing: some 5000 nodes, 10 s
WIDEST = math.pi / 3.0  # [rad] of an arc in one panel
BESIDE = 3.0  # length of a panel over that of its neighbour, at most
ACROSS = 8.0  # length of a panel over its distance from another conductor, at most


class NotConverged(ReductionError, RuntimeError):
    """A field that cannot be had to the accuracy asked for; the message says what to draw otherwise."""


Conductors = Sequence[Conductor]


@dataclass(frozen=True)
class Mesh:
    """Where the pieces are cut, and the power p at their ends: all that a slightly different drawing can take over.

    `cuts[k]` are fractions of the length of piece k, from 0 to 1; `powers[k]` the p at its start and end. Pieces are
    numbered through all conductors.
    """

    cuts: tuple[tuple[float, ...], ...]
    powers: tuple[tuple[float, float], ...]

    def halved(self, chosen: Indices) -> Mesh:
        """The mesh with the chosen panels (numbers) cut in half."""
        chosen_set, number, cuts = set(chosen.tolist()), 0, []
        for piece in self.cuts:
            points = [piece[0]]
            for a, b in zip(piece, piece[1:], strict=False):
                points += [0.5 * (a + b), b] if number in chosen_set else [b]
                number += 1
            cuts.append(tuple(points))
        return replace(self, cuts=tuple(cuts))


@dataclass(frozen=True)
class Panels:
    """Panels of one drawing, one row each, measured from the end their power is for.

    There coordinates keep their last digits, which what lies close to a corner or the axis needs.
    """

    conductor: Indices  # number of the conductor
    bent: Flags  # whether it is a part of an arc
    centre: Array  # (M, 2) of the arc [m]
    radius: Array  # of the arc [m]
    base: Array  # (M, 2) r and z of that end [m]; of an arc, its angle [rad] and 0
    whole: Array  # (M, 2) change of the same over the whole piece
    part: Array  # of the piece that the panel takes
    power: Array
    from_end: Flags  # whether that end is where t = 1

    def __len__(self) -> int:
        return len(self.part)

    def at(self, which: Indices, t: Array) -> tuple[Array, Array, Array]:
        """Radius, height [m] and length per t [m] at t, shape (K, Q), of the panels `which`, shape (K,)."""
        power, end = self.power[which][:, None], self.from_end[which][:, None]
        u = np.where(end, 1.0 - t, t)
        lead = u ** (power - 1.0)
        along = np.where(end, -1.0, 1.0) * self.part[which][:, None] * lead * u
        base, whole = self.base[which][:, :, None], self.whole[which][:, :, None]
        r, z = base[:, 0] + along * whole[:, 0], base[:, 1] + along * whole[:, 1]
        bent = self.bent[which]
        if bent.any():
            radius, centre, angle = self.radius[which][bent, None], self.centre[which][bent, :, None], r[bent]
            r[bent], z[bent] = centre[:, 0] + radius * np.cos(angle), centre[:, 1] + radius * np.sin(angle)
        return r, z, self.length[which][:, None] * power * lead

    @property
    def length(self) -> Array:
        """Length of each panel [m]."""
        return self.radius * np.hypot(self.whole[:, 0], self.whole[:, 1]) * self.part


def pieces_of(conductors: Conductors) -> list[tuple[int, Piece]]:
    """Number of the conductor and piece, through all conductors."""
    return [(k, piece) for k, conductor in enumerate(conductors) for piece in conductor.pieces]


def panels_of(conductors: Conductors, mesh: Mesh) -> Panels:
    """The panels that a mesh makes on a drawing, which has as many pieces as the one the mesh was made for."""
    if len(mesh.cuts) != len(pieces_of(conductors)):
        raise ValueError("the number of pieces of a shape must not change with its dimensions")
    rows = []
    for number, (conductor, piece) in enumerate(pieces_of(conductors)):
        cuts, (first, last) = mesh.cuts[number], mesh.powers[number]
        if isinstance(piece, Arc):
            ends = ((piece.begins, 0.0), (piece.begins + piece.turn, 0.0))
            shape = (True, piece.centre, piece.radius)
        else:
            ends, shape = (piece.start, piece.end), (False, (0.0, 0.0), 1.0)
        whole = (ends[1][0] - ends[0][0], ends[1][1] - ends[0][1])
        for k, (s0, s1) in enumerate(zip(cuts, cuts[1:], strict=False)):
            at_end = k == len(cuts) - 2
            base = ends[1] if at_end else (ends[0][0] + s0 * whole[0], ends[0][1] + s0 * whole[1])
            power = last if at_end else first if k == 0 else 1.0
            rows.append((conductor, *shape, base, whole, s1 - s0, power, at_end))
    columns = [np.array(column) for column in zip(*rows, strict=True)]
    return Panels(*columns)


def first_mesh(conductors: Conductors) -> Mesh:
    """A mesh to begin with: graded by lengths and gaps alone, before any charge is known.

    Raises
    ------
    NotConverged
        Where gaps are so fine against the whole that the panels run out.
    """
    powers = [power for conductor in conductors for power in _powers(conductor)]
    cuts = []
    for _, piece in pieces_of(conductors):
        parts = max(2, math.ceil(abs(piece.turn) / WIDEST)) if isinstance(piece, Arc) else 2
        cuts.append(tuple(np.linspace(0.0, 1.0, parts + 1).tolist()))
    mesh = Mesh(tuple(cuts), tuple(powers))
    while True:
        panels = panels_of(conductors, mesh)
        coarse = np.flatnonzero(_too_long(conductors, panels))
        if not len(coarse):
            return mesh
        if len(panels) + len(coarse) > MOST:
            raise NotConverged(_too_fine(conductors))
        mesh = mesh.halved(coarse)


def _too_fine(conductors: Conductors) -> str:
    pieces = len(pieces_of(conductors))
    if 2 * pieces > MOST:
        return f"the drawing has {pieces} pieces, {MOST // 2} at most can be solved: draw with fewer, longer ones"
    gap = min((gap_between(*pair) for pair in combinations(conductors, 2)), key=lambda gap: gap.distance)
    return (
        f"the gap of {1e3 * gap.distance:.4g} mm between {gap.name_a} and {gap.name_b}, near {place(gap.at_a)}, is "
        "too narrow for its length: draw it wider, shorten the part along it, or leave out what does not matter"
    )


def _too_long(conductors: Conductors, panels: Panels) -> Flags:
    """Whether each panel is long against its neighbours on the outline or its distance from other conductors."""
    length = panels.length
    bad = np.zeros(len(panels), bool)
    r, z, _ = panels.at(np.arange(len(panels)), np.broadcast_to(np.linspace(0.0, 1.0, 9), (len(panels), 9)))
    for k, conductor in enumerate(conductors):
        own = np.flatnonzero(panels.conductor == k)
        before, after = own[:-1], own[1:]
        if conductor.closed:
            before, after = np.append(before, own[-1]), np.append(after, own[0])
        bad[before] |= length[before] > BESIDE * length[after]
        bad[after] |= length[after] > BESIDE * length[before]
        other = np.flatnonzero(panels.conductor != k)
        if len(other):
            around = cKDTree(np.column_stack([r[other].ravel(), z[other].ravel()]))
            gap = np.asarray(around.query(np.stack([r[own], z[own]], axis=-1))[0]).min(axis=1)
            bad[own] |= length[own] > ACROSS * gap
    return bad


def _powers(conductor: Conductor) -> list[tuple[float, float]]:
    """The power p at the start and end of each piece of a conductor."""
    pieces = conductor.pieces
    joints = []
    for before, after in zip(pieces, pieces[1:], strict=False):
        joints.append(_power_of_joint(before, after))
    if conductor.closed:
        first = last = _power_of_joint(pieces[-1], pieces[0])
    else:
        first = _power_of_end(conductor, pieces[0], 0.0)
        last = _power_of_end(conductor, pieces[-1], 1.0)
    ends = [first, *joints, last]
    return list(zip(ends, ends[1:], strict=False))


def _power_of_joint(before: Piece, after: Piece) -> float:
    turn = (after.heading(0.0) - before.heading(1.0) + math.pi) % (2.0 * math.pi) - math.pi
    if abs(turn) > SMOOTH:
        return _power(math.pi + abs(turn))  # the wider side: which side the metal is on is not asked
    same = (
        isinstance(before, Arc)
        and isinstance(after, Arc)
        and math.dist(before.centre, after.centre) < 1e-6 * before.radius
    )
    return 1.0 if same else 3.0  # a jump of curvature: charge per length goes as d ln d


def _power_of_end(conductor: Conductor, piece: Piece, s: float) -> float:
    if not conductor.on_axis(piece.end if s else piece.start):
        return _power(2.0 * math.pi)
    heading = piece.heading(s)
    return 1.0 if abs(math.sin(heading)) < SMOOTH else 3.0  # across the axis smoothly, or the tip of a cone


def _power(beta: float) -> float:
    """The p that makes charge per t smooth, at least 2."""
    return math.ceil(2.0 * math.pi / beta - 1e-9) * beta / math.pi
