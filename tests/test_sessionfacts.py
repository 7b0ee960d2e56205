"""Facts of a session that the comparison rests on: what is a particle's own, what could be held, what was lost."""

from __future__ import annotations

import math
import shutil
from pathlib import Path

import pytest

from reduction import motion
from reduction.check import check_campaign
from reduction.session import reduce_session
from reduction.units import ELEMENTARY_CHARGE

EXAMPLE = Path(__file__).resolve().parent.parent / "data_example"


@pytest.mark.parametrize("adjust", ["session", "particle"])
def test_own_part_of_a_charge_is_that_of_the_components(pair: Path, tmp_path: Path, adjust: str) -> None:
    folder = shutil.copytree(pair, tmp_path / "c")
    path = folder / "campaign.yaml"
    path.write_text(path.read_text() + f"\nadjust: {adjust}\n")
    campaign, logs, _ = check_campaign(folder)
    (session,) = campaign.session_ids
    record = reduce_session(campaign, session, logs[session])
    parts = record.tables["components"]
    masses = record.facts["masses"]
    assert len(masses) == 2
    for name, entries in masses.items():
        own = parts[(parts["particle"] == name) & (parts["result"] == "charge") & (parts["scope"] == "particle")]
        u = math.sqrt(float((own["component"] ** 2).sum())) / ELEMENTARY_CHARGE
        by_way = {entry["mass_from"]: entry for entry in entries}
        assert by_way["adjusted"]["u_own_charge_e"] == pytest.approx(u, rel=1e-6)
        assert all(0.0 < entry["u_own_charge_e"] < entry["u_charge_e"] for entry in entries)


def test_window_and_lost_particles_of_the_example_are_told() -> None:
    campaign, logs, _ = check_campaign(EXAMPLE)
    facts = reduce_session(campaign, "s003", logs["s003"]).facts
    assert [(one["particle"], one["reason"]) for one in facts["lost"]] == [
        ("x01", "struck an electrode"), ("x02", "struck an electrode"),
    ]  # fmt: skip
    for low, high in (facts["window"]["positive_C_per_kg"], facts["window"]["negative_C_per_kg"]):
        assert 0.0 < low < high
    # Drag only widens the stable region (common practice), and the gentlest drive holds the largest ratio.
    trap = campaign.traps[campaign.sessions["s003"].trap]
    drives = [table for name, table in logs["s003"].tables.items() if name != "lost"]
    ends = [
        2.0 * (2.0 * math.pi * f) ** 2 * float(motion.stability_limit(0.0)) / (trap.ac_gradient_per_volt.estimate * v)  # type: ignore[union-attr]
        for table in drives
        for v, f in zip(table["drive_amplitude"], table["drive_frequency"], strict=True)
    ]
    assert facts["window"]["positive_C_per_kg"][1] > 0.99 * max(ends)
