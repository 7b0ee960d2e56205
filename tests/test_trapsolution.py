"""From a drawing to trap constants: sensitivities against solving anew, keeping, and that bad input gives no number."""

import json

import numpy as np
import pytest
from drawn import TEXT, changed, drawing_of

from reduction import trapsolution
from reduction.electrodes import solve
from reduction.errors import Faults
from reduction.meridian import NotConverged
from reduction.tolerances import monte_carlo
from reduction.trapconstants import CHANGE, from_plain
from reduction.trapsolution import computed, constants_of
from reduction.trapwords import gradient_off_at


@pytest.fixture(scope="module")
def drawing(tmp_path_factory):
    return drawing_of(tmp_path_factory.mktemp("drawing"))


@pytest.fixture(scope="module")
def found(drawing):
    return computed(drawing)


def test_constants_are_those_of_the_solver(drawing, found):
    field = solve(drawing.electrodes(drawing.nominal))
    assert (found.dc_field, found.ac_gradient) == (field.dc_field_per_volt, field.ac_gradient_per_volt)
    assert found.solution_u == field.numerical_u < 1e-6
    # The field on the axis as the terms have it, and as the solution itself has it.
    z = np.array([-1.5e-3, 0.8e-3])
    axis = field.axis(found.centre + z)
    drive = sum(one * z**power for power, one in enumerate(found.drive_terms, 1))
    dc = sum(one * z**power for power, one in enumerate(found.dc_terms, 1))
    np.testing.assert_allclose(
        found.ac_gradient * z * (1 + drive), axis.drive_field * np.sign(axis.drive_field * z), rtol=1e-7
    )
    np.testing.assert_allclose(found.dc_field * (1 + dc), axis.dc_field, rtol=1e-7)


def test_first_order_in_the_dimensions_holds_against_solving_anew(drawing, found):
    """All dimensions moved together by draws of their u: D and A within a twentieth of their u of the linear map."""
    field_map, random = found.field_map, np.random.default_rng(4)
    dc_u, ac_u = found.relative_u
    draws = drawing.nominal + drawing.u * random.standard_normal((24, len(drawing.names)))
    anew = monte_carlo(drawing.electrodes, draws, field=solve(drawing.electrodes(drawing.nominal)))
    for values, (ln_dc, ln_ac, _) in zip(draws, anew, strict=True):
        at = {role: np.array([[one]]) for role, one in zip(field_map.roles, values, strict=True)}
        dc, ac = (float(one[0, 0]) for one in field_map.constants(at | {"field_solution": np.ones((1, 1))}))
        assert np.log(dc) - ln_dc == pytest.approx(0.0, abs=0.05 * dc_u)
        assert np.log(ac) - ln_ac == pytest.approx(0.0, abs=0.05 * ac_u)


def test_u_of_each_constant_is_the_root_sum_of_squares_of_the_parts(found):
    dc, ac = found.relative_u
    parts = np.array([one.parts for one in found.dimensions])
    assert dc == pytest.approx(np.hypot(np.linalg.norm(parts[:, 0]), found.solution_u), rel=1e-12)
    both = found.quantities()
    assert both[1].u == pytest.approx(ac * both[1].estimate, rel=1e-12)
    assert found.correlation == pytest.approx(parts[:, 0] @ parts[:, 1] / (dc * ac), abs=1e-6)
    assert found.without("plate_radius") == found.relative_u  # exact already
    assert found.without("plate_height")[0] < 0.2 * dc


def test_usable_height_is_where_the_gradient_is_off_by_one_percent(found):
    assert abs(gradient_off_at(found, found.usable_height)) == pytest.approx(CHANGE, rel=1e-3)


def test_scale_of_the_drawing_scales_the_constants(tmp_path, found):
    """D goes as 1/length and A as 1/length squared, whatever the drawing: Laplace's equation has no length."""
    half = TEXT
    for old, new in (("11.30(6)", "5.65(3)"), ("1.00, half_width: 0.02", "0.50, half_width: 0.01"),
                     ("8.00(5)", "4.000(25)"),
                     ("1.00(3)", "0.500(15)"), ("14.0", "7"), ("2]]", "1]]"), ("40], [30, 40", "20], [15, 20"),
                     ("[30, -39], [0, -39]", "[15, -19.5], [0, -19.5]")):  # fmt: skip
        assert half.count(old) == 1, old
        half = half.replace(old, new)
    small = computed(drawing_of(tmp_path, half))
    assert small.dc_field == pytest.approx(2 * found.dc_field, rel=1e-8)
    assert small.ac_gradient == pytest.approx(4 * found.ac_gradient, rel=1e-8)
    assert small.usable_height == pytest.approx(found.usable_height / 2, rel=1e-5)
    assert small.relative_u == pytest.approx(found.relative_u, rel=1e-4)


def test_constants_are_kept_and_not_computed_twice(tmp_path, drawing, found, monkeypatch):
    monkeypatch.setattr(trapsolution, "computed", lambda drawing: found)
    faults = Faults()
    first = constants_of(drawing, "x", faults=faults, keep=tmp_path / "traps", name="abc")
    assert [path.name for path in (tmp_path / "traps").iterdir()] == ["abc.json"]
    monkeypatch.delattr(trapsolution, "computed")
    assert constants_of(drawing, "x", faults=faults, keep=tmp_path / "traps", name="abc") == first == found
    assert len(faults) == 0


def test_kept_constants_are_the_computed_ones_to_the_last_digit(found):
    assert from_plain(json.loads(json.dumps(found.to_plain()))) == found


def test_a_solution_that_does_not_settle_is_a_fault_and_no_number(tmp_path, drawing, monkeypatch):
    def fails(electrodes):
        raise NotConverged("the field has not settled: draw fewer fine details")

    monkeypatch.setattr(trapsolution, "solve", fails)
    faults = Faults()
    assert constants_of(drawing, "traps/ring-a.yaml", faults=faults, keep=tmp_path, name="abc") is None
    (fault,) = faults
    assert (fault.path, fault.line, fault.column) == ("traps/ring-a.yaml", 3, "electrodes")
    assert "has not settled" in fault.found
    assert list(tmp_path.iterdir()) == []


def test_a_drive_without_a_centre_is_a_fault(tmp_path):
    """A drive on the upper of two rings alone, far from the middle, pushes everywhere one way along the axis inside."""
    text = changed(("circle: {centre: [ring_radius, 0], radius: wire_radius}",
                    "outline: [[0, 30], [ring_radius, 30], [ring_radius, [30, wire_radius]], "
                    "[0, [30, wire_radius]]]"))  # fmt: skip
    faults = Faults()
    assert constants_of(drawing_of(tmp_path, text), "x", faults=faults) is None
    assert "vanishes nowhere" in next(iter(faults)).found


def test_a_tolerance_that_spoils_the_drawing_is_a_fault(tmp_path):
    drawing = drawing_of(tmp_path, changed(("hole_radius: 1.00(3)", "hole_radius: 1.00(5.00)")))
    faults = Faults()
    assert constants_of(drawing, "x", faults=faults) is None
    (fault,) = faults
    assert fault.column == "electrodes.conductors.plate"
    assert "with one dimension off by its own u it reaches across the axis" in fault.found


def test_faults_of_the_outlines_stop_before_anything_is_solved(tmp_path, monkeypatch):
    from drawn import read

    drawing, _ = read(tmp_path, changed(("plate_height: 8.00(5)", "plate_height: 0.50(5)")))
    monkeypatch.delattr(trapsolution, "computed")
    faults = Faults()
    assert constants_of(drawing, "x", faults=faults) is None
    assert len(faults) >= 1
