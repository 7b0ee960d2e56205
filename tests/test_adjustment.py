"""The adjustment against a dense generalised least squares, and its components against what they claim to be."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats
from scipy.optimize import least_squares

from reduction import reducedequations
from reduction.adjustment import Adjusted, adjust_alone, adjust_together
from reduction.budget import RESULTS, component_rows, results_of
from reduction.errors import Faults
from reduction.logs import read_logs
from reduction.lotvolume import of_the_lot
from reduction.methods import effective_u, linearise, predict
from reduction.normalequations import Model
from reduction.preparation import prepare
from reduction.settings import load_campaign
from reduction.simulation import simulate_campaign
from reduction.simulationplan import Plan
from reduction.solution import fit_session
from reduction.tables import read_table


def solved(folder, session):
    faults = Faults()
    campaign = load_campaign(folder, faults=faults)
    logs = read_logs(folder, session, faults=faults)
    assert not list(faults)
    return fit_session(prepare(campaign, campaign.sessions[session], logs), "stated")


@pytest.fixture(scope="module", params=["room_air_light", "room_air_dense", "low_pressure"])
def reduced(request, tmp_path_factory):
    folder = tmp_path_factory.mktemp(request.param) / "campaign"
    simulate_campaign(folder, plan=Plan(regimes=(request.param,), sessions=1, particles=3), seed=7)
    return solved(folder, "s001")


def volume_slope(adjusted: Adjusted):
    """Slope by each shared input of -1/2 sum of ln P over particles of the lot, one at a time, the particles following.

    P is the variance of ln gamma at given inputs. A lone particle has none.
    """
    model, xi = adjusted.model, adjusted.xi[0]
    lot = of_the_lot(model)

    def logarithm(theta, xi):
        square = np.zeros((model.particles, 5, 5))
        for name, line in linearise(model.setting, model.logs, theta, model.sign, xi[None], shared=False).items():
            rows = line.private * model.active[model.logs[name].particle]
            np.add.at(square, model.logs[name].particle, rows[:, :, None] * rows[:, None, :])
        square += np.eye(5) * np.where(model.active, 0.0, 1.0)[:, None, :]
        scale = np.sqrt(np.einsum("nii->ni", square))
        inverse = np.linalg.inv(square / (scale[:, :, None] * scale[:, None, :]))
        return float(np.log(inverse[lot, 1, 1] / scale[lot, 1] ** 2).sum())

    slopes = np.zeros(len(xi))
    for place, along in enumerate(np.eye(len(xi)) * 0.02):
        follow = adjusted.response @ along
        up, down = (logarithm(adjusted.theta + side * follow, xi + side * along) for side in (1.0, -1.0))
        slopes[place] = -0.5 * (up - down) / 0.04
    return slopes * (len(lot) - 1) / max(len(lot), 1)


def dense(adjusted: Adjusted, pull=0.0):
    """Joint least squares of all private unknowns and shared inputs by scipy, effective variance included.

    The shared inputs are pulled by a constant force beside their priors.
    """
    model = adjusted.model
    free = np.argwhere(model.active)
    width = adjusted.xi.shape[1]
    scale = np.array([1.0, 1.0, 1e-5, 1e-6, 1.0])[free[:, 1]]

    def unpacked(values):
        theta = adjusted.theta.copy()
        theta[free[:, 0], free[:, 1]] = values[: len(free)] * scale
        return theta, values[len(free) :]

    def residual(values):
        theta, xi = unpacked(values)
        parts = [
            (model.logs[name].observed - prediction.reading[0]) / effective_u(model.logs[name], prediction)
            for name, prediction in predict(model.setting, model.logs, theta[None], model.sign, xi[None, None]).items()
        ]
        return np.concatenate([*parts, xi + pull])

    start = np.concatenate([adjusted.theta[free[:, 0], free[:, 1]] / scale, np.zeros(width)])
    found = least_squares(residual, start, method="lm", xtol=1e-15, ftol=1e-15, gtol=1e-15, x_scale="jac")
    steps = 1e-4
    jacobian = np.stack(
        [
            (residual(found.x + steps * row) - residual(found.x - steps * row)) / (2.0 * steps)
            for row in np.eye(len(found.x))
        ],
        axis=1,
    )
    covariance = np.linalg.inv(jacobian.T @ jacobian)
    theta, xi = unpacked(found.x)
    full = np.concatenate([scale, np.ones(width)])
    return theta, xi, covariance * np.outer(full, full), free


def test_particle_alone_equals_dense_least_squares(reduced):
    model = reduced.alone.model.subset(np.array([1]))
    adjusted = adjust_alone(model, reduced.alone.theta[[1]])
    theta, xi, covariance, free = dense(adjusted)
    u = np.sqrt(np.diag(covariance))
    difference = adjusted.theta[free[:, 0], free[:, 1]] - theta[free[:, 0], free[:, 1]]
    assert np.abs(difference / u[: len(free)]).max() < 1e-3
    assert np.abs(adjusted.xi[0] - xi).max() < 1e-3
    mine = adjusted.covariance[0][np.ix_(free[:, 1], free[:, 1])]
    assert mine / np.outer(u[: len(free)], u[: len(free)]) == pytest.approx(
        covariance[: len(free), : len(free)] / np.outer(u[: len(free)], u[: len(free)]), abs=2e-5
    )


def test_session_equals_dense_least_squares(reduced):
    adjusted = adjust_together([reduced.alone.model], [reduced.alone.theta])[0]
    theta, xi, covariance, free = dense(adjusted, volume_slope(adjusted))
    u = np.sqrt(np.diag(covariance))
    assert adjusted.settled.all()
    difference = adjusted.theta[free[:, 0], free[:, 1]] - theta[free[:, 0], free[:, 1]]
    assert np.abs(difference / u[: len(free)]).max() < 1e-3
    assert np.abs(adjusted.xi[0] - xi).max() < 1e-3
    everything = np.zeros((len(free), len(free)))
    for row, (i, a) in enumerate(free):
        for column, (j, b) in enumerate(free):
            value = adjusted.response[i, a] @ adjusted.shared[0] @ adjusted.response[j, b]
            everything[row, column] = value + (adjusted.private[i, a, b] if i == j else 0.0)
    assert everything / np.outer(u[: len(free)], u[: len(free)]) == pytest.approx(
        covariance[: len(free), : len(free)] / np.outer(u[: len(free)], u[: len(free)]), abs=2e-5
    )
    assert adjusted.shared[0] == pytest.approx(covariance[len(free) :, len(free) :], abs=2e-5)


def test_components_rebuild_the_dense_covariance_of_a_session(reduced):
    adjusted = adjust_together([reduced.alone.model], [reduced.alone.theta])[0]
    results = results_of(adjusted, alone=False)
    names = list(reduced.prepared.names)
    rows = list(component_rows(results, "s001", names))
    labels = sorted({str(row["input"]) for row in rows})
    keys = [(name, result) for name in names for result in RESULTS]
    table = np.zeros((len(keys), len(labels)))
    for row in rows:
        table[keys.index((row["particle"], row["result"])), labels.index(str(row["input"]))] = row["component"]
    rebuilt = table @ table.T
    u = np.sqrt(np.diag(rebuilt))
    expected_u = results.u.reshape(-1)
    assert u == pytest.approx(expected_u, rel=1e-6)
    slopes_private, slopes_shared = result_slopes(adjusted)
    wide = adjusted.model.particles * 5
    joint = np.zeros((wide + adjusted.xi.shape[1],) * 2)
    for i in range(adjusted.model.particles):
        for j in range(adjusted.model.particles):
            block = adjusted.response[i] @ adjusted.shared[0] @ adjusted.response[j].T
            joint[5 * i : 5 * i + 5, 5 * j : 5 * j + 5] = block + (adjusted.private[i] if i == j else 0.0)
        joint[5 * i : 5 * i + 5, wide:] = adjusted.response[i] @ adjusted.shared[0]
        joint[wide:, 5 * i : 5 * i + 5] = joint[5 * i : 5 * i + 5, wide:].T
    joint[wide:, wide:] = adjusted.shared[0]
    slopes = np.zeros((len(keys), len(joint)))
    for i in range(adjusted.model.particles):
        slopes[6 * i : 6 * i + 6, 5 * i : 5 * i + 5] = slopes_private[i]
        slopes[6 * i : 6 * i + 6, wide:] = slopes_shared[i]
    value = results.value.reshape(-1)
    expected = np.outer(value, value) * (slopes @ joint @ slopes.T)
    scale = np.outer(expected_u, expected_u)
    assert rebuilt / scale == pytest.approx(expected / scale, abs=1e-6)


def result_slopes(adjusted: Adjusted):
    """Derivatives of the logarithms of the results by the unknowns and by the shared inputs, one at a time."""
    step = 1e-5
    private, shared = np.zeros((adjusted.model.particles, 6, 5)), []

    def logs(theta, xi):
        value = results_of(replace(adjusted, theta=theta, xi=xi), alone=False).value
        return np.log(np.abs(value))

    for index in range(5):
        move = np.zeros(5)
        move[index] = step
        up, down = logs(adjusted.theta + move, adjusted.xi), logs(adjusted.theta - move, adjusted.xi)
        private[:, :, index] = (up - down) / (2.0 * step)
    for index in range(adjusted.xi.shape[1]):
        move = np.zeros(adjusted.xi.shape[1])
        move[index] = step
        up, down = logs(adjusted.theta, adjusted.xi + move), logs(adjusted.theta, adjusted.xi - move)
        shared.append((up - down) / (2.0 * step))
    return private, np.stack(shared, axis=2)


def moved_input(model: Model, name: str, by: float) -> Model:
    """The same readings reduced with one input's estimate moved by so many u."""
    inputs = tuple(
        replace(one, quantity=replace(one.quantity, estimate=one.quantity.estimate + by * one.quantity.u))
        if one.name == name
        else one
        for one in model.setting.inputs
    )
    return replace(model, setting=replace(model.setting, inputs=inputs))


