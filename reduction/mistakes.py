"""What a wrong step would have given, recomputed from a bench's own readings, and which of them a claim fits.

A root two in the drive voltage is a root two in the charge-to-mass ratio from a secular frequency, but something else
in the drag rate from heights, and nothing in what comes from the balance. So each step is taken wrongly in turn and
the methods are fitted again, rather than the claim be compared with a list of factors.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from reduction import drag
from reduction.benchreference import ParticleReference
from reduction.charge import ELEMENTARY_CHARGE
from reduction.fits import fit_method
from reduction.methods import LN_GAMMA, LN_S, ORIGIN, Array, Readings, Setting, surroundings
from reduction.solution import Reduced

ROOT_TWO = math.sqrt(2.0)
MAINS = (50.0, 60.0)  # Hz
_NOT_NOMINAL = 5e-3  # relative distance from the mains frequency below which it makes no difference
_NOT_MAINS = 0.25  # and beyond which nobody would take the one for the other
_FARTHEST = 1e3  # from the right drag rate, beyond which a fit has run away
_FREE = -30.0  # ln of a drag rate [1/s] that stands in for none
_CLEARER = 3.0  # how much better one mistake must fit than the next to be named alone
_LEAST = 0.1  # claim tolerances below which two fits are equally good


@dataclass(frozen=True)
class Mistake:
    """One wrong step, and what it makes of each quantity it touches (SI, absolute values)."""

    code: str
    text: str
    values: Mapping[str, tuple[float, ...]]


TEXTS: Mapping[str, str] = {
    "rms_as_peak": "an rms drive voltage used as if it were the peak value (factor root two)",
    "peak_as_rms": "a peak drive voltage multiplied by root two as if it were an rms value (factor root two)",
    "peak_to_peak_as_peak": "a peak-to-peak drive voltage used as if it were the peak value (factor two)",
    "peak_as_peak_to_peak": "a peak drive voltage halved as if it were peak to peak (factor two)",
    "peak_to_peak_as_rms": "a peak-to-peak drive voltage taken for an rms value (factor two root two)",
    "rms_as_peak_to_peak": "an rms drive voltage taken for peak to peak (factor two root two)",
    "secular_angular": "a secular frequency taken for an angular frequency or the other way round (factor 2 pi)",
    "drive_angular": "a drive frequency taken for an angular frequency or the other way round (factor 2 pi)",
    "mains_frequency": "the nominal mains frequency in place of the drive frequency logged",
    "drag_free": "the drag-free formula, where the air damps the motion",
    "radius": "a radius where the diameter belongs, or the other way round",
    "radius_in_drag": "a radius where the diameter belongs in the drag law, or the other way round",
    "no_slip": "Stokes drag without the slip correction",
    "lot_diameter": "the mean diameter of the lot in place of the particle's own",
    "root_two": "a factor root two, as between an rms and a peak value",
    "two": "a factor two, as between a peak and a peak-to-peak value, or a radius and a diameter",
    "two_root_two": "a factor two root two, as between an rms and a peak-to-peak value",
    "two_pi": "a factor 2 pi, as between a frequency and an angular frequency",
    "power_of_ten": "a power of ten, as from a prefix of a unit",
    "elementary_charge": "a number of elementary charges where coulombs belong, or the other way round",
    "sign": "a sign the other way round",
}
"""What a bench is told a claim looks like."""

_PLAIN = {"root_two": ROOT_TWO, "two": 2.0, "two_root_two": 2.0 * ROOT_TWO, "two_pi": 2.0 * math.pi}
_AMPLITUDE = {
    "rms_as_peak": 1.0 / ROOT_TWO,
    "peak_as_rms": ROOT_TWO,
    "peak_to_peak_as_peak": 2.0,
    "peak_as_peak_to_peak": 0.5,
    "peak_to_peak_as_rms": 2.0 * ROOT_TWO,
    "rms_as_peak_to_peak": 0.5 / ROOT_TWO,
}


def mistakes_of(reduced: Reduced, index: int, reference: ParticleReference) -> list[Mistake]:
    """Every wrong step that can be taken with one particle's readings, and what it gives.

    Parameters
    ----------
    reduced : Reduced
        The session, its particles adjusted alone.
    index : int
        Which particle.
    reference : ParticleReference
        What the right steps give.
    """
    bench = _Bench.of(reduced, index, reference)
    found = [*_factors(reference), *_sizes(bench)]
    for code, factor in _AMPLITUDE.items():
        found.append(_recomputed(code, bench, amplitude=factor))
    for factor in (2.0 * math.pi, 0.5 / math.pi):
        found.append(_recomputed("secular_angular", bench, observed=factor))
        found.append(_recomputed("drive_angular", bench, omega=factor))
    drives = [log.omega / (2.0 * math.pi) for name, log in bench.logs.items() if name != "balance"]
    for nominal in MAINS:
        off = [np.abs(drive / nominal - 1.0) for drive in drives]
        if any((one > _NOT_NOMINAL).any() and (one < _NOT_MAINS).all() for one in off):
            found.append(_recomputed("mains_frequency", bench, nominal=nominal))
    found.append(Mistake("drag_free", TEXTS["drag_free"], _with_ratio(bench, _drag_free(bench))))
    return [one for one in found if any(one.values.values())]


@dataclass(frozen=True)
class _Bench:
    """One particle's readings, and what the right steps make of them."""

    setting: Setting
    logs: Mapping[str, Readings]
    theta: Array  # (5,)
    sign: float
    right: Mapping[str, float]  # quantity: absolute value, SI

    @classmethod
    def of(cls, reduced: Reduced, index: int, reference: ParticleReference) -> _Bench:
        logs = {name: log.of(index) for name, log in reduced.model.logs.items() if name != "diameter"}
        theta = reduced.alone.theta[index].copy()
        right = {quantity: abs(one.value) for quantity, one in reference.quantities.items()}
        for place, quantity in ((LN_S, "charge_to_mass"), (LN_GAMMA, "drag_rate")):
            if quantity in right:
                theta[place] = math.log(right[quantity])
        filled = {name: log for name, log in logs.items() if len(log)}
        return cls(reduced.model.setting.of(index), filled, theta, float(reduced.model.sign[index]), right)

    def diameter(self, gamma: float, *, slip: bool = True) -> float:
        """Diameter [m] that goes with a drag rate [1/s]; nan without a density."""
        kind = self.setting.species[0]
        value = surroundings(self.setting, np.zeros((1, 1, len(self.setting.uncertain))))
        if not self.setting.has_density[0] or not (gamma > 0.0 and math.isfinite(gamma)):
            return math.nan
        path = float(value.mean_free_path[0, 0]) * (1.0 if slip else 1e-9)
        role = {name: float(one[0, 0]) for name, one in value.values.items()}
        density, chi = role[f"density:{kind}"], role[f"shape_factor:{kind}"]
        eta = float(value.viscosity[0, 0])
        return float(drag.diameter_from_drag_rate(gamma, density, chi, eta, path, role["slip_formula"]))


