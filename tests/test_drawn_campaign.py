"""A campaign whose trap is a drawing: dimensions as shared inputs of every particle, and what departs from linear."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from drawn import DRAWING, draw
from edited import Edited, copied, method, particle
from scipy.optimize import brentq

from reduction import motion
from reduction.check import check_campaign
from reduction.digests import content, drawing_digest, drawings, session_inputs
from reduction.errors import Faults
from reduction.fieldmap import height_shift
from reduction.logs import read_logs
from reduction.methods import surroundings
from reduction.preparation import prepare
from reduction.session import reduce_session
from reduction.settings import load_campaign

DIMENSIONS = ["hole_radius", "plate_height", "plate_radius", "ring_radius", "wire_radius"]
RESULTS = ["charge_to_mass", "drag_rate", "mass", "charge"]


@pytest.fixture(scope="module")
def drawn(light, tmp_path_factory) -> Edited:
    """The light bead with its trap drawn."""
    made = copied(light, tmp_path_factory.mktemp("drawn") / "campaign")
    draw(trap_file(made))
    return made


def trap_file(made: Edited) -> Path:
    (path,) = (made.folder / "traps").glob("*.yaml")
    return path


@pytest.fixture(scope="module")
def kept(drawn, tmp_path_factory) -> Path:
    """Constants of the drawing, computed once for all tests here."""
    folder = tmp_path_factory.mktemp("kept")
    load_campaign(drawn.folder, faults=Faults(), keep=folder)
    return folder


def reduced(made: Edited, kept: Path | None = None):
    campaign, logs, faults = check_campaign(made.folder, keep=kept)
    assert not list(faults), "\n".join(map(str, faults))
    return reduce_session(campaign, "s001", logs["s001"])


@pytest.fixture(scope="module")
def record(drawn, kept):
    return reduced(drawn, kept)


def other(made: Edited, folder: Path, *pairs: tuple[str, str], drawing: str = DRAWING) -> Edited:
    """The same campaign with the drawing changed."""
    copy = copied(made.folder, folder)
    for old, new in pairs:
        assert drawing.count(old) == 1, old
        drawing = drawing.replace(old, new)
    text = trap_file(copy).read_text()
    trap_file(copy).write_text(text[: text.index("electrodes:")] + drawing)
    return copy


def test_dimensions_are_inputs_of_the_trap_in_every_table(record):
    inputs = record.tables["inputs"].set_index("input")
    name = "trap/lantern-a/ring_radius"
    row = inputs.loc[name]
    assert (row["scope"], row["owner"], row["unit"], row["shape"]) == ("trap", "lantern-a", "mm", "normal")
    assert (row["estimate"], row["u"]) == (pytest.approx(11.3), pytest.approx(0.06))
    assert inputs.loc["trap/lantern-a/wire_radius", "shape"] == "rectangular"
    assert inputs.loc["trap/lantern-a/plate_radius", "shape"] == "exact"
    assert not [one for one in inputs.index if "per_volt" in one]
    assert ["trap/lantern-a/plate_radius", "14.0", "mm"] in record.facts["exact_inputs"]
    for table in ("components", "budget"):
        rows = record.tables[table]
        rows = rows[rows["result"] == "charge_to_mass"]
        assert {"trap/lantern-a/plate_height", "trap/lantern-a/ring_radius"} <= set(rows["input"])
    height = record.tables["budget"]
    height = height[(height["result"] == "charge_to_mass") & (height["input"] == "trap/lantern-a/plate_height")]
    assert height["share"].iloc[0] > 0.5
    budget = record.tables["budget"].set_index(["result", "input"])["share"]
    assert budget["drag_rate", "trap/lantern-a/field_departure"] > 1e-3
    assert record.facts["trap_constants"]["dc_field_per_volt_per_m"]["estimate"] == pytest.approx(61.3, rel=0.01)


@pytest.mark.parametrize("adjust", ["session", "particle"])
@pytest.mark.parametrize("name", ["plate_height", "ring_radius", "wire_radius"])
def test_component_of_a_dimension_is_what_drawing_it_differently_does(drawn, kept, tmp_path, adjust, name):
    """Brute force: the drawing with one dimension larger by a fifth of its u is solved anew and all is readjusted."""
    changes = {
        "plate_height": ("8.00(5)", "8.01(5)", 0.2),
        "ring_radius": ("11.30(6)", "11.312(60)", 0.2),
        "wire_radius": ("{value: 1.00, half", "{value: 1.004, half", 0.2 * 3**0.5),
    }
    old, new, moved = changes[name]
    at = copied(drawn.folder, tmp_path / "at").campaign(adjust=adjust)
    base = reduced(at, kept)
    beside = reduced(other(at, tmp_path / "beside", (old, new)))
    rows = base.tables["components"]
    rows = rows[rows["input"] == f"trap/lantern-a/{name}"].set_index("result")["component"]
    columns = {"charge_to_mass": "charge_to_mass_C_per_kg", "drag_rate": "drag_rate_per_s", "mass": "mass_kg",
               "charge": "charge_C"}  # fmt: skip
    for result in RESULTS:
        before, after = (float(particle(one)[columns[result]]) for one in (base, beside))
        u = float(particle(base)[f"u_{columns[result]}"])
        component = float(rows.get(result, 0.0))
        # where q/m and mass pull a charge opposite ways the component is small: half a percent of u is asked for there
        assert after - before == pytest.approx(moved * component, abs=moved * max(0.02 * abs(component), 0.005 * u))


def test_drawn_and_stated_trap_give_the_same_values(drawn, kept, record, tmp_path):
    """The computed constants stated in the file: each method alone gives the same, and all together within 0.05 u."""
    campaign, _, _ = check_campaign(drawn.folder, keep=kept)
    trap = campaign.traps["lantern-a"]
    stated = copied(drawn.folder, tmp_path / "stated").trap(
        electrodes=None,
        dc_field_per_volt_per_m={"value": repr(trap.dc_field_per_volt.estimate), "u": repr(trap.dc_field_per_volt.u)},
        ac_gradient_per_volt_per_m2={
            "value": repr(trap.ac_gradient_per_volt.estimate), "u": repr(trap.ac_gradient_per_volt.u),
        },
    )  # fmt: skip
    by_constants = reduced(stated)
    for which in ("balance", "height", "diameter"):
        one, two = method(record, which), method(by_constants, which)
        for column in ("charge_to_mass_C_per_kg", "drag_rate_per_s", "height_origin_mm"):
            np.testing.assert_allclose(one[column], two[column], rtol=1e-9)
    one, two = particle(record), particle(by_constants)
    columns = ("charge_to_mass_C_per_kg", "drag_rate_per_s", "mass_kg", "charge_C")
    for column in columns:
        assert one[column] == pytest.approx(two[column], abs=0.05 * two[f"u_{column}"])
    assert one["flags"] == two["flags"]
    # What the drawing knows and two constants in a file cannot: that D and A are wrong together, u^2 + 2 rho c_D c_A.
    budget = by_constants.tables["budget"].set_index(["result", "input"])["component"]
    for result, column in zip(RESULTS, columns, strict=True):
        parts = [budget.get((result, f"trap/lantern-a/{key}"), 0.0)
                 for key in ("dc_field_per_volt_per_m", "ac_gradient_per_volt_per_m2")]  # fmt: skip
        together = two[f"u_{column}"] ** 2 + 2.0 * trap.constants.correlation * parts[0] * parts[1]
        assert one[f"u_{column}"] == pytest.approx(together**0.5, rel=0.02)


def test_components_of_two_sessions_share_the_dimension_by_name(drawn, kept, tmp_path):
    both = copied(drawn.folder, tmp_path / "both")
    (both.folder / "sessions" / "s002").mkdir()
    for path in (both.folder / "sessions" / "s001").iterdir():
        (both.folder / "sessions" / "s002" / path.name).write_bytes(path.read_bytes())
    campaign, logs, faults = check_campaign(both.folder, keep=kept)
    assert not list(faults)
    rows = pd.concat([reduce_session(campaign, name, logs[name]).tables["components"] for name in ("s001", "s002")])
    rows = rows[(rows["result"] == "charge_to_mass") & (rows["input"] == "trap/lantern-a/plate_height")]
    assert list(rows["session"]) == ["s001", "s002"]
    assert rows["component"].nunique() == 1


# ----- the field's departure from the linear one


def departing(kept: Path, folder: Path, factor: float) -> Path:
    """Kept constants whose field departs `factor` times as much from the linear one."""
    folder.mkdir()
    (path,) = kept.glob("*.json")
    content = json.loads(path.read_text())
    for key in ("drive_terms", "dc_terms"):
        content[key] = [factor * one for one in content[key]]
    (folder / path.name).write_text(json.dumps(content))
    return folder


def in_the_true_field(made: Edited, kept: Path, s: float, gamma: float) -> Edited:
    """Heights of a particle of that s and gamma as the departing field makes them: the balance of forces solved anew.

    Mean force of the drive as e e', e = z (1 + c_1 z + ...): Landau and Lifshitz, Mechanics, section 30.
    """
    campaign = load_campaign(made.folder, faults=Faults(), keep=kept)
    trap, session = campaign.traps["lantern-a"], campaign.sessions["s001"]
    table = read_logs(made.folder, "s001", faults=Faults()).tables["height"]
    dc_field, gradient = trap.dc_field_per_volt.estimate, trap.ac_gradient_per_volt.estimate
    weight = weight_of(campaign)

    def relative(terms, z):
        return 1.0 + sum(one * z**power for power, one in enumerate(terms, 1))

    def field(z):
        return z * relative(trap.constants.drive_terms, z)

    rows = []
    for row, (_, read) in zip(made.rows("height"), table.iterrows(), strict=True):
        omega = 2.0 * np.pi * read["drive_frequency"]
        h = s * gradient * session.gain["drive_voltage"].estimate * read["drive_amplitude"] / (2.0 * omega**2)
        spring = omega**2 * float(np.squeeze(motion.stiffness(h, gamma / omega, 0.0, 0.0)))
        force = s * dc_field * session.gain["dc_voltage"].estimate * read["dc_voltage"]
        linear = (force - weight) / spring

        def unbalanced(z, spring=spring, force=force):
            slope = (field(z + 1e-7) - field(z - 1e-7)) / 2e-7
            return spring * field(z) * slope - force * relative(trap.constants.dc_terms, z) + weight

        shift = brentq(unbalanced, linear - 3e-4, linear + 3e-4) - linear
        rows.append({**row, "height_mm": repr(float(row["height_mm"]) + 1e3 * shift)})
    return made.write("height", rows)


def weight_of(campaign) -> float:
    """Apparent gravity of the session's particles [m/s2]."""
    session = campaign.sessions["s001"]
    one = prepare(campaign, session, read_logs(campaign.folder, "s001", faults=Faults())).setting
    around = surroundings(one, np.zeros((1, 1, len(one.uncertain))))
    density = campaign.species[session.species].density.estimate
    return float(around.gravity[0, 0] * (1.0 - around.air_density[0, 0] / density))


