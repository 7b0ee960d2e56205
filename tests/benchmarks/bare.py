"""A bare reduction of a campaign folder, as a careful person would script it, importing nothing of the project.

    python tests/benchmarks/bare.py CAMPAIGN

It reads the simplest dialect (comma, decimal point, stated reading uncertainties, sessions with a balance log) and
prints, per particle, charge-to-mass ratio and drag rate with their standard uncertainties, and the core time it took.
Every particle by itself: generalised least squares on ln |s|, ln gamma and the height origin, with the covariance that
shared inputs cause; the exact motion; three starts; derivatives by finite differences. It is both the yardstick of cost
and an independent check of the numbers, so it takes its physics from the published formulas and not from the package.

Not in it, on purpose: response peaks, drift of the charge, estimated reading uncertainties, adjustment over a session.
"""

from __future__ import annotations

import csv
import math
import re
import sys
import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import yaml
from scipy.optimize import least_squares
from scipy.special import gamma as Gamma

# ---------------------------------------------------------------- gas and sphere
SUTHERLAND_K = 110.4
ETA_23, LAMBDA_23, T_23, P_ATM = 1.83245e-5, 67.3e-9, 296.15, 101325.0
KIM_2005 = (1.165, 0.483, 0.997)  # Kim, Mulholland, Kukuck and Pui, J. Res. NIST 110 (2005) 31


def air_density(temperature, pressure, humidity):
    """Return the density of moist air [kg/m3], CIPM-2007 (Metrologia 45 (2008) 149), 400 ppm of carbon dioxide."""
    t = temperature - 273.15
    saturation = np.exp(
        1.2378847e-5 * temperature**2 - 1.9121316e-2 * temperature + 33.93711047 - 6.3431645e3 / temperature
    )
    enhancement = 1.00062 + 3.14e-8 * pressure + 5.6e-7 * t**2
    x = min(humidity * enhancement * saturation / pressure, 1.0)
    z = (
        1
        - pressure
        / temperature
        * (
            1.58123e-6
            - 2.9331e-8 * t
            + 1.1043e-10 * t**2
            + (5.707e-6 - 2.051e-8 * t) * x
            + (1.9898e-4 - 2.376e-6 * t) * x**2
        )
        + (pressure / temperature) ** 2 * (1.83e-11 - 0.765e-8 * x**2)
    )
    return 3.483740e-3 * pressure / (z * temperature) * (1 - 0.3780 * x)


def viscosity(temperature):
    """Return the viscosity of air [Pa s], Sutherland through 18.3245 uPa s at 23 degrees Celsius."""
    return ETA_23 * (temperature / T_23) ** 1.5 * (T_23 + SUTHERLAND_K) / (temperature + SUTHERLAND_K)


def mean_free_path(temperature, pressure):
    """Return the mean free path [m], Willeke's scaling (J. Aerosol Sci. 7 (1976) 381)."""
    return (
        LAMBDA_23 * P_ATM / pressure * temperature / T_23 * (1 + SUTHERLAND_K / T_23) / (1 + SUTHERLAND_K / temperature)
    )


def slip(diameter, free_path, factor=1.0):
    """Return the slip correction [1]; `factor` scales its excess over one."""
    a, b, c = KIM_2005
    kn = 2 * free_path / diameter
    return 1 + factor * kn * (a + b * math.exp(-c / kn))


def normal_gravity(latitude_deg, elevation):
    """Return normal gravity [m/s2], WGS84 (NIMA TR8350.2)."""
    sine2 = np.sin(np.radians(latitude_deg)) ** 2
    surface = 9.7803253359 * (1 + 0.00193185265241 * sine2) / np.sqrt(1 - 0.00669437999014 * sine2)
    f, height = 1 / 298.257223563, elevation / 6378137
    return surface * (1 - 2 * (1 + f + 0.00344978650684 - 2 * f * sine2) * height + 3 * height**2)