def _factors(reference: ParticleReference) -> Iterator[Mistake]:
    """Mistakes of a plain factor, whatever way the number was found."""
    size = {quantity: abs(one.value) for quantity, one in reference.quantities.items()}
    for power in (*range(-15, 0), *range(1, 16)):
        values: dict[str, tuple[float, ...]] = {quantity: (value * 10.0**power,) for quantity, value in size.items()}
        yield Mistake("power_of_ten", TEXTS["power_of_ten"], values)
    radius = {
        "diameter": (2.0, 0.5),
        "mass": (8.0, 0.125),
        "charge": (8.0, 0.125),
        "surface_charge_density": (4.0, 0.25),
    }
    values = {
        quantity: tuple(size[quantity] * factor for factor in factors)
        for quantity, factors in radius.items()
        if quantity in size
    }
    yield Mistake("radius", TEXTS["radius"], values)
    for code, factor in _PLAIN.items():
        values = {quantity: (value * factor, value / factor) for quantity, value in size.items()}
        yield Mistake(code, TEXTS[code], values)
    if "charge" in size:
        charge = size["charge"]
        values = {"charge": (charge / ELEMENTARY_CHARGE, charge * ELEMENTARY_CHARGE)}
        yield Mistake("elementary_charge", TEXTS["elementary_charge"], values)


def _sizes(bench: _Bench) -> Iterator[Mistake]:
    """Mistakes on the way from the drag rate to the diameter, and the lot's diameter in its place."""
    gamma = bench.right.get("drag_rate", math.nan)
    for code, sizes in (
        ("radius_in_drag", (bench.diameter(2.0 * gamma), bench.diameter(0.5 * gamma))),
        ("no_slip", (bench.diameter(gamma, slip=False),)),
        ("lot_diameter", (_lot_diameter(bench),)),
    ):
        values = _joined([_with_sizes(bench, size) for size in sizes if math.isfinite(size)])
        if code == "radius_in_drag":
            values["drag_rate"] = (2.0 * gamma, 0.5 * gamma)
        yield Mistake(code, TEXTS[code], values)