def test_departure_is_a_component_unless_it_is_corrected_for(drawn, kept, tmp_path):
    strong = departing(kept, tmp_path / "strong", 12.0)
    made = copied(drawn.folder, tmp_path / "campaign").trap(usable_height_mm=5)
    # written anew as plain YAML, which the digest takes for another drawing: keep the constants under its name
    (kept_file,) = strong.glob("*.json")
    kept_file.rename(strong / f"{drawing_digest(content(trap_file(made)))}.json")
    plain = reduced(made, strong)
    s, gamma = (float(particle(plain)[column]) for column in ("charge_to_mass_C_per_kg", "drag_rate_per_s"))
    made = in_the_true_field(made, strong, s, gamma)
    component = reduced(made, strong)
    corrected = reduced(made.trap(electrodes={"departure": "corrected"}), strong)
    assert component.facts["field_departure"]["largest_shift_mm"] > 0.03
    column = "drag_rate_per_s"
    before, left, mended = (float(particle(one)[column]) for one in (plain, component, corrected))
    u_left, u_mended = (float(particle(one)[f"u_{column}"]) for one in (component, corrected))
    assert abs(mended - before) < 0.1 * u_mended  # what it was in the linear field
    assert abs(left - before) < u_left  # within the component, which the readings themselves narrow
    found = component.tables["inputs"].set_index("input").loc["trap/lantern-a/field_departure"]
    assert (found["estimate"], found["u"]) == (0.0, 1.0)
    assert found["adjusted_estimate"] == pytest.approx(1.0, abs=0.25)  # as the readings tell
    # A method by itself holds inputs at their estimates: only corrected heights give it the drag rate.
    alone = [float(method(one, "height")[column]) for one in (plain, component, corrected)]
    assert abs(alone[2] - alone[0]) < 0.25 * abs(alone[1] - alone[0])
    assert any("not corrected for it" in note for note in component.facts["notes"])
    assert any("corrected for it to first order" in note for note in corrected.facts["notes"])
    inputs = corrected.tables["inputs"].set_index("input").loc["trap/lantern-a/field_departure"]
    assert (inputs["estimate"], inputs["u"]) == (1.0, 0.1)