def sphere(gamma, k):
    """Return the diameter [m] whose drag rate is `gamma` [1/s]: Newton on logarithms."""
    target = 18 * k["eta"] * k["chi"] / (k["rho"] * gamma)  # = d^2 C(d)
    d = math.sqrt(target)
    for _ in range(60):
        here = slip(d, k["path"], k["slip"])
        step = math.log(target / (d * d * here)) / (1 + 1 / here)  # C goes between 1 and 1/d
        d *= math.exp(step)
        if abs(step) < 1e-14:
            break
    return d


# ---------------------------------------------------------------- motion, in units of the drive
def dispersion(nu, b, mass, history):
    """Return D(nu), inertia and drag of a sphere in unsteady Stokes flow."""
    return -nu * nu * (1 + mass) + 1j * nu * b * (1 + history * np.sqrt(1j * nu))


def ladder(nu, step, h, b, mass, history, depth):
    """Return the ratios of neighbouring Fourier coefficients r_1 ... r_depth away from `nu`."""
    ratios, ratio = [], 0.0
    for n in range(depth, 0, -1):
        ratio = -h / (dispersion(nu + step * n, b, mass, history) + h * ratio)
        ratios.append(ratio)
    return ratios[::-1]


def depth_for(h):
    """Return how many Fourier coefficients matter."""
    return int(7 + 4 * np.sqrt(np.max(np.abs(h))))


def displacement(h, b, mass, history, streak):
    """Return mean height per force over mass and drive frequency squared, streak middle over mean, and |c1/c0|."""
    rungs = ladder(np.zeros_like(h, dtype=complex), 1, h, b, mass, history, depth_for(h))
    mean = 1 / (2 * h * rungs[0].real)
    if not streak:
        return mean, 1.0, np.abs(rungs[0])
    c = 2 * np.cumprod(np.array(rungs), axis=0)
    n = np.arange(1, len(rungs) + 1)
    theta = np.linspace(0, 2 * np.pi, 96, endpoint=False)
    wave = 1 + np.einsum("nj,nt->tj", c, np.exp(1j * np.outer(n, theta))).real
    ends = []
    for sign in (1, -1):
        at = theta[np.argmax(sign * wave, axis=0)]
        for _ in range(3):
            e = c * np.exp(1j * np.outer(n, at))
            at = at + np.sum(n[:, None] * e.imag, axis=0) / -np.sum((n**2)[:, None] * e.real, axis=0)
        ends.append(1 + np.sum(c * np.exp(1j * np.outer(n, at)), axis=0).real)
    return mean, (ends[0] + ends[1]) / 2, np.abs(rungs[0])


def reynolds_shift(mean, ratio, omega, motion, d, air, eta):
    """Return the relative shift of mean heights as finite Reynolds number adds to the drag.

    Schiller and Naumann's 0.15 Re^0.687 at the speed amplitude of the micromotion, 2 |c1/c0| Omega times the
    displacement, times the work it does over a cycle, 2 <|sin|^2.687>; that much more drag rate moves the height.
    """
    h, b, mass, history = motion
    work = 2 * Gamma(1.8435) / (np.sqrt(np.pi) * Gamma(2.3435))
    more = work * 0.15 * (air * 2 * ratio * omega * np.abs(mean) * d / eta) ** 0.687
    less_stiff = displacement(h, b * (1 + more), mass, history, streak=False)[0]
    return less_stiff / displacement(h, b, mass, history, streak=False)[0] - 1


def half_trace(h, b):
    """Return half the trace of the monodromy of u'' + (-b^2 - 8 h cos 2 tau) u = 0, a product of 2 x 2 exponentials.

    By symmetry half the period is enough: half the trace is 2 u1 u2' - 1 there. Magnus expansion of fourth order.
    """
    steps = int(48 + 16 * np.sqrt(np.max(h)))
    width = np.pi / 2 / steps
    m = np.zeros((len(h), 2, 2))
    m[:, 0, 0] = m[:, 1, 1] = 1
    for j in range(steps):
        t1, t2 = (j + 0.5 - np.sqrt(3) / 6) * width, (j + 0.5 + np.sqrt(3) / 6) * width
        a1, a2 = b * b + 8 * h * np.cos(2 * t1), b * b + 8 * h * np.cos(2 * t2)
        diagonal = np.sqrt(3) / 12 * width**2 * (a2 - a1)  # from the commutator of the two samples
        low = width * (a1 + a2) / 2
        root = np.sqrt((diagonal**2 + width * low).astype(complex))
        c, s = np.cosh(root).real, np.where(np.abs(root) < 1e-12, 1, np.sinh(root) / np.where(root == 0, 1, root)).real
        e = np.empty_like(m)
        e[:, 0, 0], e[:, 0, 1] = c - s * diagonal, s * width
        e[:, 1, 0], e[:, 1, 1] = s * low, c + s * diagonal
        m = e @ m
    return 2 * m[:, 0, 0] * m[:, 1, 1] - 1


