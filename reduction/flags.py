"""The closed list of words that qualify a particle's results, each with what it tells the reader."""

from __future__ import annotations

FLAGS: dict[str, str] = {
    "sign_undetermined": "no log tells the sign of the charge; sizes are given as positive numbers",
    "two_solutions": "the readings fit two different charge-to-mass ratios equally well",
    "drag_not_determined": "the readings do not determine the drag rate, nor the size that follows from it",
    "no_density": "no density is given: no mass, buoyancy neglected, drag taken as steady",
    "chi_square": "the readings disagree with each other beyond their stated uncertainty (p < 0.01)",
    "outlier_reading": "a reading lies more than 4 standard deviations from its method's fit; it is kept",
    "beyond_usable_height": "a height lies beyond the usable height of the trap; it is kept",
    "finite_reynolds": "the finite Reynolds number of the micromotion shifts a height by more than 5 %",
    "field_departure": "the field's departure from the linear one shifts a height by more than 5 % and its u",
    "charge_drift": "the charge drifts; charge-to-mass refers to the mean time of the balance readings",
    "no_oscillation": "the secular log was left out: at this charge and drag no secular oscillation exists",
    "unstable": "readings lie outside the stable region of the motion",
    "inflated": "a method's scatter exceeds what is stated; its uncertainty was enlarged by the Birge ratio",
    "u_from_scatter": "the uncertainty of a reading was taken from the scatter of its log",
    "above_air_limit": "the surface charge density exceeds what air at 3 MV/m holds over flat surfaces",
    "neighbours": "other particles were in the trap and may have biased the balance by more than 1 %",
    "outside_window": "a drive was logged at which a particle of this charge and drag would not have been held",
    "resolution": "readings come in steps coarser than their stated uncertainty",
    "factor_suspected": "a constant factor, such as rms taken for peak, would bring the readings together",
    "size_from_lot": "only the lot's mean and spread fix the size",
}
"""Word: sentence. Several words of one particle are joined by a semicolon."""


def joined(words: set[str]) -> str:
    """Flags of one particle as they stand in a table, in the order of the list."""
    unknown = words - FLAGS.keys()
    if unknown:
        raise ValueError(f"flags not in the list: {sorted(unknown)}")
    return ";".join(word for word in FLAGS if word in words)
