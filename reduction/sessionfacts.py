"""What the report of one session tells beside its tables: the content of session.json."""

from __future__ import annotations

from typing import Any

import numpy as np

from reduction.budget import Results, results_of
from reduction.charge import electrons
from reduction.curves import curves_of
from reduction.fieldmap import CORRECTION_U
from reduction.methods import Array, Flags, surroundings
from reduction.outcome import CHARGE, DIAMETER, GAMMA, MASS, Outcome, own_sizes
from reduction.preparation import EXACT
from reduction.quantity import shorthand
from reduction.resultrows import adjusted_inputs
from reduction.solution import is_determined
from reduction.window import lost_record, window_record


def facts(outcome: Outcome, sanity: list[tuple[int, str, str]]) -> dict[str, Any]:
    """Content of session.json: what the report tells beside the tables."""
    session, air, site = outcome.session, outcome.session.air, outcome.session.site
    stray = next(one for one in outcome.prepared.setting.inputs if one.role == "stray_field")
    adjusted = adjusted_inputs(outcome).get(stray.name, (None, None))
    return {
        "session": session.id,
        "status": "excluded" if session.exclude else "ok",
        "reason": session.exclude,
        "date": session.date,
        "trap": session.trap,
        "species": session.species,
        "charged_with": session.charged_with,
        "operator": session.operator,
        "session_notes": session.notes,
        "contacts": session.contacts,
        "attributes": dict(sorted(session.attributes.items())),
        "instruments": dict(sorted(session.instruments.items())),
        "air": {
            "temperature_degC": _plain(air.temperature.estimate - 273.15, air.temperature.u),
            "pressure_hPa": _plain(air.pressure.estimate / 100.0, air.pressure.u / 100.0),
            "relative_humidity_percent": _plain(
                air.relative_humidity.estimate * 100.0, air.relative_humidity.u * 100.0
            ),
        },
        "site": {
            name: _plain(one.estimate, one.u)
            for name, one in (
                ("gravity_m_per_s2", site.gravity),
                ("latitude_rad", site.latitude),
                ("elevation_m", site.elevation),
            )
            if one is not None
        },
        "height_reading": session.height_reading,
        "secular_reading": session.secular_reading,
        "adjust": outcome.campaign.options.adjust,
        "drag": outcome.campaign.options.drag,
        "mass_from": outcome.campaign.options.mass_from,
        "scatter": outcome.campaign.options.scatter,
        "lot": outcome.campaign.options.lot,
        "coverage_probability": outcome.campaign.options.coverage_probability,
        "exact_inputs": [
            [one.name, repr(one.written), one.unit] for one in outcome.prepared.setting.inputs if not one.quantity.u
        ]
        + _exact_diameters(outcome),
        "left_out": [[log, line, name, reason] for log, line, name, reason in outcome.prepared.left_out]
        + [["particles", 0, name, reason] for name, reason in sorted(outcome.prepared.excluded.items())],
        "flagged": outcome.flagged,
        "notes": _notes(outcome, sanity),
        "strain": _strain(outcome),
        "dc_polarity": outcome.prepared.setting.polarity,
        "extra_columns": {log: list(names) for log, names in sorted(outcome.logs.extra_columns.items()) if names},
        "dialects": dict(sorted(outcome.logs.dialects.items())),
        "scatter_dof": {log: dof for log, dof in sorted(outcome.reduced.scatter.items())},
        "stray_field": {
            "estimate": stray.quantity.estimate,
            "u": stray.quantity.u,
            "adjusted": adjusted[0],
            "adjusted_u": adjusted[1],
        },
        **_drawn_trap(outcome),
        "masses": _masses(outcome),
        "window": window_record(
            session, outcome.campaign.traps[session.trap], outcome.logs, _median_drag_rate(outcome)
        ),
        "lost": lost_record(session, outcome.logs),
        "curves": curves_of(
            outcome.prepared,
            outcome.adjusted,
            list(outcome.names),
            [place for place in range(len(outcome.names)) if outcome.sure[place, 0]],
        ),
    }


def _median_drag_rate(outcome: Outcome) -> float:
    """Median of the drag rates that are determined [1/s]; NaN where none is."""
    known = outcome.results.value[outcome.sure[:, 1], GAMMA]
    return float(np.median(known)) if len(known) else float("nan")


def _exact_diameters(outcome: Outcome) -> list[list[str]]:
    """Own diameters stated without an uncertainty."""
    log = outcome.prepared.logs.get("diameter")
    if log is None:
        return []
    return [
        [f"particle/{outcome.session.id}/{outcome.prepared.names[index]}/diameter_um", repr(observed * 1e6), "um"]
        for index, observed, u in zip(log.particle.tolist(), log.observed.tolist(), log.u.tolist(), strict=True)
        if u == EXACT * observed
    ]