def _lot_diameter(bench: _Bench) -> float:
    role = f"lot_diameter:{bench.setting.species[0]}"
    return next((one.quantity.estimate for one in bench.setting.inputs if one.role == role), math.nan)


def _recomputed(
    code: str,
    bench: _Bench,
    *,
    amplitude: float = 1.0,
    observed: float = 1.0,
    omega: float = 1.0,
    nominal: float | None = None,
) -> Mistake:
    """One wrong step in the readings, and what each method then gives."""
    logs = {}
    for name, log in bench.logs.items():
        if name == "balance":
            continue
        wrong = replace(log, amplitude=log.amplitude * amplitude, omega=log.omega * omega)
        if nominal is not None:
            wrong = replace(wrong, omega=np.full_like(log.omega, 2.0 * math.pi * nominal))
        if name == "secular" and observed != 1.0:
            wrong = replace(wrong, observed=log.observed * observed, u=log.u * observed)
        logs[name] = wrong
    if observed != 1.0:
        logs.pop("height", None)
    if not logs:
        return Mistake(code, TEXTS[code], {})
    turned = 1.0 if nominal is None else 2.0 * math.pi * nominal / float(np.mean(bench.logs[next(iter(logs))].omega))
    factor = observed * omega * turned / amplitude  # of the charge-to-mass ratio, for a weak drive
    ratios: list[float] = []
    rates: list[float] = []
    if "secular" in logs:
        exact = _fitted(bench, "secular", logs["secular"], (LN_S,), LN_S, math.log(factor))
        ratios += exact or [bench.right.get("charge_to_mass", math.nan) * factor]
    if "height" in logs and "balance" in bench.logs:
        rates += _fitted(bench, "height", logs["height"], (LN_GAMMA, ORIGIN), LN_GAMMA, 0.0)
    elif "height" in logs:
        both = _fit(bench, "height", logs["height"], (LN_S, LN_GAMMA, ORIGIN), 0.0)
        if both is not None:
            ratios.append(math.exp(both[LN_S]))
            rates.append(math.exp(both[LN_GAMMA]))
    rates = [rate for rate in rates if 1.0 / _FARTHEST < rate / bench.right.get("drag_rate", rate) < _FARTHEST]
    values = [_with_ratio(bench, ratios), *(_with_rate(bench, rate) for rate in rates)]
    values += [_with_both(bench, ratio, rate) for ratio in ratios for rate in rates]
    return Mistake(code, TEXTS[code], _joined(values))


def _fitted(
    bench: _Bench, method: str, log: Readings, active: tuple[int, ...], wanted: int, shift: float
) -> list[float]:
    found = _fit(bench, method, log, active, shift)
    return [] if found is None else [math.exp(found[wanted])]


def _fit(
    bench: _Bench, method: str, log: Readings, active: tuple[int, ...], shift: float, setting: Setting | None = None,
    ln_gamma: float | None = None,
) -> Array | None:  # fmt: skip
    """Unknowns that fit one log, the others as the right steps give them; None where no motion of this kind exists."""
    theta = bench.theta.copy()
    theta[LN_S] += shift
    if ln_gamma is not None:
        theta[LN_GAMMA] = ln_gamma
    fit = fit_method(method, setting or bench.setting, log, theta, bench.sign, active)
    usable = fit.status in ("ok", "not_determined") and np.isfinite(fit.theta[list(active)]).all()
    return fit.theta if usable else None


def _drag_free(bench: _Bench) -> list[float]:
    """Charge-to-mass ratios that the drag-free motion and its usual approximation give.

    Exactly: as for the right value, with the drag taken away. For a weak drive (textbook formulas): secular angular
    frequency s A V / (sqrt 2 Omega), and height per volt dc 2 D Omega^2 / (s A^2 V^2).
    """
    free = replace(bench.setting, unsteady=False)
    around = surroundings(bench.setting, np.zeros((1, 1, len(bench.setting.uncertain))))
    role = {name: float(one[0, 0]) for name, one in around.values.items()}
    found = []
    if "secular" in bench.logs:
        log = bench.logs["secular"]
        drive = role["ac_gradient"] * role["gain_drive_voltage"] * log.amplitude
        ratio = ROOT_TWO * 2.0 * math.pi * log.observed * log.omega / drive
        found.append(float(np.mean(ratio)))
        exact = _fit(bench, "secular", log, (LN_S,), math.log(found[0]) - bench.theta[LN_S], free, _FREE)
        found += [] if exact is None else [math.exp(exact[LN_S])]
    if "height" in bench.logs:
        found += _drag_free_heights(bench.logs["height"], role)
    return found


