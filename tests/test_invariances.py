"""What must not matter: names, order, units, and a common scale of voltages and trap constants."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from edited import copied, scaled

from reduction.quantity import read_quantity

COLUMNS = ("charge_to_mass_C_per_kg", "drag_rate_per_s", "diameter_um", "mass_kg", "charge_e")
LOGS = ("balance", "height", "secular")
REGIMES = ("pair", "dense", "low_pressure")
NEAR = 1e-5  # of u: the adjustment stops within 1e-6 of it


@pytest.fixture(scope="module")
def plain(request, tmp_path_factory):
    """Each regime reduced as it is, once."""
    kept = {}

    def reduce(regime):
        if regime not in kept:
            place = tmp_path_factory.mktemp("plain") / regime
            kept[regime] = copied(request.getfixturevalue(regime), place).reduce()
        return kept[regime]

    return reduce


def over(text, scale):
    """Quantity in the shorthand, value and u times a factor."""
    quantity = read_quantity(str(text))
    return {"value": quantity.estimate * scale, "u": quantity.u * scale}


def logs_of(campaign):
    return [log for log in LOGS if campaign.path(log).exists()]


def same(record, other, names=None):
    """Assert equal results within a small part of their uncertainty."""
    left, right = (one.tables["particles"].set_index("particle") for one in (record, other))
    if names:
        right = right.rename(index=names)
    for name in left.index:
        for column in COLUMNS:
            u = right.loc[name, f"u_{column}"]
            assert left.loc[name, column] == pytest.approx(right.loc[name, column], abs=NEAR * u), column
            assert left.loc[name, f"u_{column}"] == pytest.approx(u, rel=NEAR), column
        assert left.loc[name, "chi_square"] == pytest.approx(right.loc[name, "chi_square"], rel=1e-5)
        assert left.loc[name, "flags"] == right.loc[name, "flags"]


DRAWN = ["mass_low_kg", "mass_high_kg", "charge_low_e", "charge_high_e"]  # random numbers belong to names


def test_names_of_particles_change_no_digit_but_of_what_is_drawn(edit, request, plain):
    new = {"p01": "4", "p02": "a-2"}
    campaign = edit(request.getfixturevalue("pair"))
    for log in logs_of(campaign):
        campaign.each(log, lambda row: row | {"particle": new[row["particle"]]})
    found, expected = (one.tables["particles"].drop(columns="particle") for one in (campaign.reduce(), plain("pair")))
    pd.testing.assert_frame_equal(found.drop(columns=DRAWN), expected.drop(columns=DRAWN), check_exact=True)
    u = expected[["u_mass_kg", "u_mass_kg", "u_charge_e", "u_charge_e"]].to_numpy()
    # the ends of an interval from 20,000 draws are good to some 2 % of u
    assert np.abs((found[DRAWN].to_numpy() - expected[DRAWN].to_numpy()) / u).max() < 0.1


@pytest.mark.parametrize("regime", REGIMES)
def test_the_order_of_rows_does_not_matter(edit, request, plain, regime):
    campaign = edit(request.getfixturevalue(regime))
    for log in logs_of(campaign):
        rows = campaign.rows(log)
        campaign.write(log, rows[::-1][1::2] + rows[::-1][::2])
    same(campaign.reduce(), plain(regime))


def test_particles_in_another_order_of_names_are_the_same(edit, request, plain):
    campaign = edit(request.getfixturevalue("pair"))
    for log in logs_of(campaign):
        campaign.each(log, lambda row: row | {"particle": {"p01": "z", "p02": "a"}[row["particle"]]})
    same(campaign.reduce(), plain("pair"), {"p01": "z", "p02": "a"})


@pytest.mark.parametrize("regime", REGIMES)
def test_units_of_columns_and_keys_do_not_matter(edit, request, plain, regime):
    factors = {
        "height_mm": ("height_um", 1e3),
        "dc_voltage_V": ("dc_voltage_kV", 1e-3),
        "balance_voltage_V": ("balance_voltage_mV", 1e3),
        "drive_voltage_peak_V": ("drive_voltage_peak_kV", 1e-3),
        "secular_frequency_Hz": ("secular_frequency_kHz", 1e-3),
        "time_s": ("time_min", 1 / 60),
    }
    campaign = edit(request.getfixturevalue(regime))
    for log in logs_of(campaign):
        campaign.each(
            log,
            lambda row: {
                factors.get(head, (head, 1))[0]: scaled(cell, factors[head][1]) if head in factors else cell
                for head, cell in row.items()
            },
        )
    pressure = over(campaign.read("sessions/s001/session")["air"]["pressure_hPa"], 0.1)
    campaign.session(air={"pressure_hPa": None, "pressure_kPa": pressure})
    same(campaign.reduce(), plain(regime))


@pytest.mark.parametrize("regime", REGIMES)
def test_a_common_scale_of_voltages_and_trap_constants_cancels(edit, request, plain, regime):
    scale = 1.25  # of every voltage; every constant per volt goes over it, so the fields stay
    campaign = edit(request.getfixturevalue(regime))
    for log in logs_of(campaign):
        campaign.each(
            log, lambda row: {head: scaled(cell, scale) if head.endswith("_V") else cell for head, cell in row.items()}
        )
    trap, session = campaign.read(f"traps/{campaign.only_name('traps')}"), campaign.read("sessions/s001/session")
    campaign.trap(
        **{key: over(trap[key], 1 / scale) for key in ("dc_field_per_volt_per_m", "ac_gradient_per_volt_per_m2")}
    )
    campaign.session(
        offset={"dc_voltage_V": over(session["offset"]["dc_voltage_V"], scale)},
        reading={key: value * scale for key, value in session["reading"].items() if key.endswith("_V")},
    )
    same(campaign.reduce(), plain(regime))