def without_noise(model: Model, theta) -> Model:
    """Readings that the particles at theta would give with every input at its estimate."""
    nothing = np.zeros((1, 1, len(model.setting.uncertain)))
    found = predict(model.setting, model.logs, theta[None], model.sign, nothing)
    logs = {name: replace(log, observed=found[name].reading[0]) for name, log in model.logs.items()}
    return replace(model, logs=logs)


@pytest.mark.parametrize("together", [False, True])
def test_component_of_an_input_is_how_far_the_results_move_with_its_estimate(reduced, together):
    # on readings without noise: first-order sensitivities leave out the curvature that residuals would bring
    model, theta = without_noise(reduced.alone.model, reduced.alone.theta), reduced.alone.theta

    def solve(one):
        return adjust_together([one], [theta])[0] if together else adjust_alone(one, theta)

    base = results_of(solve(model), alone=not together)
    checked = 0
    for place, one in enumerate(base.adjusted.group):
        if np.abs(base.by_input[:, 0, place]).max() < 0.02 * np.sqrt(base.variance[:, 0]).max():
            continue
        up, down = (
            results_of(solve(moved_input(model, one.name, by)), alone=not together).value[:, :5] for by in (0.05, -0.05)
        )
        moved = np.log(up / down) / 0.1
        scale = np.sqrt(base.variance[:, :5])
        assert moved / scale == pytest.approx(base.by_input[:, :5, place] / scale, abs=3e-3), one.name
        checked += 1
    assert checked >= 2