def _notes(outcome: Outcome, sanity: list[tuple[int, str, str]]) -> list[str]:
    notes = _departure_note(outcome)
    for log, dof in sorted(outcome.reduced.scatter.items()):
        notes.append(
            f"The uncertainty of one reading of {log}.csv comes from its scatter, with {dof:.3g} degrees "
            "of freedom pooled over the session."
        )
    for index, reason in enumerate(outcome.reduced.reasons):
        if reason:
            notes.append(f"Particle {outcome.prepared.names[index]}: {reason}.")
    names = outcome.prepared.names
    notes += [f"Particle {names[slip.particle]}: {slip.text}." for slip in outcome.reduced.slips]
    notes += [f"Particle {names[index]}: {text}." for index, _, text in sanity]
    return notes


def _drawn_trap(outcome: Outcome) -> dict[str, Any]:
    """Trap constants that follow from a drawing, and how far the field's departure shifts heights; else nothing."""
    setting = outcome.prepared.setting
    if setting.field_map is None:
        return {}
    rows: dict[str, Array] = {"estimate": np.zeros((1, 1, len(setting.uncertain)))}
    if not outcome.alone:
        rows["adjusted"] = outcome.adjusted.xi[None]
    found = {key: setting.field_map.constants(surroundings(setting, xi).values) for key, xi in rows.items()}
    keys = ("dc_field_per_volt_per_m", "ac_gradient_per_volt_per_m2")
    constants = {
        name: {key: float(both[which].flat[0]) for key, both in found.items()} for which, name in enumerate(keys)
    }
    height = outcome.adjusted.model.logs.get("height")
    shift = np.abs(height.departure) if height is not None and len(height) else np.zeros(1)
    return {
        "trap_constants": constants,
        "field_departure": {
            "treated": outcome.campaign.traps[outcome.session.trap].drawing.departure,  # type: ignore[union-attr]
            "largest_shift_mm": float(shift.max()) * 1e3,
            "median_shift_mm": float(np.median(shift)) * 1e3,
        },
    }


def _departure_note(outcome: Outcome) -> list[str]:
    drawn = _drawn_trap(outcome).get("field_departure")
    if not drawn or not drawn["largest_shift_mm"]:
        return []
    made = {
        "component": "heights are not corrected for it; it enters as a component",
        "corrected": f"heights are corrected for it to first order, with {100 * CORRECTION_U:g} % of the correction as "
        "its uncertainty",
    }[drawn["treated"]]
    return [
        f"The field's departure from the linear one shifts heights by up to {drawn['largest_shift_mm']:.2g} mm, half "
        f"of them by {drawn['median_shift_mm']:.2g} mm or less; {made}."
    ]


def _strain(outcome: Outcome) -> dict[str, Any] | None:
    """Chi-square of the adjustment and what strains it, for a session adjusted together."""
    strain = outcome.strain
    if strain is None:
        return None
    return {
        "chi_square": strain.chi_square,
        "degrees_of_freedom": strain.dof,
        "p": strain.p if strain.dof > 0 else None,
        "strains_most": strain.odd.name if strain.odd else None,
        "others_move_u": strain.odd.others_move if strain.odd else None,
        "sentences": list(strain.sentences),
    }


def _masses(outcome: Outcome) -> dict[str, list[dict[str, Any]]]:
    """Diameter, mass and charge of each particle from the adjusted drag rate, drag alone and diameter alone."""
    found: dict[str, list[dict[str, Any]]] = {name: [] for name in outcome.names}
    chosen = np.array(sorted(outcome.place), dtype=np.intp)
    drag = outcome.drag_alone
    if not len(chosen) or drag is None:
        return found
    ways: list[tuple[str, Results, Flags]] = []
    if outcome.campaign.options.mass_from == "adjusted":
        ways.append(("adjusted", outcome.results, outcome.sure[:, 1]))
    ways.append(("drag", results_of(drag, alone=True), is_determined(drag)[:, 1]))
    sizes = own_sizes(outcome.prepared, np.arange(drag.model.particles, dtype=np.intp))
    ways.append(("diameter", results_of(drag, alone=True, size=sizes), np.isfinite(sizes.u)))
    for name, index in zip(list(outcome.names), chosen, strict=True):
        for way, results, sure in ways:
            row = outcome.place[int(index)] if results is outcome.results else int(index)
            value, u = results.value[row], results.u[row]
            own = results.private[row, CHARGE, CHARGE]
            if results.alone:  # its readings' noise through the shared inputs is then shared with no other particle
                own = own + (results.by_readings[row, CHARGE] ** 2).sum()
            if sure[row] and outcome.sure[outcome.place[int(index)], 0] and np.isfinite(value[MASS]):
                found[name].append(
                    {
                        "mass_from": way,
                        "diameter_um": value[DIAMETER] * 1e6,
                        "u_diameter_um": u[DIAMETER] * 1e6,
                        "mass_kg": value[MASS],
                        "u_mass_kg": u[MASS],
                        "charge_e": float(electrons(value[CHARGE])),
                        "u_charge_e": float(electrons(u[CHARGE])),
                        "u_own_charge_e": float(electrons(abs(value[CHARGE]) * np.sqrt(own))),
                    }
                )
    return found


def _plain(estimate: float, u: float) -> str:
    return shorthand(estimate, u) if u else repr(round(estimate, 9))
