from pathlib import Path

import jsonschema
import pytest
import yaml
from small_campaign import FILES, SESSION, changed, faults_of

from reduction.contract import FILES as TABLES
from reduction.contract import Key
from reduction.entries import read_entries
from reduction.errors import Faults
from reduction.schemas import schema, texts
from reduction.yamlfile import Mapping, Scalar

ROOT = Path(__file__).parents[1]
KIND = {"campaign.yaml": "campaign", "traps/ring-a.yaml": "trap", "species/bead.yaml": "species", SESSION: "session"}


class EditorLoader(yaml.SafeLoader):
    """YAML as editors see it: dates stay texts, numbers and booleans are read as such."""


EditorLoader.yaml_implicit_resolvers = {
    first: [(tag, pattern) for tag, pattern in resolvers if tag != "tag:yaml.org,2002:timestamp"]
    for first, resolvers in yaml.SafeLoader.yaml_implicit_resolvers.items()
}


def complaints(kind: str, text: str) -> list[str]:
    content = EditorLoader(text).get_single_data()
    return [error.message for error in jsonschema.Draft202012Validator(schema(kind)).iter_errors(content)]


def test_the_files_are_those_of_the_table_of_keys():
    # To renew: python -c 'import pathlib, reduction.schemas as s; s.write_schemas(pathlib.Path("workflow/schemas"))'
    folder = ROOT / "workflow" / "schemas"
    assert {path.name: path.read_text() for path in folder.glob("*.json")} == texts()


@pytest.mark.parametrize("kind", sorted(TABLES))
def test_each_is_a_schema_that_refuses_other_keys(kind):
    made = schema(kind)
    jsonschema.Draft202012Validator.check_schema(made)
    assert made["additionalProperties"] is False
    assert complaints(kind, "unheard_of: 1") != []


@pytest.mark.parametrize("kind", sorted(TABLES))
def test_every_key_is_described_with_its_unit(kind):
    def described(properties):
        for name, value in properties.items():
            assert value["description"].endswith("."), name
            described(value.get("properties", {}))

    described(schema(kind)["properties"])
    if kind == "trap":
        assert "1e6 um" in schema(kind)["properties"]["usable_height_um"]["description"]


@pytest.mark.parametrize("name", sorted(KIND))
def test_the_small_campaign_passes(name):
    assert complaints(KIND[name], FILES[name]) == []


EXAMPLES = sorted(path for path in (ROOT / "data_example").rglob("*.yaml") if path.stem != "scheme")


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_the_example_passes(path):
    kind = {"traps": "trap", "species": "species"}.get(path.parent.name, path.stem)
    assert complaints(kind, path.read_text()) == []