def test_session_of_one_particle_equals_the_particle_alone(reduced):
    model, theta = reduced.alone.model.subset(np.array([0])), reduced.alone.theta[[0]]
    alone, session = adjust_alone(model, theta), adjust_together([model], [theta])[0]
    u = np.sqrt(np.diag(alone.covariance[0]))
    assert np.abs((alone.theta[0] - session.theta[0]) / u).max() < 1e-3
    assert session.covariance[0] / np.outer(u, u) == pytest.approx(alone.covariance[0] / np.outer(u, u), abs=1e-4)


def test_more_particles_never_widen_an_adjusted_input(reduced):
    one = adjust_together([reduced.alone.model.subset(np.array([0]))], [reduced.alone.theta[[0]]])[0]
    three = adjust_together([reduced.alone.model], [reduced.alone.theta])[0]
    assert np.all(np.diag(three.shared[0]) <= np.diag(one.shared[0]) * (1.0 + 1e-4))


def test_order_of_particles_does_not_matter(reduced):
    order = np.array([2, 0, 1])
    straight = adjust_together([reduced.alone.model], [reduced.alone.theta])[0]
    mixed = adjust_together([reduced.alone.model.subset(order)], [reduced.alone.theta[order]])[0]
    u = np.sqrt(np.einsum("nii->ni", straight.covariance))
    assert np.abs((mixed.theta - straight.theta[order]) / u[order]).max() < 1e-5