def _drag_free_heights(log: Readings, role: Mapping[str, float]) -> list[float]:
    """Mean over the drive voltages of s = 2 D Omega^2 / (A^2 V^2 slope)."""
    ratios = []
    for amplitude in np.unique(log.amplitude):
        own = log.amplitude == amplitude
        if np.ptp(log.voltage[own]) == 0.0:
            continue
        slope = role["gain_height"] * float(
            np.polyfit(log.voltage[own] * role["gain_dc_voltage"], log.observed[own], 1)[0]
        )
        drive = role["ac_gradient"] * role["gain_drive_voltage"] * float(amplitude)
        omega = float(np.mean(log.omega[own])) * role["gain_drive_frequency"]
        if slope != 0.0:
            ratios.append(abs(2.0 * role["dc_field"] * omega**2 / (drive**2 * slope)))
    return [float(np.mean(ratios))] if ratios else []


def _with_ratio(bench: _Bench, ratios: Sequence[float]) -> dict[str, tuple[float, ...]]:
    """What a wrong charge-to-mass ratio makes of the quantities computed from it."""
    values = {"charge_to_mass": tuple(ratios)}
    for quantity in ("charge", "surface_charge_density"):
        if quantity in bench.right and "charge_to_mass" in bench.right:
            right = bench.right["charge_to_mass"]
            values[quantity] = tuple(bench.right[quantity] * ratio / right for ratio in ratios)
    return values


def _with_rate(bench: _Bench, rate: float) -> dict[str, tuple[float, ...]]:
    """The same for a wrong drag rate."""
    return {"drag_rate": (rate,)} | _with_sizes(bench, bench.diameter(rate))


def _with_sizes(bench: _Bench, diameter: float) -> dict[str, tuple[float, ...]]:
    """The same for a wrong diameter: mass as d^3, charge as s m, surface charge density as s d."""
    if "diameter" not in bench.right or not math.isfinite(diameter):
        return {}
    ratio = diameter / bench.right["diameter"]
    powers = {"diameter": 1, "mass": 3, "charge": 3, "surface_charge_density": 1}
    return {one: (bench.right[one] * ratio**power,) for one, power in powers.items() if one in bench.right}


def _with_both(bench: _Bench, charge_to_mass: float, rate: float) -> dict[str, tuple[float, ...]]:
    """What is computed from both, both being wrong."""
    if "charge_to_mass" not in bench.right:
        return {}
    ratio = charge_to_mass / bench.right["charge_to_mass"]
    sizes = _with_sizes(bench, bench.diameter(rate))
    return {
        quantity: tuple(value * ratio for value in sizes[quantity])
        for quantity in ("charge", "surface_charge_density")
        if quantity in sizes
    }


def _joined(parts: Sequence[Mapping[str, tuple[float, ...]]]) -> dict[str, tuple[float, ...]]:
    found: dict[str, tuple[float, ...]] = {}
    for part in parts:
        for quantity, values in part.items():
            found[quantity] = (
                *found.get(quantity, ()),
                *(value for value in values if math.isfinite(value) and value > 0.0),
            )
    return found


def explaining(
    mistakes: Sequence[Mistake], quantity: str, claimed: float, *, half_unit: float, tolerance: float, misfit: float
) -> list[str]:
    """Codes of the mistakes that explain a claim, best first: none, one, or several that fit about equally well.

    A plain factor is named only where no step recomputed from the readings gives the claim.

    Parameters
    ----------
    mistakes : sequence of Mistake
        From `mistakes_of`.
    quantity : str
        What is claimed.
    claimed : float
        The claim, SI.
    half_unit : float
        Half a unit of its last digit, SI.
    tolerance : float
        By how much a number may differ for choices of analysis, relative.
    misfit : float
        How many tolerances the claim is off the right value.
    """
    best: dict[str, float] = {}
    for mistake in mistakes:
        for value in mistake.values.get(quantity, ()):
            off = max(0.0, abs(abs(claimed) - value) - half_unit) / (tolerance * value)
            if off <= 1.0 and off < 0.5 * misfit:
                best[mistake.code] = min(off, best.get(mistake.code, math.inf))
    best = {code: off for code, off in best.items() if code not in _PLAIN} or best
    ranked = sorted(best, key=lambda code: (best[code], code))
    limit = _CLEARER * max(best[ranked[0]], _LEAST) if ranked else 0.0
    return [code for code in ranked if best[code] <= limit]


def diameter_at(reduced: Reduced, index: int, reference: ParticleReference, drag_rate: float) -> float:
    """Diameter [m] of one particle that goes with a drag rate [1/s]; nan without a density."""
    return _Bench.of(reduced, index, reference).diameter(drag_rate)
