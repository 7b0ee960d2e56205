"""What every column of the results means: type, unit, meaning, and whose uncertainty it is."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Any

from reduction.tables import TEXT
from reduction.units import split_name

_COUNTS = """readings line sessions particles count lost sign_undetermined not_determined excluded rank_low rank_high
    session_order intrinsic_particles"""
COUNTS = frozenset(_COUNTS.split())
"""Columns that count: whole numbers."""

_SPELLED = {
    "C_per_kg": "C/kg", "C_per_m2": "C/m2", "per_s": "1/s", "V_per_m": "V/m", "e": "elementary charges",
    "percent": "%", "degC": "degree Celsius",
}  # fmt: skip
_NO_UNIT = frozenset(["readings", "flags", "effective_particles", "least", "most", "low", "high", "value"])

KEYS: dict[str, tuple[str, ...]] = {
    "particles": ("session", "particle"),
    "methods": ("session", "particle", "method"),
    "agreement": ("session", "particle", "method_a", "method_b", "quantity"),
    "inputs": ("input",),
    "components": ("session", "particle", "result", "input"),
    "budget": ("session", "particle", "result", "input"),
    "comparison": ("group",),
    "contrasts": ("group_a", "group_b"),
    "session_means": ("group", "session"),
    "charge_summary": ("group", "species"),
    "readings": ("log", "line"),
}
"""Columns that tell the rows of a table apart."""

OF_PARTICLES = frozenset(["methods", "agreement", "components", "budget", "charge_distribution", "readings"])
"""Tables whose session and particle are those of particles.csv."""

_ABOUT = {
    "session": "Id of the session.",
    "particle": "Id of the particle, one within its session.",
    "species": "What the particle is a specimen of.",
    "charged_with": "What it was charged with.",
    "status": "What became of it; of a reading: used, flagged (and used), excluded (by hand) or left_out.",
    "flags": "Words for what to look at, with ; between them.",
    "charge_to_mass_C_per_kg": "Charge-to-mass ratio.",
    "charge_to_mass_low_C_per_kg": "Lower end of the coverage interval of the charge-to-mass ratio.",
    "charge_to_mass_high_C_per_kg": "Upper end of the coverage interval of the charge-to-mass ratio.",
    "u_random_charge_to_mass_C_per_kg": "What the readings' noise alone gives to u of the charge-to-mass ratio.",
    "methods": "Methods that entered the adjustment, with ; between them.",
    "readings": "Number of readings used.",
    "chi_square": "Sum of squared residuals over u squared.",
    "degrees_of_freedom": "Degrees of freedom.",
    "effective_degrees_of_freedom": "Degrees of freedom of u, Welch-Satterthwaite; inf where none limits it.",
    "drag_rate_per_s": "Drag rate: drag over mass and velocity.",
    "diameter_um": "Diameter of the equivalent sphere.",
    "mass_from": "What the mass was taken from: adjusted, drag or diameter.",
    "mass_kg": "Mass.",
    "mass_low_kg": "Lower end of the coverage interval of the mass.",
    "mass_high_kg": "Upper end of the coverage interval of the mass.",
    "charge_C": "Charge.",
    "charge_e": "Charge in elementary charges.",
    "charge_low_e": "Lower end of the coverage interval of the charge.",
    "charge_high_e": "Upper end of the coverage interval of the charge.",
    "surface_charge_density_C_per_m2": "Charge over the surface of the equivalent sphere.",
    "charge_drift_per_s": "Relative change of the charge in time.",
    "method": "Method: balance, height, secular or diameter alone, or adjusted together.",
    "reason": "Why there is no number.",
    "height_origin_mm": "Reading of height at the centre of the trap.",
    "normalized_residual": "Residual over its u; of a method: it less the adjusted result, over u of that difference.",
    "method_a": "First method of the pair.",
    "method_b": "Second method of the pair.",
    "quantity": "What is compared.",
    "difference": "First less second.",
    "unit": "Unit of the numbers in this row.",
    "normalized_error": "Difference over its expanded uncertainty, twice u.",
    "input": "Name of the input: scope, owner and key.",
    "scope": "How far its error is shared: reading, particle, session, species, trap, instrument, campaign.",
    "owner": "Which of its scope.",
    "estimate": "Estimate.",
    "u": "Standard uncertainty, k = 1.",
    "shape": "Shape of the distribution.",
    "adjusted_estimate": "Estimate after the adjustment; empty where sessions adjusted it apart.",
    "adjusted_u": "Standard uncertainty after the adjustment.",
    "pull": "Move of the input in the adjustment over the u of that move.",
    "result": "Which result.",
    "component": "Signed share of u: components of equal name are fully correlated, all others not at all.",
    "evaluation": "Type A (from readings) or B (otherwise), as in the GUM.",
    "sensitivity": "Change of the result per change of the input.",
    "share": "Part of the whole: of u squared in a budget, of the particles in a histogram.",
    "group": "Group compared.",
    "group_a": "First group of the pair.",
    "group_b": "Second group of the pair.",
    "sessions": "Number of sessions.",
    "particles": "Number of particles.",
    "mean": "Mean, each session counting as one.",
    "low": "Lower end of the coverage interval.",
    "high": "Upper end of the coverage interval.",
    "between_sessions": "Standard deviation between sessions, beyond what particles explain.",
    "between_particles": "Standard deviation between particles of one session.",
    "between_sessions_restricted": "The same by restricted maximum likelihood.",
    "u_from_sessions": "What the spread between sessions gives to u of the mean.",
    "u_from_particles": "What the spread and u of single particles give to u of the mean.",
    "u_from_shared": "What shared inputs give to u of the mean.",
    "intraclass_correlation": "Part of the variance within a group that lies between its sessions.",
    "effective_particles": "Number of independent particles that would fix the mean as well.",
    "rank_low": "First rank that is not excluded; 1 is the most positive.",
    "rank_high": "Last rank that is not excluded.",
    "median": "Median of the particles.",
    "least": "Smallest value.",
    "most": "Largest value.",
    "sign_undetermined": "Particles whose sign no reading tells.",
    "not_determined": "Particles without a result.",
    "excluded": "Particles excluded by hand.",
    "relative_humidity_percent": "Relative humidity of the air.",
    "temperature_degC": "Temperature of the air.",
    "contacts": "Contacts with what it was charged with.",
    "note": "What to know of this row.",
    "p": "Chance of a difference at least this large where there is none.",
    "p_holm": "The same, corrected for the number of comparisons (Holm).",
    "low_simultaneous": "Lower end of the interval that holds for all pairs at once.",
    "high_simultaneous": "Upper end of the interval that holds for all pairs at once.",
    "smallest_p": "Smallest p a permutation of so few sessions could give.",
    "ratio": "Ratio of the means, first over second.",
    "ratio_low": "Lower end of the interval of the ratio.",
    "ratio_high": "Upper end of the interval of the ratio.",
    "effect_size": "Difference over the spread of single particles.",
    "dominance": "Chance that a particle of the first lies above one of the second, less the opposite.",
    "covariate": "What the means may go with.",
    "slope": "Change of the mean per change of the covariate, within groups.",
    "share_between_groups": "Part of the covariate's variance that lies between groups and tells nothing here.",
    "kind": "Kind of this row.",
    "members": "Groups it is about, with ; between them.",
    "verdict": "What was found.",
    "date": "Day of the session.",
    "session_order": "Place of the session in time.",
    "u_measurement": "Standard uncertainty of the session's mean from the measurement.",
    "u_particles": "Standard uncertainty of the session's mean from the scatter of its particles.",
    "log": "Which log the reading stands in.",
    "line": "Line of the log.",
    "exclude": "Reason why the reading was excluded by hand.",
    "drive_voltage_peak_V": "Drive voltage, peak, as read.",
    "drive_frequency_Hz": "Drive frequency.",
    "dc_voltage_V": "Voltage between the plates, as read.",
    "balance_voltage_V": "Voltage between the plates that holds the particle at the centre, as read.",
    "secular_frequency_Hz": "Frequency of the particle's slow oscillation.",
    "height_mm": "Height, as read; in the figure of a trap's field, height from the centre.",
    "trap": "Id of the trap.",
    "drive_field_off_percent": "Field of the drive along the axis over A z, less 1.",
    "dc_field_off_percent": "Field of the dc voltage along the axis over D, less 1.",
    "time_s": "Time since the session began.",
    "u_reading": "Standard uncertainty of the reading, in the unit of the reading.",
    "residual": "Reading less what its method alone says it should be, in the unit of the reading.",
    "adjusted_residual": "Reading less what all methods together say it should be, in the unit of the reading.",
    "scale": "Scale of the bins: linear or logarithmic.",
    "low_e": "Lower end of the bin.",
    "high_e": "Upper end of the bin.",
    "count": "Number of particles.",
    "count_low": "Lower end of the interval of the count, from u of the charges.",
    "count_high": "Upper end of the interval of the count.",
    "expected_count": "Count expected with u of the charges taken in.",
    "cumulative_share": "Part of the particles up to the upper end of the bin.",
    "share_at_or_below": "Part of the particles at or below this charge.",
    "share_smeared": "The same with u of the charges taken in.",
    "mean_e": "Mean charge, each session counting as one.",
    "mean_low_e": "Lower end of the coverage interval of the mean charge.",
    "mean_high_e": "Upper end of the coverage interval of the mean charge.",
    "intrinsic_spread_e": "Spread of the charges without measurement error.",
    "intrinsic_skew": "Skew of the charges without measurement error.",
    "intrinsic_basis": "What the intrinsic spread rests on.",
    "intrinsic_particles": "Particles the intrinsic spread rests on.",
    "fraction_positive": "Part of the particles that are positive.",
    "fraction_positive_low": "Lower end of the interval of the fraction positive.",
    "fraction_positive_high": "Upper end of the interval of the fraction positive.",
    "fraction_positive_least": "Fraction positive if all that were lost had been negative.",
    "fraction_positive_most": "Fraction positive if all that were lost had been positive.",
    "lost": "Particles lost before they were measured.",
    "bin_width_e": "Width of the bins; on a logarithmic scale of the narrowest.",
    "median_u_e": "Median u of the charges.",
    "window_positive_low_e": "Smallest positive charge the trap could have held at the voltages logged.",
    "window_positive_high_e": "Largest positive charge the trap could have held.",
    "window_negative_low_e": "Most negative charge the trap could have held.",
    "window_negative_high_e": "Least negative charge the trap could have held.",
    "window_low_C_per_kg": "Smallest charge-to-mass ratio, by size, the trap could have held.",
    "window_high_C_per_kg": "Largest charge-to-mass ratio, by size, the trap could have held.",
    "value": "Number drawn.",
    "stray_field_V_per_m": "Stray field as stated.",
    "adjusted_stray_field_V_per_m": "Stray field after the adjustment.",
    "largest_normalized_error": "Largest normalized error of two methods in the session.",
}


def about(name: str) -> str:
    """What a column means; "" where it is not known.

    >>> about("u_mass_kg"), about("rank_2")
    ('Standard uncertainty (k = 1) of mass_kg.', 'Chance that the group has rank 2.')
    """
    if name in _ABOUT:
        return _ABOUT[name]
    if rank := re.fullmatch(r"rank_(\d+)", name):
        return f"Chance that the group has rank {rank[1]}."
    whose = uncertain(name)
    return f"Standard uncertainty (k = 1) of {whose}." if whose in _ABOUT else ""


def uncertain(name: str) -> str:
    """Column whose standard uncertainty a column is; "" where it is none.

    >>> uncertain("u_mass_kg"), uncertain("u_reading"), uncertain("mass_kg")
    ('mass_kg', '', '')
    """
    return name.removeprefix("u_") if name.startswith("u_") and name not in _ABOUT else ""


def unit(name: str) -> str:
    """Unit of a column by its name, as one writes it; "" where it has none or it stands in the row.

    >>> unit("u_charge_to_mass_C_per_kg"), unit("charge_e"), unit("chi_square")
    ('C/kg', 'elementary charges', '')
    """
    if name in TEXT or name in _NO_UNIT:
        return ""
    if name.endswith("_e"):
        return _SPELLED["e"]
    spelling = split_name(name)[1]
    return _SPELLED.get(spelling, spelling)


def field(name: str, columns: Sequence[str]) -> dict[str, Any]:
    """Descriptor of a column for a table schema: name, type, meaning, unit, and whose uncertainty it is.

    Parameters
    ----------
    name : str
        The column.
    columns : sequence of str
        All columns of its table.
    """
    kind = "string" if name in TEXT else "integer" if name in COUNTS else "number"
    found: dict[str, Any] = {"name": name, "type": kind, "description": about(name)}
    if spelled := unit(name):
        found["unit"] = spelled
    whose = uncertain(name)
    if whose in columns:
        found["uncertaintyOf"] = whose
    return found


def schema(table: str, columns: Sequence[str]) -> dict[str, Any]:
    """Table schema of one table of the results.

    Parameters
    ----------
    table : str
        Name of the table, as `particles`.
    columns : sequence of str
        Its columns.
    """
    found: dict[str, Any] = {"fields": [field(name, columns) for name in columns], "missingValues": [""]}
    if table in KEYS:
        found["primaryKey"] = list(KEYS[table])
    if table in OF_PARTICLES:
        own = ["session", "particle"]
        found["foreignKeys"] = [{"fields": own, "reference": {"resource": "particles", "fields": own}}]
    return found