def ring_down(h, b, mass, history, near=None):
    """Return the frequency [drive] at which the particle rings; 0 where it only relaxes, 1/2 where it is locked.

    The complex frequency at which the response diverges, by Newton from the steady problem's Floquet exponent, or from
    `near`, the answer of a problem close by. Also returned, to be handed in again.
    """
    start, rings = near, np.ones(len(h), dtype=bool)
    if near is None:
        trace = half_trace(h, b)
        rings = np.abs(trace) < 1
        start = np.arccos(np.clip(trace, -1, 1)) / (2 * np.pi) + 0.5j * b / (1 + mass)
    nu, depth, step = start, depth_for(h), np.array([[1.0], [-1.0], [1.0], [-1.0]])
    for _ in range(8):
        both = np.stack([nu, nu, nu + 1e-7, nu + 1e-7])
        rungs = ladder(both, step, h, b, mass, history, depth)[0]
        value = dispersion(both[::2], b, mass, history) + h * (rungs[::2] + rungs[1::2])
        change = value[0] * 1e-7 / (value[1] - value[0])
        nu = nu - change
        if np.max(np.abs(change)) < 1e-8:  # the next one would be some thousand times smaller
            break
    if near is not None and not (np.all(np.abs(nu - near) < 0.03) and np.all((nu.real > 0) & (nu.real < 0.5))):
        return ring_down(h, b, mass, history)
    return np.where(rings, np.clip(nu.real, 0, 0.5), start.real), (nu if rings.all() else None)


# ---------------------------------------------------------------- what was logged
def quantity(text):
    """Return (estimate, standard uncertainty) of a value as written in the settings."""
    if isinstance(text, dict):
        divisor = {"rectangular": 3, "triangular": 6, "arcsine": 2}
        u = text["u"] if "u" in text else text["half_width"] / np.sqrt(divisor[text["shape"]])
        return float(text["value"]), float(u)
    match = re.fullmatch(r"([-+]?\d*\.?(\d*))\((\d+)\)(e[-+]?\d+)?", str(text))
    if not match:
        return float(text), 0.0
    scale = float("1" + (match[4] or ""))
    return float(match[1]) * scale, int(match[3]) * 10.0 ** -len(match[2]) * scale


def pick(mapping, key, scale=1.0, offset=0.0):
    """Return a setting in SI."""
    value, u = quantity(mapping[key])
    return value * scale + offset, u * scale


def merged(below, above):
    """Return nested settings, what a session says itself on top."""
    out = dict(below)
    for key, value in above.items():
        out[key] = merged(out[key], value) if isinstance(value, dict) and isinstance(out.get(key), dict) else value
    return out


def rows(path, *, excluded=False):
    """Return the rows of a CSV file that enter, or those that are excluded."""
    if not path.exists():
        return []
    lines = [
        line for line in path.read_text(encoding="utf-8").splitlines() if line.strip() and not line.startswith("#")
    ]
    return [row for row in csv.DictReader(lines) if bool((row.get("exclude") or "").strip()) == excluded]


def numbers(table, *names):
    """Return a column by the first of its names, a drive column as peak."""
    for name in names:
        if table and name in table[0]:
            factor = np.sqrt(2) if "_rms_" in name else 0.5 if "_peak_to_peak_" in name else 1.0
            return factor * np.array([float(row[name]) for row in table])
    return np.zeros(len(table))


def drive(table):
    """Return drive amplitudes [V] and frequencies [rad/s] as read."""
    volts = numbers(table, "drive_voltage_peak_V", "drive_voltage_rms_V", "drive_voltage_peak_to_peak_V")
    return volts, 2 * np.pi * numbers(table, "drive_frequency_Hz")