@pytest.mark.parametrize(
    ("name", "old", "new"),
    [
        ("campaign.yaml", "title:", "titel:"),
        ("campaign.yaml", "title: Invented", "title: [a]"),
        ("campaign.yaml", "title: Invented", "adjust: everything"),
        ("campaign.yaml", "title: Invented", "drag: turbulent"),
        ("campaign.yaml", "title: Invented", "mass_from: guess"),
        ("campaign.yaml", "title: Invented", "lot: ignored"),
        ("campaign.yaml", "title: Invented", "scatter: hidden"),
        ("campaign.yaml", "title: Invented", "when_a_session_fails: weep"),
        ("campaign.yaml", "title: Invented", "coverage_probability: 95"),
        ("campaign.yaml", "title: Invented", "coverage_probability: 0"),
        ("campaign.yaml", "title: Invented", "monte_carlo_trials: 10"),
        ("campaign.yaml", "title: Invented", "monte_carlo_trials: 100.5"),
        ("campaign.yaml", "title: Invented", "seed: -1"),
        ("campaign.yaml", "title: Invented", "sessions: s001"),
        ("campaign.yaml", "title: Invented", "sessions: []"),
        ("campaign.yaml", "title: Invented", "sessions: [s001, s001]"),
        ("campaign.yaml", "title: Invented", "leave_out: [s001]"),
        ("campaign.yaml", "title: Invented", "compare: {quantity: mass}"),
        ("campaign.yaml", "title: Invented", "compare: {with: glass}"),
        ("campaign.yaml", "pressure_hPa", "pressure"),
        ("campaign.yaml", "pressure_hPa", "pressure_psi"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: 1003, pressure_kPa: 100.3"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: 100320"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: high"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: 1003.2(5"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: [1003]"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: true"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: {u: 1}"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: {value: 1003, u: -1}"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: {value: 1003, u: 1, dof: 0}"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: {value: 1003, dof: 5}"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: {value: 1003, half_width: 1}"),
        ("campaign.yaml", "pressure_hPa: 1003.2(5)", "pressure_hPa: {value: 1003, half_width: 1, shape: normal}"),
        (
            "campaign.yaml",
            "pressure_hPa: 1003.2(5)",
            "pressure_hPa: {value: 1003, half_width: 1, u: 1, shape: arcsine}",
        ),
        ("campaign.yaml", "drive_voltage: 1.00(1)", "drive_voltage: 0"),
        ("campaign.yaml", "drive_voltage: 1.00(1)", "voltage: 1"),
        ("campaign.yaml", "height: camera-1", "height: camera 1"),
        ("traps/ring-a.yaml", "61.3(9)", "-61.3"),
        ("traps/ring-a.yaml", "dc_field_per_volt_per_m: 61.3(9)\n", ""),
        ("traps/ring-a.yaml", "stray_field_V_per_m: 0(30)\n", ""),
        ("traps/ring-a.yaml", "dc_polarity: -1", "dc_polarity: 2"),
        ("traps/ring-a.yaml", "1.5", "1.5(1)"),
        ("traps/ring-a.yaml", "1.5", "1001"),
        ("species/bead.yaml", "shape_factor: 1.02(1)\n", ""),
        ("species/bead.yaml", "20.3(2)", "0"),
        ("species/bead.yaml", "diameter_spread_um: 0.4", "diameter_spread_um: 0"),
        ("species/bead.yaml", "shape: rectangular", "shape: box"),
        (SESSION, "2025-03-14", "14.03.2025"),
        (SESSION, "ring-a", "../ring-a"),
        (SESSION, "time_average", "mean"),
        (SESSION, "ring_down", "guess"),
        (SESSION, "charged_with: nylon", "charged_with: nylon\ncontacts: -1"),
        (SESSION, "charged_with: nylon", "charged_with: nylon\nreading: {height_mm: 0}"),
        (SESSION, "charged_with: nylon", "charged_with: nylon\nair: 20"),
        (SESSION, "charged_with: nylon", "charged_with: nylon\nattributes: {a b: c}"),
        (SESSION, "charged_with: nylon", "charged_with: nylon\nexclude: [smoke]"),
    ],
)
def test_what_breaks_a_rule_fails_in_the_schema_and_in_the_check(tmp_path, name, old, new):
    spoilt = changed(name, old, new)
    assert complaints(KIND[name], spoilt[name]) != []
    assert name in {fault.path for fault in faults_of(tmp_path, spoilt)}


VALUES = {
    "quantity": "1.0(1)",
    "number": "1",
    "text": "x",
    "reason": "x",
    "id": "x",
    "date": "2025-03-14",
    "integer": "1000",
}


@pytest.mark.parametrize("kind", sorted(TABLES))
def test_every_key_of_the_schema_is_a_key_of_the_reader(kind):
    def compare(properties, keys: tuple[Key, ...]):
        stems = {key.stem: key for key in keys}
        for name, value in properties.items():
            faults = Faults()
            mapping = Mapping({name: Scalar("", 1, False)}, {name: 1})
            (stem,) = read_entries(mapping, keys, "x", faults=faults)
            assert list(faults) == [], name
            compare(value.get("properties", {}), stems[stem].keys)
        assert {key.name for key in keys} <= set(properties)

    compare(schema(kind)["properties"], TABLES[kind])


def test_bounds_follow_the_unit_of_the_key():
    air = schema("session")["properties"]["air"]["properties"]
    assert (air["temperature_K"]["minimum"], air["temperature_K"]["maximum"]) == (1, 1000)
    assert (air["temperature_degC"]["minimum"], air["temperature_degC"]["maximum"]) == (-272.15, 726.85)
    assert air["pressure_kPa"]["maximum"] == 200
