"""The inputs that several readings share: what each is called, what shares it, and how well it is known."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from reduction import air, drag, gravity
from reduction.errors import Fault, InputError
from reduction.fieldmap import CORRECTION_U
from reduction.quantity import Quantity
from reduction.settings import Campaign, Session, Species, Trap

CELSIUS_ZERO = 273.15
DIMENSION = "dimension:"  # and its name: the role of a dimension of the electrodes
DEPARTURE = {"component": Quantity(0.0, 1.0), "corrected": Quantity(1.0, CORRECTION_U)}
"""How much of the estimated shift of a height by the field's departure is true."""


@dataclass(frozen=True)
class Input:
    """One input of the measurement equations that more than one reading depends on.

    `role` is the variable of the equations it feeds, with the species behind a colon where it belongs to one.
    Estimate and u are SI; `unit`, `factor` and `zero` give the unit of its key: SI = zero + factor * written.
    """

    name: str
    scope: str
    owner: str
    role: str
    quantity: Quantity
    unit: str
    factor: float = 1.0
    zero: float = 0.0

    @property
    def written(self) -> float:
        """Estimate in the unit of the key."""
        return self.in_unit(self.quantity.estimate)

    @property
    def written_u(self) -> float:
        """Standard uncertainty in the unit of the key."""
        return self.quantity.u / self.factor

    def in_unit(self, value: float) -> float:
        """Convert a value from SI into the unit of the key."""
        return (value - self.zero) / self.factor


def _input(
    scope: str,
    owner: str,
    key: str,
    role: str,
    quantity: Quantity,
    unit: str = "1",
    factor: float = 1.0,
    zero: float = 0.0,
) -> Input:
    return Input(f"{scope}/{owner}/{key}", scope, owner, role, quantity, unit, factor, zero)


def _relative(u: float) -> Quantity:
    return Quantity(1.0, u)


def species_of(campaign: Campaign, session: Session, names: Sequence[str]) -> tuple[Species, ...]:
    """Species that the particles of a session name, each once, sorted."""
    return tuple(campaign.species[name] for name in sorted(set(names) or {session.species}))


def _instrument_inputs(session: Session) -> Iterator[Input]:
    def owner(kind: str) -> tuple[str, str]:
        name = session.instruments.get(kind, "")
        return ("instrument", name) if name else ("session", session.id)

    for kind in ("dc_voltage", "drive_voltage", "height", "diameter", "drive_frequency"):
        quantity = session.gain.get(kind)
        if quantity is not None:
            yield _input(*owner(kind), f"gain_{kind}", f"gain_{kind}", quantity)
    quantity = session.offset.get("dc_voltage")
    if quantity is not None:
        yield _input(*owner("dc_voltage"), "offset_dc_voltage_V", "offset_dc_voltage", quantity, "V")
    scope, name = owner("air")
    yield _input(scope, name, "temperature_degC", "temperature", session.air.temperature, "degC", zero=CELSIUS_ZERO)
    yield _input(scope, name, "pressure_hPa", "pressure", session.air.pressure, "hPa", 100.0)
    yield _input(scope, name, "relative_humidity_percent", "humidity", session.air.relative_humidity, "percent", 0.01)


def _site_inputs(session: Session) -> Iterator[Input]:
    site = session.site
    if site.gravity is not None:
        yield _input("session", session.id, "gravity_m_per_s2", "gravity", site.gravity, "m/s2")
        return
    assert site.latitude is not None  # the check demands one form or the other
    assert site.elevation is not None
    yield _input("session", session.id, "latitude_deg", "latitude", site.latitude, "deg", math.pi / 180.0)
    yield _input("session", session.id, "elevation_m", "elevation", site.elevation, "m")
    yield _input("campaign", "", "normal_gravity_formula", "gravity_formula", _relative(gravity.RELATIVE_U))


def _species_inputs(species: Species, *, lot: bool) -> Iterator[Input]:
    key = species.id
    yield _input("species", key, "shape_factor", f"shape_factor:{key}", species.shape_factor)
    if species.density is not None:
        yield _input("species", key, "density_kg_per_m3", f"density:{key}", species.density, "kg/m3")
    if lot and species.diameter is not None and species.diameter_spread is not None:
        yield _input("species", key, "diameter_um", f"lot_diameter:{key}", species.diameter, "um", 1e-6)


def shared_inputs(campaign: Campaign, session: Session, species: Sequence[Species]) -> tuple[Input, ...]:
    """All shared inputs of one session, exact ones among them, sorted by name.

    Scopes say what shares an input: the trap, the species, an instrument named by several sessions, the session, or
    the campaign (published formulas with their published u). The stray field is drawn anew each session, although it
    stands in the trap's file.
    """
    trap = campaign.traps[session.trap]
    found = [
        *_trap_inputs(trap),
        _input("session", session.id, "stray_field_V_per_m", "stray_field", trap.stray_field, "V/m"),
    ]
    found += _instrument_inputs(session)
    found += _site_inputs(session)
    for one in species:
        found += _species_inputs(one, lot=campaign.options.lot == "prior" or campaign.options.mass_from == "diameter")
    found += _formula_inputs(session)
    found.append(_input("session", session.id, "finite_reynolds", "finite_reynolds", Quantity(0.0, 1.0)))
    return tuple(sorted(found, key=lambda one: one.name))


def _trap_inputs(trap: Trap) -> Iterator[Input]:
    """The constants as stated; or, from a drawing, its dimensions, the solution's own u and the field's departure."""
    if trap.drawing is not None and trap.constants is None:
        message = f"trap {trap.id}: nothing follows from its drawing; motescale check says why"
        raise InputError([Fault(f"traps/{trap.id}.yaml", column="electrodes", found=message)])
    if trap.drawing is None or trap.constants is None:
        yield _input("trap", trap.id, "dc_field_per_volt_per_m", "dc_field", trap.dc_field_per_volt, "1/m")
        if trap.ac_gradient_per_volt is not None:
            yield _input(
                "trap", trap.id, "ac_gradient_per_volt_per_m2", "ac_gradient", trap.ac_gradient_per_volt, "1/m2"
            )
        return
    for name, quantity in trap.drawing.dimensions.items():
        yield _input("trap", trap.id, name, DIMENSION + name, quantity, "mm", 1e-3)
    yield _input("trap", trap.id, "field_solution", "field_solution", _relative(trap.constants.solution_u))
    yield _input("trap", trap.id, "field_departure", "field_departure", DEPARTURE[trap.drawing.departure])


def _formula_inputs(session: Session) -> Iterator[Input]:
    """Published formulas: one error over the campaign within their range, the session's own beyond it."""
    temperature, pressure = session.air.temperature.estimate, session.air.pressure.estimate
    usual = {
        "viscosity_formula": air.VISCOSITY_RELATIVE_U,
        "slip_formula": drag.SLIP_RELATIVE_U,
        "air_density_formula": air.CIPM_RELATIVE_U,
    }
    here = usual | {
        "viscosity_formula": float(air.viscosity_relative_u(temperature)),
        "air_density_formula": float(air.density_relative_u(temperature, pressure)),
    }
    for key, u in here.items():
        scope, owner = ("campaign", "") if u == usual[key] else ("session", session.id)
        yield _input(scope, owner, key, key, _relative(u))
