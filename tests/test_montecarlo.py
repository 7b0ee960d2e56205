"""Joint draws against exact distributions and first-order limits; and what they must not depend on."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy import stats
from test_adjustment import solved, without_noise

from reduction import budget
from reduction.adjustment import adjust_alone, adjust_together
from reduction.budget import RESULTS, OwnSize, effective_dof, interval, results_of
from reduction.montecarlo import known_results, result_draws, result_intervals
from reduction.normalequations import Model
from reduction.quantity import Quantity
from reduction.shapes import draws, spread_factor, symmetric_ends
from reduction.simulation import simulate_campaign
from reduction.simulationplan import Plan

TRIALS = 20_000
MASS = RESULTS.index("mass")


def campaign(place, regime="room_air_light", **habits):
    simulate_campaign(place / "campaign", plan=Plan(regimes=(regime,), sessions=1, particles=3, **habits), seed=7)
    return place / "campaign"


@pytest.fixture(scope="module", params=["room_air_light", "room_air_dense", "low_pressure"])
def reduced(request, tmp_path_factory):
    return solved(campaign(tmp_path_factory.mktemp(request.param), request.param), "s001")


@pytest.fixture(scope="module")
def light(tmp_path_factory):
    return solved(campaign(tmp_path_factory.mktemp("light")), "s001")


def together(one):
    return results_of(adjust_together([one.alone.model], [one.alone.theta])[0], alone=False)


def alone(one):
    return results_of(one.alone, alone=True)


def intervals(results, names, *, log_dof=None, trials=TRIALS, seed=1, **more):
    return result_intervals(
        results, session="s001", names=names, log_dof=log_dof or {}, trials=trials, seed=seed, coverage=0.95, **more
    )


def drawn(results, names, *, log_dof=None, trials=TRIALS, seed=1, **more):
    return list(
        result_draws(results, session="s001", names=names, log_dof=log_dof or {}, trials=trials, seed=seed, **more)
    )


def smaller(model: Model, theta, by: float) -> Model:
    """Readings without noise that the particles at theta would give, every u of inputs and readings made smaller."""
    model = without_noise(model, theta)
    inputs = tuple(replace(one, quantity=replace(one.quantity, u=one.quantity.u * by)) for one in model.setting.inputs)
    logs = {name: replace(log, u=log.u * by, u_voltage=log.u_voltage * by) for name, log in model.logs.items()}
    setting = replace(model.setting, inputs=inputs, shape_spread=model.setting.shape_spread * by)
    return replace(model, setting=setting, logs=logs)


# --- shapes -----------------------------------------------------------------------------------------------------------

SHAPES = [
    (Quantity(0.0, 1.0), stats.norm()),
    (Quantity(0.0, 1.0, "normal", 7.0), stats.t(7.0)),
    (Quantity(0.0, 1.0, "rectangular"), stats.uniform(-math.sqrt(3.0), 2.0 * math.sqrt(3.0))),
    (Quantity(0.0, 1.0, "triangular"), stats.triang(0.5, -math.sqrt(6.0), 2.0 * math.sqrt(6.0))),
    (Quantity(0.0, 1.0, "arcsine"), stats.arcsine(-math.sqrt(2.0), 2.0 * math.sqrt(2.0))),
]


@pytest.mark.parametrize(("quantity", "expected"), SHAPES, ids=lambda one: getattr(one, "shape", ""))
def test_draws_have_the_distribution_of_their_shape(quantity, expected):
    sample = draws(quantity, seed=3, name="trap/ring-a/dc_field_per_volt_per_m", trials=100_000)
    assert stats.kstest(sample, expected.cdf).pvalue > 0.001
    assert sample.mean() == pytest.approx(0.0, abs=4.0 * expected.std() / math.sqrt(1e5))
    assert sample.std() == pytest.approx(expected.std(), rel=0.015)


def test_variance_factor_makes_normal_draws_students():
    normal = draws(Quantity(0.0, 1.0), seed=3, name="a", trials=100_000)
    factor = spread_factor(5.0, seed=3, name="b", trials=100_000)
    assert stats.kstest(normal * factor, stats.t(5.0).cdf).pvalue > 0.001


@pytest.mark.parametrize("quantity", [one for one, _ in SHAPES], ids=lambda one: one.shape)
def test_more_trials_continue_the_same_draws(quantity):
    few, many = (draws(quantity, seed=3, name="x", trials=count) for count in (1000, 5000))
    assert np.array_equal(few, many[:1000])


def test_draws_belong_to_seed_and_name():
    first, again, other_name, other_seed = (
        draws(Quantity(0.0, 1.0), seed=seed, name=name, trials=2000)
        for seed, name in ((3, "x"), (3, "x"), (3, "y"), (4, "x"))
    )
    assert np.array_equal(first, again)
    for other in (other_name, other_seed):
        assert abs(np.corrcoef(first, other)[0, 1]) < 0.1


def test_unknown_shape_is_refused():
    with pytest.raises(ValueError, match="shape bell: expected one of arcsine, normal"):
        draws(Quantity(0.0, 1.0, "bell"), seed=1, name="x", trials=10)


# --- joint draws ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("how", [together, alone])
def test_covariance_of_draws_of_two_particles_is_that_of_the_components(reduced, how):
    results, names = how(reduced), reduced.prepared.names
    logs = np.concatenate(drawn(results, names))
    labels: dict[str, int] = {}
    rows = list(budget.component_rows(results, "s001", list(names)))
    for row in rows:
        labels.setdefault(str(row["input"]), len(labels))
    root = np.zeros((len(names), len(RESULTS), len(labels)))
    for row in rows:
        place, column = names.index(row["particle"]), RESULTS.index(row["result"])
        root[place, column, labels[str(row["input"])]] = row["component"] / results.value[place, column]
    root = root.reshape(len(logs), -1)
    u = np.sqrt((root**2).sum(axis=1))
    expected = root @ root.T / np.outer(u, u)
    found = np.cov(logs) / np.outer(u, u)
    assert found == pytest.approx(expected, abs=5.0 / math.sqrt(TRIALS))


@pytest.mark.parametrize("way", ["together", "alone"])
def test_with_small_uncertainties_the_ends_are_the_first_order_ends(reduced, way):
    model = smaller(reduced.alone.model, reduced.alone.theta, 0.01)
    theta = reduced.alone.theta
    adjusted = adjust_together([model], [theta])[0] if way == "together" else adjust_alone(model, theta)
    results = results_of(adjusted, alone=way == "alone")
    known = known_results(results)
    low, high = interval(results, effective_dof(results, {}), 0.95)
    found = intervals(results, reduced.prepared.names, trials=100_000)
    sampling = 4.0 * 2.7 / math.sqrt(100_000)  # sqrt(p (1 - p)) / density of the end of a normal, in u
    for ends, first in ((found.low, low), (found.high, high)):
        # rectangular inputs shorten the interval where they dominate: 1.645 u at the most extreme
        assert np.all(np.abs((ends - first) / results.u)[known] < sampling + 0.1)
        assert np.median(np.abs((ends - first) / results.u)[known]) < 0.03


def test_input_the_readings_say_nothing_of_keeps_its_shape(light):
    inputs = light.alone.model.setting.inputs
    role = f"density:{light.prepared.species[0]}"

    def with_density(u_relative):
        changed = tuple(
            replace(one, quantity=replace(one.quantity, u=u_relative * one.quantity.estimate, shape="rectangular"))
            if one.role == role
            else one
            for one in inputs
        )
        setting = replace(light.alone.model.setting, inputs=changed)
        quiet = replace(light.alone.model.without("diameter"), setting=setting)
        return results_of(adjust_alone(quiet, light.alone.theta), alone=True), quiet

    results, model = with_density(0.15)
    place = [one.name for one in results.adjusted.group].index(next(one.name for one in inputs if one.role == role))
    names = light.prepared.names
    logs = drawn(results, names)[0]
    # density = surface charge density * 6 / (s d): what the draws hold of it
    rho = np.exp(logs[5] - logs[0] - logs[2]) * 6.0
    estimate = next(one for one in model.setting.inputs if one.role == role).quantity
    unit = (rho - estimate.estimate) / estimate.u
    pinned = 1.0 - results.adjusted.shared[0, place, place]
    assert pinned < 1e-4  # balance and height do not see the density but by buoyancy
    assert np.abs(unit).max() < math.sqrt(3.0) * 1.01
    assert stats.kstest(unit, stats.uniform(-math.sqrt(3.0), 2.0 * math.sqrt(3.0)).cdf).pvalue > 0.001


def test_mass_from_a_diameter_of_20_percent_has_the_exact_skewed_interval(light):
    names, count = light.prepared.names, len(light.prepared.names)
    base = smaller(light.alone.model.without("diameter"), light.alone.theta, 1e-3)
    size = OwnSize(np.full(count, 20e-6), np.full(count, 4e-6), np.zeros(count, bool))
    results = results_of(adjust_alone(base, light.alone.theta), alone=True, size=size)
    found = intervals(results, names, size=size, trials=100_000)
    # d normal: m = pi/6 rho d^3 rises with d, so its ends are those of d; conditional on d > 0, a matter of 3e-7
    for end, sign in ((found.low, -1.0), (found.high, 1.0)):
        exact = results.value[:, MASS] * (1.0 + 0.2 * sign * stats.norm.ppf(0.975)) ** 3
        assert end[:, MASS] == pytest.approx(exact, rel=0.02)
    assert found.mean[:, MASS] / results.value[:, MASS] == pytest.approx(1.0 + 3.0 * 0.2**2, rel=0.01)
    exact_sd = math.sqrt(9.0 * 0.04 + 36.0 * 0.0016 + 15.0 * 0.2**6)
    assert found.sd[:, MASS] / results.value[:, MASS] == pytest.approx(exact_sd, rel=0.02)


def test_mass_from_the_lot_carries_its_spread_and_the_u_of_its_mean(light):
    names, count = light.prepared.names, len(light.prepared.names)
    role = f"lot_diameter:{light.prepared.species[0]}"
    mean = next(one.quantity.estimate for one in light.alone.model.setting.inputs if one.role == role)
    size = OwnSize(np.full(count, mean), np.full(count, 0.01 * mean), np.ones(count, bool))
    base = adjust_alone(light.alone.model.without("diameter"), light.alone.theta)
    results = results_of(base, alone=True, size=size)
    found = intervals(results, names, size=size)
    assert found.sd[:, MASS] == pytest.approx(results.u[:, MASS], rel=0.03)
    assert found.mean[:, MASS] == pytest.approx(results.value[:, MASS], rel=0.003)


def test_mass_from_a_lognormal_drag_rate_has_the_exact_interval(light):
    # only ln gamma uncertain, by 0.3: m falls with gamma, as gamma^(-3/2) but for slip, so the ends are those of gamma
    results = alone(light)
    adjusted = results.adjusted
    private, u = np.zeros_like(adjusted.private), 0.3
    private[:, 1, 1] = u**2
    nothing = np.zeros_like(adjusted.shared)
    exact_gamma = replace(
        adjusted, private=private, shared=nothing, from_priors=nothing, from_readings=nothing,
        response=np.zeros_like(adjusted.response),
    )  # fmt: skip
    results = results_of(exact_gamma, alone=True)
    found = intervals(results, light.prepared.names, trials=100_000)
    for end, sign in ((found.low, 1.0), (found.high, -1.0)):
        moved = replace(exact_gamma, theta=adjusted.theta + sign * u * stats.norm.ppf(0.975) * np.eye(5)[1])
        assert end[:, MASS] == pytest.approx(results_of(moved, alone=True).value[:, MASS], rel=0.02)
    assert np.all(found.mean[:, MASS] > results.value[:, MASS])


def test_noise_with_u_from_scatter_is_students_and_wider_than_normal(light):
    results, names = alone(light), light.prepared.names
    log_dof = {"height": 4.0, "balance": 4.0}
    normal, student = (drawn(results, names, log_dof=dof, trials=50_000)[0] for dof in ({}, log_dof))
    gamma = RESULTS.index("drag_rate")
    dof = effective_dof(results, log_dof)[0, gamma]
    assert stats.kurtosis(student[gamma]) > stats.kurtosis(normal[gamma])
    low, high = symmetric_ends(student[gamma], 0.95)
    expected = 2.0 * stats.t.ppf(0.975, dof) * math.sqrt(results.variance[0, gamma])
    assert high - low == pytest.approx(expected, rel=0.06)


@pytest.mark.parametrize("how", [together, alone])
def test_parts_by_log_add_to_the_whole_noise(reduced, how):
    # with so many degrees of freedom that Student's t is normal, the split by log must change nothing but the draws
    results, names = how(reduced), reduced.prepared.names
    split = dict.fromkeys(results.adjusted.normals, 1e9)
    one, other = (np.cov(np.concatenate(drawn(results, names, log_dof=dof))) for dof in ({}, split))
    u = np.sqrt(np.diag(one))
    assert other / np.outer(u, u) == pytest.approx(one / np.outer(u, u), abs=6.0 / math.sqrt(TRIALS))


def test_negative_results_have_low_below_high(light):
    results = alone(light)
    found = intervals(results, light.prepared.names)
    known = known_results(results)
    assert (results.value < 0.0).any() or (results.adjusted.model.sign > 0.0).all()
    flipped = replace(results, value=-results.value)
    mirrored = intervals(flipped, light.prepared.names)
    assert np.all(found.low[known] < found.high[known])
    assert mirrored.low[known] == pytest.approx(-found.high[known], rel=1e-12)
    assert mirrored.mean[known] == pytest.approx(-found.mean[known], rel=1e-12)


def test_what_is_not_determined_gets_no_interval(light):
    adjusted = light.alone
    private = adjusted.private.copy()
    private[0, 1, 1] = 1e8
    results = results_of(replace(adjusted, private=private), alone=True)
    found = intervals(results, light.prepared.names)
    assert np.isnan(found.low[0, 1:]).all()
    assert np.isfinite(found.low[0, 0])
    assert np.isfinite(found.low[1:]).all()


# --- what they do not depend on ---------------------------------------------------------------------------------------


def part_of(adjusted, indices):
    """The same adjustment with only the given particles, in that order."""
    by_particle = ("theta", "xi", "private", "response", "shared", "from_priors", "from_readings", "cost", "settled")
    normals = {
        log: replace(normal, **{name: getattr(normal, name)[indices] for name in normal.__dataclass_fields__})
        for log, normal in adjusted.normals.items()
    }
    sliced = {name: getattr(adjusted, name)[indices] for name in by_particle}
    return replace(adjusted, model=adjusted.model.subset(indices), normals=normals, **sliced)


@pytest.mark.parametrize("log_dof", [{}, {"height": 6.0}])
def test_interval_of_a_particle_alone_does_not_depend_on_the_others_or_their_order(light, log_dof):
    names = light.prepared.names
    whole = intervals(alone(light), names, log_dof=log_dof)
    for order in ([2, 0, 1], [1]):
        part = results_of(part_of(light.alone, np.array(order)), alone=True)
        found = intervals(part, [names[one] for one in order], log_dof=log_dof)
        assert found.low == pytest.approx(whole.low[order], rel=1e-12)
        assert found.high == pytest.approx(whole.high[order], rel=1e-12)


def test_draws_of_a_particle_do_not_depend_on_an_input_that_does_not_move_it(light):
    results, names = alone(light), light.prepared.names
    group = list(results.adjusted.group)
    extra = replace(group[0], name="instrument/elsewhere/gain", role="gain_elsewhere")
    padded = replace(
        results,
        adjusted=replace(
            results.adjusted,
            group=(*group, extra),
            from_priors=np.concatenate([results.adjusted.from_priors, 0.0 * results.adjusted.from_priors[:, :, :1]], 2),
        ),
        by_input=np.concatenate([results.by_input, 0.0 * results.by_input[:, :, :1]], axis=2),
    )
    for one, other in zip(drawn(results, names, trials=500), drawn(padded, names, trials=500), strict=True):
        assert np.array_equal(one, other)


def test_more_trials_continue_the_draws_of_a_particle(light):
    for results in (alone(light), together(light)):
        few, many = (drawn(results, light.prepared.names, trials=count) for count in (300, 1000))
        for one, other in zip(few, many, strict=True):
            assert one == pytest.approx(other[:, :300], rel=1e-13)


@pytest.mark.parametrize("pooled", [False, True])
def test_covariance_of_draws_of_two_sessions_is_that_of_the_components(tmp_path, pooled):
    folder = tmp_path / "campaign"
    simulate_campaign(folder, plan=Plan(regimes=("room_air_dense",), sessions=2, particles=2), seed=3)
    pair = {session: solved(folder, session) for session in ("s001", "s002")}
    models, starts = [one.alone.model for one in pair.values()], [one.alone.theta for one in pair.values()]
    if pooled:
        adjusted = adjust_together(models, starts)
    else:
        adjusted = [adjust_together([model], [start])[0] for model, start in zip(models, starts, strict=True)]
    logs, parts = [], []
    for (session, one), final in zip(pair.items(), adjusted, strict=True):
        results = results_of(final, alone=False)
        names = one.prepared.names
        found = result_draws(results, session=session, names=names, log_dof={}, trials=TRIALS, seed=1, pooled=pooled)
        logs.append(next(found))
        table: dict[str, np.ndarray] = {}
        for row in budget.component_rows(results, session, list(names), pooled=pooled):
            if row["particle"] == names[0]:
                place = RESULTS.index(row["result"])
                column = table.setdefault(str(row["input"]), np.zeros(len(RESULTS)))
                column[place] = row["component"] / results.u[0, place] * np.sign(results.value[0, place])
        parts.append(table)
    expected = sum(np.outer(one, parts[1].get(name, np.zeros(len(RESULTS)))) for name, one in parts[0].items())
    found = np.corrcoef(np.concatenate(logs))[: len(RESULTS), len(RESULTS) :]
    assert np.abs(expected).max() > 0.1
    assert found == pytest.approx(expected, abs=4.5 / math.sqrt(TRIALS))
