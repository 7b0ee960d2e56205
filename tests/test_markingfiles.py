"""Files of marking: how they are read, and that every fault is told with its place. The contract is the project's."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest
from marked import HEAD, SCHEME, marking_of, write_marking
from small_campaign import FILES, SESSION, write

GOOD = "s001,p01,charge_to_mass,1.234e-3,C_per_kg,0.022e-3,2\n"


def campaign(root: Path, files: dict[str, str], *, leave_out: bool = False) -> Path:
    text = FILES["campaign.yaml"] + ("when_a_session_fails: leave_out\n" if leave_out else "")
    folder = write(root / "c", {"campaign.yaml": text})
    shutil.copytree(folder / "sessions" / "s001", folder / "sessions" / "s002")
    return write_marking(folder, files)


def claims(root: Path, text: str) -> list[str]:
    return [str(fault) for fault in marking_of(campaign(root, {"claims.csv": text}))[1]]


def test_a_campaign_without_a_scheme_is_not_marked(tmp_path: Path) -> None:
    assert marking_of(write(tmp_path / "c")) == (None, [])


def test_claims_without_a_scheme_are_a_fault(tmp_path: Path) -> None:
    folder = campaign(tmp_path, {"claims.csv": HEAD + GOOD})
    (folder / "marking" / "scheme.yaml").unlink()
    found, faults = marking_of(folder)
    assert found is None
    assert "no such file, but marking/claims.csv" in str(faults[0])


def test_units_uncertainty_and_coverage_factor_are_read(tmp_path: Path) -> None:
    rows = "s001,p01,charge_to_mass,1.234,mC_per_kg,0.022,2\ns001,p01,charge,-21967,e,1300,1.96\n"
    rows += "s002,p01,diameter,20.1,um,,\n"
    found, faults = marking_of(campaign(tmp_path, {"claims.csv": HEAD + rows}))
    assert not faults
    ratio, charge = found.claims["s001"]
    assert (ratio.value, ratio.expanded_uncertainty, ratio.coverage_factor) == pytest.approx((1.234e-3, 0.022e-3, 2.0))
    assert ratio.value_text == "1.234"
    assert charge.value == pytest.approx(-21967 * 1.602176634e-19)  # the elementary charge is exact in the SI
    assert charge.standard_uncertainty == pytest.approx(1300 * 1.602176634e-19 / 1.96)
    assert found.claims["s002"][0].standard_uncertainty is None


@pytest.mark.parametrize(
    "text",
    [
        HEAD.replace(",", ";") + "s001;p01;charge_to_mass;1,234e-3;C_per_kg;0,022e-3;2\n",
        "\ufeff"
        + HEAD.replace(",", "\t")
        + "# a comment\r\n\r\ns001\tp01\tcharge_to_mass\t1.234e-3\tC/kg\t0.022e-3\t2\r\n",
        "note," + HEAD + "mine," + GOOD,
    ],
    ids=["semicolon", "tab", "own column"],
)
def test_dialects_are_those_of_the_logs(tmp_path: Path, text: str) -> None:
    found, faults = marking_of(campaign(tmp_path, {"claims.csv": text}))
    assert not faults
    assert found.claims["s001"][0].value == pytest.approx(1.234e-3)
    assert found.claims["s001"][0].expanded_uncertainty == pytest.approx(0.022e-3)


def test_benches_may_write_different_decimal_marks(tmp_path: Path) -> None:
    rows = "s001;p01;charge_to_mass;1,234e-3;C/kg;0,022e-3;2\ns002;p01;charge_to_mass;1.234e-3;C/kg;0.022e-3;2\n"
    found, faults = marking_of(campaign(tmp_path, {"claims.csv": HEAD.replace(",", ";") + rows}))
    assert not faults
    assert found.claims["s001"][0].value == found.claims["s002"][0].value == pytest.approx(1.234e-3)


def test_claims_may_lie_in_the_session_without_its_name(tmp_path: Path) -> None:
    folder = campaign(tmp_path, {})
    (folder / "sessions/s001/claims.csv").write_text((HEAD + GOOD).replace("session,", "").replace("s001,", ""))
    found, faults = marking_of(folder)
    assert not faults
    assert [one.quantity for one in found.claims["s001"]] == ["charge_to_mass"]
    assert found.claims["s002"] == ()


@pytest.mark.parametrize(
    ("row", "told"),
    [
        (GOOD + GOOD, "line 3, quantity: found charge_to_mass of p01 again, first on line 2; expected one claim"),
        (GOOD.replace("s001", "s01"), "line 2, session: found s01; expected the name of a folder in sessions/."),
        (GOOD.replace("p01", "p09"), "line 2, particle: found p09; expected a particle that the bench has logged"),
        (GOOD.replace("charge_to_mass", "charge_to_mas"), "line 2, quantity: found charge_to_mas; expected one of"),
        (GOOD.replace("C_per_kg", ""), "line 2, unit: found nothing; expected one of C_per_g"),
        (GOOD.replace("C_per_kg", "C_per_kk"), "Did you mean C_per_kg?"),
        (GOOD.replace("0.022e-3", "0"), "line 2, expanded_uncertainty: found 0; expected a number above 0"),
        (GOOD.replace("0.022e-3", "-0.1"), "line 2, expanded_uncertainty: found -0.1; expected a number above 0"),
        (GOOD.replace("0.022e-3,2", ",2"), "line 2, expanded_uncertainty: found nothing; expected the expanded"),
        (GOOD.replace(",2\n", ",0\n"), "line 2, coverage_factor: found 0; expected a number above 0"),
        (GOOD.replace("1.234e-3", "about 1e-3"), "line 2, value: found about 1e-3; expected a number"),
        (GOOD.replace("1.234e-3", "1.2 mC/kg"), "The unit belongs in the column unit."),
        (GOOD.replace("1.234e-3", "1.2 ± 0.1"), "The uncertainty belongs in expanded_uncertainty."),
        (GOOD.replace("1.234e-3", "=B2/C2"), "line 2, value: found =B2/C2; expected a number. That is a formula"),
        (GOOD.replace("s001", "=A1"), "line 2, session: found =A1; expected the name of a folder"),
        (GOOD.replace("1.234e-3", ""), "a missing claim is none"),
        (GOOD.replace("1.234e-3", "1e999"), "line 2, value: found 1e999; expected a finite number"),
        ("s001,p01,mass,-1,kg,,\n", "line 2, value: found -1; expected a number above 0. A mass has no sign."),
        ("s001,p01,agreement_balance_height,0.3,,,\n", "line 2, unit: found nothing; expected 1"),
        ("s001,p01,component_stray_field,0.3,C_per_kg,,\n", "expected percent or 1: the component over the value"),
        ("s001,p01,charge_to_mass,1\n", "line 2: found 4 fields; expected 7 as in the head"),
    ],
)  # fmt: skip
def test_a_fault_of_a_claim_is_told_with_its_place(tmp_path: Path, row: str, told: str) -> None:
    (fault,) = claims(tmp_path, HEAD + row)
    assert fault.startswith("marking/claims.csv line ")
    assert told in fault


@pytest.mark.parametrize("head", ["expanded_uncertanty", "value_C"])
def test_a_misspelt_column_is_a_fault(tmp_path: Path, head: str) -> None:
    wrong = HEAD.replace("expanded_uncertainty", head) if "cert" in head else HEAD.replace("value", head)
    found = claims(tmp_path, wrong + GOOD)
    assert any("marking/claims.csv line 1" in one for one in found)


def test_claims_in_two_places_are_a_fault(tmp_path: Path) -> None:
    folder = campaign(tmp_path, {"claims.csv": HEAD + GOOD})
    (folder / "sessions/s001/claims.csv").write_text(HEAD + GOOD)
    assert "claims here and in marking/claims.csv" in str(marking_of(folder)[1][0])


def test_one_bad_bench_does_not_stop_the_others_where_asked(tmp_path: Path) -> None:
    rows = GOOD + GOOD.replace("s001", "s002").replace("C_per_kg", "") + "s009,p01,mass,1,kg,,\n"
    people = "session,name\ns001,Ada Example\n"
    folder = campaign(tmp_path, {"claims.csv": HEAD + rows, "register.csv": people}, leave_out=True)
    found, faults = marking_of(folder)
    assert not faults
    assert sorted(found.faulty) == ["s002", "s009"]
    texts = "\n".join(str(fault) for fault in found.faulty["s002"])
    assert "marking/claims.csv line 3, unit" in texts
    assert "marking/register.csv line 2, session: found no row for s002" in texts
    assert len(found.claims["s001"]) == 1


def test_a_row_of_another_length_belongs_to_the_bench_it_names(tmp_path: Path) -> None:
    folder = campaign(tmp_path, {"claims.csv": HEAD + GOOD + "s002,p01,mass,1\n"}, leave_out=True)
    found, faults = marking_of(folder)
    assert not faults
    assert list(found.faulty) == ["s002"]


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("session,name\ns001,Ada\n", "line 2, session: found no row for s002"),
        ("session,name\ns001,Ada\ns002,\n", "line 3, name: found nothing; expected the name of a person"),
        ("session,name\ns001,Ada\ns002,Bo\ns003,Cy\n", "line 4, session: found s003; expected the name of a folder"),
        ("session,name\ns001,Ada\ns002,=1+1\n", "line 3, name: found =1+1; expected a text. That is a formula"),
        ("session,name,email\ns001,Ada,a@b\ns002,Bo,A@B\n", "line 3, email: found A@B again, first on line 2"),
        ("session,nam\ns001,Ada\ns002,Bo\n", "line 1, nam: found an unknown column"),
    ],
)
def test_a_fault_of_the_register_is_told_with_its_place(tmp_path: Path, text: str, told: str) -> None:
    faults = [str(fault) for fault in marking_of(campaign(tmp_path, {"register.csv": text}))[1]]
    assert any(told in fault and fault.startswith("marking/register.csv") for fault in faults), faults


@pytest.mark.parametrize(
    ("row", "told"),
    [
        ("s001,valu,1,why,me", "line 2, criterion: found valu; expected one of readings, value"),
        ("s001,value,9,why,me", "line 2, marks: found 9; expected from 0 to 8"),
        ("s001,value,-1,why,me", "line 2, marks: found -1; expected from 0 to 8"),
        ("s001,value,x,why,me", "line 2, marks: found x; expected a number"),
        ("s001,value,1,,me", "line 2, reason: found nothing; expected why the marks were set"),
        ("s001,value,1,why,", "line 2, by: found nothing; expected who set them"),
        ("s001,value,1,why,me\ns001,value,2,why,me", "line 3, criterion: found value again, first on line 2"),
        ("s009,value,1,why,me", "line 2, session: found s009"),
    ],
)
def test_a_fault_of_an_override_is_told_with_its_place(tmp_path: Path, row: str, told: str) -> None:
    text = f"session,criterion,marks,reason,by\n{row}\n"
    (fault,) = map(str, marking_of(campaign(tmp_path, {"overrides.csv": text}))[1])
    assert fault.startswith("marking/overrides.csv")
    assert told in fault


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ("total: 20", "total: 21", "line 1, total: found 21; expected 20, the sum"),
        ("total: 20", "totl: 20", "Did you mean total?"),
        ("value:  ", "valeu:  ", "criteria.valeu: found an unknown criterion"),
        ("quantity: charge_to_mass", "quantity: charge_mass", "Did you mean charge_to_mass?"),
        ("full_within: 1", "full_witin: 1", "Did you mean full_within?"),
        ("full_within: 1", "full_within: 4", "found full_within 4 and none_beyond 3"),
        ("[0.5, 2.0]", "[2.0, 0.5]", "expected two numbers such as [0.5, 2]"),
        ("[0.5, 2.0]", "[1.5, 2.0]", "expected ratio_between around 1"),
        ("{marks: 2}\n  sign", "{marks: none}\n  sign", "criteria.rounding.marks: found none; expected a number"),
        ("balance_at_least: 5, height_at_least: 12", "", "found no number of readings"),
        ("claim_tolerance_percent: 2", "claim_tolerance_percent: 0", "line 8, claim_tolerance_percent: found 0"),
        ("show_reduction: no", "show_reduction: perhaps", "line 9, show_reduction: found perhaps"),
        ("  sign:        {marks: 2}", "  sign:        {marks: 2, quantity: mass}", "found mass, which has no sign"),
        ("  sign:        {marks: 2}", "  agreement: {marks: 2, between: [balance, hight]}", "Did you mean height?"),
    ],
)  # fmt: skip
def test_a_fault_of_the_scheme_always_stops(tmp_path: Path, old: str, new: str, told: str) -> None:
    assert SCHEME.count(old) == 1
    folder = campaign(tmp_path, {"scheme.yaml": SCHEME.replace(old, new)}, leave_out=True)
    found, faults = marking_of(folder)
    assert found is None
    assert any(told in str(fault) and fault.path == "marking/scheme.yaml" for fault in faults), faults


def test_quantities_left_out_are_those_of_the_value_with_the_same_word(tmp_path: Path) -> None:
    text = "total: 6\ncriteria:\n" + "".join(
        f"  {name}: {{marks: 1{more}}}\n"
        for name, more in (
            ("value", ", quantity: charge_to_mass"),
            ("value_mass", ", quantity: mass"),
            ("rounding_mass", ""),
            ("unit_other", ""),
            ("agreement", ", between: [balance, height]"),
            ("budget", ""),
        )
    )
    found, faults = marking_of(campaign(tmp_path, {"scheme.yaml": text + "claim_tolerance_percent: 2\n"}))
    assert not faults
    assert {name: one.quantity for name, one in found.scheme.criteria.items()} == {
        "value": "charge_to_mass", "value_mass": "mass", "rounding_mass": "mass", "unit_other": "charge_to_mass",
        "agreement": "", "budget": "charge_to_mass",
    }  # fmt: skip


def test_no_damage_to_a_file_of_marking_makes_a_traceback(tmp_path: Path) -> None:
    damages = [b"", b"\x00\x01", b"\xff\xfe\x00", b"a" * 5000, b'"', b";;;\n;;;", b"session\n", b"[1, 2", b"- a\n- b\n"]
    for name in ("scheme.yaml", "claims.csv", "register.csv", "overrides.csv"):
        folder = campaign(tmp_path / name.replace(".", ""), {"claims.csv": HEAD + GOOD})
        for damage in damages:
            (folder / "marking" / name).write_bytes(damage)
            marking_of(folder)


def test_session_that_is_left_out_is_no_bench(tmp_path: Path) -> None:
    folder = campaign(tmp_path, {"claims.csv": HEAD + GOOD.replace("s001", "s002")})
    (folder / "campaign.yaml").write_text(FILES["campaign.yaml"] + "leave_out: {s002: did not come}\n")
    found, faults = marking_of(folder)
    assert not faults
    assert list(found.claims) == ["s001"]
    assert (folder / SESSION).is_file()