def test_heights_shifted_by_more_than_a_twentieth_are_flagged(drawn, kept, tmp_path):
    strong = departing(kept, tmp_path / "strong", 30.0)
    record = reduced(drawn, strong)
    assert "field_departure" in particle(record)["flags"].split(";")
    readings = record.tables["readings"]
    assert readings["flags"].str.contains("field_departure").any()


def test_usable_height_is_the_computed_one_unless_stated(drawn, kept, tmp_path):
    campaign = load_campaign(drawn.folder, faults=Faults(), keep=kept)
    assert campaign.traps["lantern-a"].usable_height == 0.6e-3  # stated in the file
    text = trap_file(drawn).read_text()
    made = copied(drawn.folder, tmp_path / "campaign")
    trap_file(made).write_text("".join(line for line in text.splitlines(True) if "usable_height" not in line))
    computed = load_campaign(made.folder, faults=Faults(), keep=kept).traps["lantern-a"].usable_height
    assert 0.3e-3 < computed < 1.2e-3
    assert computed == campaign.traps["lantern-a"].constants.usable_height


def test_a_trap_that_no_session_names_is_not_solved(drawn, kept, tmp_path):
    made = copied(drawn.folder, tmp_path / "campaign")
    (made.folder / "traps" / "spare.yaml").write_text(trap_file(drawn).read_text().replace("8.00(5)", "7.50(5)"))
    campaign = load_campaign(made.folder, faults=Faults(), keep=kept)
    assert sorted(campaign.traps) == ["lantern-a"]
    assert len(list(kept.iterdir())) == 1