def session_inputs(session, trap, species):
    """Return the shared inputs of a session, name -> (estimate, u), SI."""
    air, site, gain = session["air"], session["site"], session["gain"]
    if "gravity_m_per_s2" in site:
        g = pick(site, "gravity_m_per_s2")
    else:
        latitude, elevation = quantity(site["latitude_deg"]), quantity(site["elevation_m"])
        g = normal_gravity(latitude[0], elevation[0])
        moved = [
            normal_gravity(latitude[0] + latitude[1], elevation[0]),
            normal_gravity(latitude[0], elevation[0] + elevation[1]),
        ]
        g = g, float(np.sqrt((GRAVITY_U * g) ** 2 + sum((one - g) ** 2 for one in moved)))
    out = {
        "D": pick(trap, "dc_field_per_volt_per_m"),
        "A": pick(trap, "ac_gradient_per_volt_per_m2") if "ac_gradient_per_volt_per_m2" in trap else (1.0, 0.0),
        "E": pick(trap, "stray_field_V_per_m"),
        "T": pick(air, "temperature_degC", offset=273.15),
        "p": pick(air, "pressure_hPa", 100.0),
        "rh": pick(air, "relative_humidity_percent", 0.01),
        "g": g,
        "offset": pick(session["offset"], "dc_voltage_V"),
        "rho": pick(species, "density_kg_per_m3"),
        "viscosity": (1.0, VISCOSITY_U),
        "slip": (1.0, SLIP_U),
        "air_density": (1.0, CIPM_U if 60e3 <= quantity(air["pressure_hPa"])[0] * 100 <= 110e3 else MOIST_GAS_U),
        "reynolds": (0.0, 1.0),
    }
    for name in ("dc_voltage", "drive_voltage", "height", "diameter", "drive_frequency"):
        out["gain_" + name] = pick(gain, name) if name in gain else (1.0, 0.0)
    chi, u_chi = pick(species, "shape_factor")
    out["chi"] = chi, float(np.hypot(u_chi, species.get("shape_factor_spread", 0.0)))
    return out


# Spread of published viscosities, of slip sets; CIPM-2007 in and out of its range; local anomalies of gravity.
VISCOSITY_U, SLIP_U, CIPM_U, MOIST_GAS_U, GRAVITY_U = 2e-3, 3e-2, 22e-6, 1e-3, 5e-5


