"""What to try, for each thing a marker recognises: kind, short, and without a number of the program's own."""

from __future__ import annotations

from collections.abc import Mapping

_DRIVE = (
    "The head of the column in your log says which drive voltage it holds. The peak of a sine is root two times its "
    "rms value and half its peak-to-peak value; the equations of the trap want the peak."
)
_ANGULAR = "Write the unit beside every frequency, Hz or rad/s, and follow it through the formula."
_RADIUS = "Write the formula with the letter you measured, and check it on a sphere whose mass you know."
_BUDGET = "List what the value depends on, each with its own uncertainty and how strongly it acts, and add the squares."

ADVICE: Mapping[str, str] = {
    **dict.fromkeys(
        (
            "rms_as_peak",
            "peak_as_rms",
            "peak_to_peak_as_peak",
            "peak_as_peak_to_peak",
            "peak_to_peak_as_rms",
            "rms_as_peak_to_peak",
        ),
        _DRIVE,
    ),
    "root_two": _DRIVE,
    "two": _DRIVE,
    "two_root_two": _DRIVE,
    "two_pi": _ANGULAR,
    "secular_angular": _ANGULAR,
    "drive_angular": _ANGULAR,
    "mains_frequency": "Use the drive frequency you logged; a generator need not run at the frequency of the mains.",
    "drag_free": "Compare the drag rate with the angular frequency of the drive: unless it is much smaller, the air "
    "belongs in the equation of motion.",
    "radius": _RADIUS,
    "radius_in_drag": _RADIUS,
    "no_slip": "A small sphere slips through the air a little; the slip correction belongs in the drag law.",
    "lot_diameter": "Particles of one lot differ. Where you have read a particle\u2019s own diameter, use that one.",
    "power_of_ten": "Carry the units through the calculation, prefix by prefix, and see whether they come out as "
    "claimed.",
    "elementary_charge": "Say in which unit the charge is: coulombs, or elementary charges. One becomes the other by "
    "one factor, used once.",
    "sign": "Ask which way the field points when the supply reads positive, and which way the force has to point "
    "to carry the particle.",
    "several_fit": "More than one slip would explain it; go through the calculation step by step, units first.",
    "standard_as_expanded": "An expanded uncertainty is k times the standard one. State U together with its k.",
    "expanded_as_standard": "An expanded uncertainty is k times the standard one. State U together with its k.",
    "no_coverage_factor": "An uncertainty without its coverage factor can be read in two ways. State k.",
    "scatter_only": "Repeating a reading shows its scatter only. " + _BUDGET,
    "uncertainty_large": "Look for a component counted twice, or a limit taken for a standard uncertainty. " + _BUDGET,
    "uncertainty_small": "Look for what repeated readings cannot show: constants, gains, offsets. " + _BUDGET,
    "digits": "More digits of an uncertainty than two say more than anyone knows.",
    "places": "Round the uncertainty first, then the value to the same place.",
    "unit_kind": "Work the unit out from the formula; it tells whether the formula is the right one.",
    "unit_prefix": "Estimate the size of the result in your head before you write the prefix.",
}
"""By the code of a hint."""