def test_digests_follow_the_drawing(drawn, tmp_path):
    made = copied(drawn.folder, tmp_path / "campaign")
    path = trap_file(made)
    text, (name,) = path.read_text(), drawings(made.folder).values()
    before = session_inputs(made.folder, ["s001"])
    for new in (text + "# a remark\n", text.replace("stray_field_V_per_m: 0(40)", "stray_field_V_per_m: 0(41)"),
                text.replace("dc_applied", "departure: corrected\n  dc_applied")):  # fmt: skip
        assert new != text
        path.write_text(new)
        assert set(drawings(made.folder).values()) == {name}
    assert session_inputs(made.folder, ["s001"]) != before
    for new in (text.replace("8.00(5)", "8.00(6)"), text.replace("mirrored: yes", "mirrored: no")):
        path.write_text(new)
        assert set(drawings(made.folder).values()) != {name}
        assert session_inputs(made.folder, ["s001"]) != before
    path.write_text("dc_polarity: 1\n")
    assert drawings(made.folder) == {}


def test_shift_comes_from_the_terms_of_the_field(drawn, kept):
    campaign = load_campaign(drawn.folder, faults=Faults(), keep=kept)
    made = campaign.traps["lantern-a"].field_map
    z, lift = np.array([4e-4]), np.array([0.02])
    # To leading order 4 c_2 z^3 of the drive against W d_2 z^2 of dc, Landau and Lifshitz, Mechanics, section 30.
    leading = -4.0 * made.drive[1] * z**3 + lift * made.dc[1] * z**2
    np.testing.assert_allclose(height_shift(z, lift, made.drive, made.dc), leading, rtol=0.05)
    none = replace(made, drive=(), dc=())
    assert height_shift(z, lift, none.drive, none.dc) == 0.0
