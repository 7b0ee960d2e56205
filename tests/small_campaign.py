"""A small campaign in an invented laboratory, written out file by file so that a test can spoil one thing."""

from __future__ import annotations

from pathlib import Path

from reduction.check import check_campaign
from reduction.errors import Fault, Faults
from reduction.logs import Logs
from reduction.settings import Campaign

FILES = {
    "campaign.yaml": """\
title: Invented
every_session:
  air: {temperature_degC: 21.3(2), pressure_hPa: 1003.2(5), relative_humidity_percent: 41(3)}
  site: {gravity_m_per_s2: 9.8067(2)}
  gain: {dc_voltage: 1.002(1), drive_voltage: 1.00(1), height: 1.000(5)}
  offset: {dc_voltage_V: 0.0(3)}
  instruments: {dc_voltage: supply-2, height: camera-1}
""",
    "traps/ring-a.yaml": """\
dc_field_per_volt_per_m: 61.3(9)
ac_gradient_per_volt_per_m2: 1.310(20)e4
stray_field_V_per_m: 0(30)
dc_polarity: -1
usable_height_mm: 1.5
source: invented
""",
    "species/bead.yaml": """\
shape_factor: 1.02(1)
shape_factor_spread: 0.01
diameter_um: 20.3(2)
diameter_spread_um: 0.4
density_kg_per_m3: {value: 1050, half_width: 10, shape: rectangular}
""",
    "sessions/s001/session.yaml": """\
date: 2025-03-14
trap: ring-a
species: bead
charged_with: nylon
height_reading: time_average
secular_reading: ring_down
""",
    "sessions/s001/balance.csv": """\
particle,drive_voltage_peak_V,drive_frequency_Hz,balance_voltage_V,time_s
p01,400,50,120.5,0
p01,420,50,120.8,60
p02,420,50,-88.1,120
""",
    "sessions/s001/secular.csv": """\
particle,drive_voltage_peak_V,drive_frequency_Hz,secular_frequency_Hz
p01,400,50,11.2
""",
    "sessions/s001/height.csv": """\
particle,drive_voltage_peak_V,drive_frequency_Hz,dc_voltage_V,height_mm
p01,400,50,100,-0.413
p01,400,50,140,0.402
""",
}
SESSION, BALANCE, HEIGHT = "sessions/s001/session.yaml", "sessions/s001/balance.csv", "sessions/s001/height.csv"


def write(root: Path, files: dict[str, str | bytes | None] | None = None) -> Path:
    """Write the campaign, with some files replaced, added or (None) left out."""
    for name, text in (FILES | (files or {})).items():
        path = root / name
        if text is not None:
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return root


def check(root: Path, files: dict[str, str | bytes | None] | None = None) -> tuple[Campaign, dict[str, Logs], Faults]:
    """Write the campaign and check it."""
    return check_campaign(write(root, files))


def faults_of(root: Path, files: dict[str, str | bytes | None]) -> list[Fault]:
    """Faults of the campaign with some files replaced."""
    return list(check(root, files)[2])


def only_fault(root: Path, files: dict[str, str | bytes | None]) -> Fault:
    """Fault of a campaign that has exactly one."""
    faults = faults_of(root, files)
    assert len(faults) == 1, "\n".join(map(str, faults))
    return faults[0]


def changed(name: str, old: str, new: str) -> dict[str, str | bytes | None]:
    """One file with one text replaced."""
    assert FILES[name].count(old) == 1, old
    return {name: FILES[name].replace(old, new)}