@dataclass
class Logged:
    """The readings of one particle and what surrounds them."""

    balance: list
    height: list
    secular: list
    own: dict
    session: dict
    species: dict
    polarity: int
    inputs: dict

    def prepare(self):
        """Put the logs into arrays, once."""
        reading = self.session.get("reading", {})
        self.names = [name for name, (_, u) in self.inputs.items() if u > 0]
        self.prior = {name: value for name, (value, _) in self.inputs.items()}
        self.u_inputs = np.array([self.inputs[name][1] for name in self.names])
        self.dc = numbers(self.height, "dc_voltage_V")
        self.height_drive, self.secular_drive = drive(self.height), drive(self.secular)
        self.streak = self.session.get("height_reading") == "streak_middle"
        if self.secular and self.session["secular_reading"] != "ring_down":
            self.secular = []
        sigma = {"balance_voltage_V": 0.0, "height_mm": 0.0, "secular_frequency_Hz": 0.0, "dc_voltage_V": 0.0}
        sigma.update({key: quantity(value)[0] for key, value in reading.items()})
        self.u_dc = (
            numbers(self.height, "u_dc_voltage_V")
            if self.height and "u_dc_voltage_V" in self.height[0]
            else sigma["dc_voltage_V"]
        )
        data, u = [], []
        for table, key, scale in (
            (self.balance, "balance_voltage_V", 1.0),
            (self.height, "height_mm", 1e-3),
            (self.secular, "secular_frequency_Hz", 1.0),
        ):
            data.append(numbers(table, key) * scale)
            stated = "u_" + key
            u.append(
                (numbers(table, stated) if table and stated in table[0] else np.full(len(table), sigma[key])) * scale
            )
        if self.own.get("diameter_um"):
            data.append([float(self.own["diameter_um"]) * 1e-6])
            u.append([float(self.own["u_diameter_um"]) * 1e-6])
        elif "diameter_um" in self.species:
            lot, u_lot = pick(self.species, "diameter_um", 1e-6)
            data.append([lot])
            u.append([np.hypot(u_lot, quantity(self.species["diameter_spread_um"])[0] * 1e-6)])
        self.data, self.u, self.near = np.concatenate(data), np.concatenate(u), None

    def model(self, theta, k):
        """Return what should have been read, and the slope of height against dc voltage."""
        s, gamma, origin = self.sign * np.exp(theta[0]), np.exp(theta[1]), theta[2] * 1e-3
        k = dict(k)
        air = k["air_density"] * air_density(k["T"], k["p"], k["rh"])
        k["eta"], k["path"] = k["viscosity"] * viscosity(k["T"]), mean_free_path(k["T"], k["p"])
        d = sphere(gamma, k)
        weight = k["g"] * (1 - air / k["rho"])
        added = air / (2 * k["rho"])
        out = [
            np.full(
                len(self.balance), (self.polarity * (weight / s - k["E"]) / k["D"] - k["offset"]) / k["gain_dc_voltage"]
            )
        ]
        slope = np.zeros(0)
        for table, (volts, omega), kind in (
            (self.height, self.height_drive, "height"),
            (self.secular, self.secular_drive, "secular"),
        ):
            if not table:
                continue
            omega = k["gain_drive_frequency"] * omega
            h = abs(s) * k["A"] * k["gain_drive_voltage"] * volts / (2 * omega**2)
            motion = h, gamma / omega, added * self.unsteady, self.unsteady * d / 2 * np.sqrt(omega * air / k["eta"])
            if kind == "secular":
                nu, self.near = ring_down(*motion, self.near)
                out.append(nu * omega / (2 * np.pi))
                continue
            response, factor, ratio = displacement(*motion, self.streak)
            response = response / omega**2
            field = k["D"] * self.polarity * (k["gain_dc_voltage"] * self.dc + k["offset"]) + k["E"]
            mean = (s * field - weight) * response
            shift = reynolds_shift(mean, ratio, omega, motion, d, air, k["eta"]) if k["reynolds"] else 0.0
            out.append((origin + mean * factor * (1 + k["reynolds"] * shift)) / k["gain_height"])
            slope = s * k["D"] * k["gain_dc_voltage"] * response * factor / k["gain_height"]
        if len(self.data) > len(self.balance) + len(self.height) + len(self.secular):
            lot = self.data[-1]  # sizes of a lot are spread in the logarithm
            out.append([d / k["gain_diameter"] if self.own.get("diameter_um") else lot * (1 + np.log(d / lot))])
        return np.concatenate(out), slope

    def sigma(self, theta):
        """Return u of each reading alone, that of the dc voltage carried along the slope of height."""
        _, slope = self.model(theta, self.prior)
        own, n = self.u.copy(), len(self.balance)
        own[n : n + len(slope)] = np.hypot(own[n : n + len(slope)], slope * self.u_dc)
        return own

    def start(self):
        """Return the sign, ln |s| of the median balance voltage, and ln gamma of the stated or an ordinary size."""
        k = self.prior
        volts = np.median(self.data[: len(self.balance)])
        field = k["D"] * self.polarity * (k["gain_dc_voltage"] * volts + k["offset"]) + k["E"]
        weight = k["g"] * (1 - air_density(k["T"], k["p"], k["rh"]) / k["rho"])
        d = self.data[-1] if len(self.data) > len(self.balance) + len(self.height) + len(self.secular) else 20e-6
        stokes = 18 * viscosity(k["T"]) * k["chi"] / (k["rho"] * d**2)
        return np.sign(field), np.log(weight / abs(field)), np.log(stokes / slip(d, mean_free_path(k["T"], k["p"])))

    def fit(self):
        """Return chi-square, ln |s|, ln gamma, origin [mm] and their covariance.

        From each of three starts with the shared inputs held; then, from the best, with the inputs as further unknowns
        that their stated values hold. That is generalised least squares with the covariance they cause, but linear in
        nothing. The weights follow the slope.
        """
        self.sign, ln_s, ln_gamma = self.start()
        free = 3 if self.height else 2
        best = None
        for factor in (0.5, 1.0, 2.0):
            theta = np.array([ln_s, ln_gamma + np.log(factor), 0.0])
            sigma = self.sigma(theta)

            def alone(x, sigma=sigma):
                return (self.model(np.append(x, np.zeros(3 - free)), self.prior)[0] - self.data) / sigma

            found = least_squares(alone, theta[:free], x_scale=[1e-2] * free)
            if best is None or found.cost < best.cost:
                best = found
        x = np.append(best.x, np.zeros(len(self.names)))
        for _ in range(2):
            sigma = self.sigma(np.append(x[:free], np.zeros(3 - free)))

            def together(x, sigma=sigma):
                k = dict(self.prior)
                for name, u, deviation in zip(self.names, self.u_inputs, x[free:], strict=True):
                    k[name] += u * deviation
                model = self.model(np.append(x[:free], np.zeros(3 - free)), k)[0]
                return np.append((model - self.data) / sigma, x[free:])

            scale = np.append([1e-2] * free, np.ones(len(self.names)))
            found = least_squares(together, x, x_scale=scale, xtol=1e-10, ftol=1e-12)
            x = found.x
        steps = 1e-4 * scale
        columns = [(together(x + move) - together(x - move)) / (2 * move.sum()) for move in np.diag(steps)]
        jacobian = np.array(columns).T
        covariance = np.linalg.inv(jacobian.T @ jacobian)[:free, :free]
        return 2 * found.cost, np.append(x[:free], np.zeros(3 - free)), covariance