def test_sessions_that_share_a_trap_pin_it_better_together_than_apart(tmp_path):
    simulate_campaign(tmp_path / "campaign", plan=Plan(regimes=("room_air_dense",), sessions=2, particles=3), seed=3)
    pair = [solved(tmp_path / "campaign", session) for session in ("s001", "s002")]
    both = adjust_together([one.alone.model for one in pair], [one.alone.theta for one in pair])
    apart = adjust_together([pair[0].alone.model], [pair[0].alone.theta])[0]
    names = [one.name for one in apart.group]
    trap = [place for place, name in enumerate(names) if name.startswith("trap/")]
    assert len(trap) == 2
    for place in trap:
        assert both[0].shared[0][place, place] < apart.shared[0][place, place]
    own = [one.name for one in both[0].group].count("session/s001/stray_field_V_per_m")
    assert own == 1
    for first, second in zip(both[0].from_priors.shape, both[1].from_priors.shape, strict=True):
        assert first == second


def test_residuals_use_the_uncertainty_of_the_dc_voltage_along_the_slope(reduced):
    if "height" not in reduced.alone.model.logs:
        pytest.skip("this regime logs no heights")
    log = reduced.alone.model.logs["height"]
    prediction = predict(
        reduced.alone.model.setting,
        {"height": log},
        reduced.alone.theta[None],
        reduced.alone.model.sign,
        reduced.alone.xi[None],
    )["height"]
    assert prediction.slope is not None
    expected = np.sqrt(log.u**2 + (prediction.slope * log.u_voltage) ** 2)
    assert effective_u(log, prediction) == pytest.approx(expected, rel=1e-12)
    assert np.all(expected > log.u)


def test_many_particles_go_through_in_blocks_with_the_same_result(tmp_path, monkeypatch):
    simulate_campaign(tmp_path / "campaign", plan=Plan(sessions=1, particles=5), seed=4)
    reduced = solved(tmp_path / "campaign", "s001")
    whole = adjust_together([reduced.alone.model], [reduced.alone.theta])[0]
    monkeypatch.setattr(reducedequations, "BLOCK", 2)
    blocked = adjust_together([reduced.alone.model], [reduced.alone.theta])[0]
    u = np.sqrt(np.einsum("nii->ni", whole.covariance))
    assert np.abs((blocked.theta - whole.theta) / u).max() < 1e-9
    assert blocked.covariance / (u[:, :, None] * u[:, None, :]) == pytest.approx(
        whole.covariance / (u[:, :, None] * u[:, None, :]), abs=1e-9
    )


def test_many_particles_do_not_pull_the_sizes_of_their_lot_together(tmp_path):
    # at the mode of sizes and inputs together the mean pull is 1.2 here, as differences from the lot's mean, which
    # shrink with the size itself, it would be near 4; what the particles share scatters by 1 over the campaigns
    pulls = []
    for seed in range(12):
        folder = tmp_path / f"seed{seed}"
        simulate_campaign(folder, plan=Plan(sessions=1, particles=300), seed=seed)
        faults = Faults()
        campaign = load_campaign(folder, faults=faults)
        prepared = prepare(campaign, campaign.sessions["s001"], read_logs(folder, "s001", faults=faults))
        truth = read_table(f"{folder}.truth.csv").set_index("particle").loc[list(prepared.names)]
        s = truth["charge_to_mass_C_per_kg"].to_numpy(float)
        theta = np.zeros((len(s), 5))
        theta[:, 0], theta[:, 1] = np.log(np.abs(s)), np.log(truth["drag_rate_per_s"].to_numpy(float))
        theta[:, 2] = truth["height_origin_mm"].to_numpy(float) * 1e-3
        model = Model(prepared.setting, prepared.logs, np.sign(s), np.zeros(len(s), bool))
        found = adjust_together([model], [theta])[0]
        u = np.sqrt(np.einsum("nii->ni", found.covariance))
        pulls.append(float(((found.theta - theta) / u)[:, 1].mean()))
    assert abs(np.mean(pulls)) < stats.norm.isf(5e-5) / np.sqrt(len(pulls))