def reduce(folder):
    """Yield session, particle, s, u(s), gamma, u(gamma) [SI], chi-square and core seconds of every particle."""
    folder = Path(folder)
    campaign = yaml.safe_load((folder / "campaign.yaml").read_text(encoding="utf-8")) or {}
    for place in sorted(folder.glob("sessions/[!.]*")):
        session = merged(
            campaign.get("every_session") or {}, yaml.safe_load((place / "session.yaml").read_text(encoding="utf-8"))
        )
        if session.get("exclude") or place.name in (campaign.get("leave_out") or {}):
            continue
        trap = yaml.safe_load((folder / f"traps/{session['trap']}.yaml").read_text(encoding="utf-8"))
        logs = {name: rows(place / f"{name}.csv") for name in ("balance", "height", "secular")}
        stated = {row["particle"]: row for row in rows(place / "particles.csv")}
        left_out = {row["particle"] for row in rows(place / "particles.csv", excluded=True)}
        for particle in sorted({row["particle"] for row in logs["balance"]} - left_out):
            own = stated.get(particle, {})
            species = yaml.safe_load(
                (folder / f"species/{own.get('species') or session['species']}.yaml").read_text(encoding="utf-8")
            )
            begun = time.process_time()
            mine = {name: [row for row in table if row["particle"] == particle] for name, table in logs.items()}
            logged = Logged(
                **mine,
                own=own,
                session=session,
                species=species,
                polarity=int(trap["dc_polarity"]),
                inputs=session_inputs(session, trap, species),
            )
            logged.unsteady = float(campaign.get("drag", "unsteady") == "unsteady")
            logged.prepare()
            chi_square, theta, covariance = logged.fit()
            s, gamma = logged.sign * np.exp(theta[0]), np.exp(theta[1])
            u = np.sqrt(np.diag(covariance))
            yield place.name, particle, s, abs(s) * u[0], gamma, gamma * u[1], chi_square, time.process_time() - begun


def main():
    """Print the reduction as CSV, core time last."""
    print(
        "session,particle,charge_to_mass_C_per_kg,u_charge_to_mass_C_per_kg,drag_rate_per_s,u_drag_rate_per_s,chi_square,core_s"
    )
    for session, particle, *values in reduce(sys.argv[1]):
        print(session, particle, *(f"{value:.9g}" for value in values), sep=",")


if __name__ == "__main__":
    main()
