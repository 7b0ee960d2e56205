"""What sessions share has one error: components.csv carries every covariance, within a session and between sessions."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from reduction import adjustment, simulationtruth
from reduction.adjustment import adjust_alone, adjust_together
from reduction.budget import RESULTS, result_logarithms, results_of
from reduction.check import check_campaign
from reduction.correlated import read_results
from reduction.drag import drag_rate
from reduction.methods import predict, surroundings
from reduction.preparation import prepare
from reduction.propagation import covariance
from reduction.session import reduce_campaign, reduce_session
from reduction.simulation import Habits, simulate_campaign
from reduction.simulationplan import REGIMES, Plan
from reduction.solution import fit_session
from reduction.tables import COLUMNS, write_table


@pytest.fixture(scope="module", autouse=True)
def sizes_at_their_mode():
    """Covariances hold first derivatives of least squares; the average over sizes of a lot bends them by 1e-3 here."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(adjustment, "_group_volume", lambda members, information, xi: np.zeros(len(xi)))
        yield


METER = 0.003  # relative u of a meter's gain
SESSIONS = 30


def checked(folder):
    campaign, logs, faults = check_campaign(folder)
    assert not list(faults), "\n".join(map(str, faults))
    return campaign, logs


def records_of(campaign, logs):
    if campaign.options.adjust == "campaign":
        return reduce_campaign(campaign, logs)
    return {session: reduce_session(campaign, session, logs[session]) for session in campaign.session_ids}


def written(records, folder):
    """Tables of all sessions as the results folder holds them."""
    folder.mkdir(parents=True)
    for name in ("particles", "components"):
        table = pd.concat([one.tables[name] for one in records.values()])
        write_table(folder / f"{name}.csv", COLUMNS[name], table)
    return folder


def by_recipe(folder, table="components.csv"):
    """The recipe of the README."""
    rows = pd.read_csv(folder / table, dtype={"session": str, "particle": str})
    table = rows.pivot_table(
        index=["session", "particle", "result"], columns="input", values="component", fill_value=0.0
    )
    return table @ table.T


# --- the mean over sessions


@pytest.fixture
def only_the_meter(monkeypatch):
    """Balance voltages read exactly in an exact trap; what is left is the meter."""
    usual = REGIMES["room_air_light"]
    exact = replace(
        usual, dc_field_per_volt_per_m="61.3", stray_field_V_per_m="0", density_kg_per_m3="1050",
        u_offset_V=1e-6, reading={**usual.reading, "balance_voltage_V": 1e-3},
    )  # fmt: skip
    monkeypatch.setitem(REGIMES, "room_air_light", exact)
    monkeypatch.setitem(simulationtruth.U_GAIN, "dc_voltage", METER)


def mean_charge_to_mass(folder, instruments, adjust):
    """Mean over sessions of one particle each, read back, with the error it has in truth."""
    plan = Plan(
        materials=("PTFE",), sessions=SESSIONS, particles=1, between_sessions=0.0, between_particles=0.0,
        habits=Habits(logs=("balance",), instruments=instruments),
        options={"adjust": adjust, "monte_carlo_trials": "100"}, site={"gravity_m_per_s2": "9.81"},
    )  # fmt: skip
    truth = pd.read_csv(simulate_campaign(folder / "campaign", plan=plan, seed=21), comment="#")
    numbers = read_results(written(records_of(*checked(folder / "campaign")), folder / "results"))
    one = [number for (_, _, result), number in numbers.items() if result == "charge_to_mass"]
    assert len(one) == SESSIONS
    assert [number.s / number.n for number in one] == pytest.approx([METER] * SESSIONS, rel=0.02)
    mean = sum(one) / SESSIONS
    return mean.s / mean.n, mean.n / truth["charge_to_mass_C_per_kg"].mean() - 1.0


@pytest.mark.parametrize("adjust", ["session", "campaign"])
def test_one_meter_for_thirty_sessions_does_not_average_away(tmp_path, only_the_meter, adjust):
    u, error = mean_charge_to_mass(tmp_path, {"dc_voltage": "meter-1"}, adjust)
    assert u == pytest.approx(METER, rel=0.02)
    assert abs(error) < 3.9 * METER  # 1 in 10,000


def test_thirty_meters_average_away(tmp_path, only_the_meter):
    u, error = mean_charge_to_mass(tmp_path, {}, "session")
    assert u == pytest.approx(METER / math.sqrt(SESSIONS), rel=0.03)  # 0.055 %
    assert abs(error) < 3.9 * METER / math.sqrt(SESSIONS)


# --- every covariance, against moving inputs and readings one by one

SHORT = Habits(balance_readings=4, height_drives=2, height_readings=4, instruments={"dc_voltage": "supply-1"})
COLUMN = {"balance": "balance_voltage", "height": "height"}
STEP = 0.05  # of u; second order cancels between the two sides
TOLERANCE = 2e-4  # of u1 u2
ADJUST = ("particle", "session", "campaign")


def without_noise(campaign, logs):
    """Logs as two beads of the lot's mean size would read them, were every input what the files state.

    First derivatives are all that covariances hold; where readings lie off the model, its curvature enters, too.
    """
    found = {}
    for session, own in logs.items():
        prepared = prepare(campaign, campaign.sessions[session], own)
        model = fit_session(prepared, "stated").alone.model
        estimate = {one.role: one.quantity.estimate for one in model.setting.inputs}
        xi = np.zeros((1, 1, len(model.setting.uncertain)))
        around = surroundings(model.setting, xi)
        (kind,) = set(model.setting.species)
        gamma = drag_rate(
            estimate[f"lot_diameter:{kind}"], estimate[f"density:{kind}"], estimate[f"shape_factor:{kind}"],
            around.viscosity[0, 0], around.mean_free_path[0, 0],
        )  # fmt: skip
        theta = np.zeros((model.particles, 5))
        theta[:, 0], theta[:, 1] = np.log([0.0021, 0.0028]), np.log(gamma)
        read = {"height": model.logs["height"], "balance": model.logs["balance"]}
        read["height"] = replace(read["height"], reynolds=np.zeros(len(read["height"])))
        predicted = predict(model.setting, read, theta[None], model.sign, xi)
        tables = dict(own.tables)
        for log, column in COLUMN.items():
            tables[log] = tables[log].copy()
            tables[log].loc[tables[log].index[read[log].row], column] = predicted[log].reading[0]
        found[session] = replace(own, tables=tables)
    return found


@pytest.fixture(scope="module")
def shared(tmp_path_factory):
    """Two sessions that share a trap, a species and a supply."""
    folder = tmp_path_factory.mktemp("shared")
    plan = Plan(materials=("PTFE",), sessions=2, particles=2, habits=SHORT)
    simulate_campaign(folder / "campaign", plan=plan, seed=8)
    campaign, logs = checked(folder / "campaign")
    return folder, campaign, without_noise(campaign, logs)


@pytest.fixture(scope="module", params=ADJUST)
def way(request, shared):
    """How it is adjusted, the results folder written so, and each session fitted."""
    folder, campaign, logs = shared
    campaign = replace(campaign, options=replace(campaign.options, adjust=request.param))
    results = written(records_of(campaign, logs), folder / f"adjusted-{request.param}")
    fitted = [fit_session(prepare(campaign, campaign.sessions[one], logs[one]), "stated") for one in logs]
    # no particle is left out, so places in the fitted session are places in the tables
    assert not any(one.open.any() for one in fitted)
    return request.param, results, fitted


def adjusted_by(adjust, models, starts):
    if adjust == "particle":
        return [adjust_alone(model, start, near=True) for model, start in zip(models, starts, strict=True)]
    if adjust == "session":
        return [adjust_together([model], [start])[0] for model, start in zip(models, starts, strict=True)]
    return adjust_together(models, starts)


def logarithms(adjust, models, starts):
    """Ln of all results, (sessions x particles x 6)."""
    found = adjusted_by(adjust, models, starts)
    return np.concatenate([np.log(np.abs(results_of(one, alone=False).value)).ravel() for one in found])


def with_input(model, name, step):
    """Model with the estimate of one input moved by some of its u."""
    inputs = tuple(
        replace(one, quantity=replace(one.quantity, estimate=one.quantity.estimate + step * one.quantity.u))
        if one.name == name
        else one
        for one in model.setting.inputs
    )
    return replace(model, setting=replace(model.setting, inputs=inputs))


def with_reading(model, log, row, step):
    """Model with one reading moved by a step [unit of the log]."""
    readings = model.logs[log]
    observed = readings.observed.copy()
    observed[row] += step
    return replace(model, logs={**model.logs, log: replace(readings, observed=observed)})


def moved(adjust, models, starts, change):
    """Central difference of the logarithms of all results per u of what `change` moves."""
    up, down = (logarithms(adjust, [change(one, model, side * STEP) for one, model in enumerate(models)], starts)
                for side in (1.0, -1.0))  # fmt: skip
    return (up - down) / (2.0 * STEP)


@pytest.fixture(scope="module")
def by_hand(way):
    """Derivatives of all results by every input and every reading per u, each moved and all adjusted again."""
    adjust, _, fitted = way
    models = [one.alone.model for one in fitted]
    settled = adjusted_by(adjust, models, [one.alone.theta for one in fitted])
    starts = [one.theta for one in settled]
    # that of a height includes its dc voltage's, along the slope
    u = [{log: line.u for log, line in one.lines.items()} for one in settled]
    names = sorted({model.setting.inputs[one].name for model in models for one in model.setting.uncertain})
    inputs = {
        name: moved(adjust, models, starts, lambda _, model, step, name=name: with_input(model, name, step))
        for name in names
    }
    readings = [
        moved(
            adjust, models, starts,
            lambda one, model, step, here=here, log=log, row=row: (
                with_reading(model, log, row, step * u[here][log][row]) if one == here else model
            ),
        )
        for here, model in enumerate(models)
        for log in sorted(model.logs)
        for row in range(len(model.logs[log]))
    ]  # fmt: skip
    return inputs, np.array(readings).T


def relative_covariance(folder, table="components.csv"):
    """Covariance of the logarithms by the recipe, in the order of sessions, particles and results."""
    found = by_recipe(folder, table)
    particles = pd.read_csv(folder / "particles.csv", dtype={"session": str, "particle": str})
    keys = [(row.session, row.particle, result) for row in particles.itertuples() for result in RESULTS]
    numbers = read_results(folder)
    value = np.array([numbers[key].n for key in keys])
    return found.loc[keys, keys].to_numpy() / np.outer(value, value)


def test_covariances_are_those_of_every_input_and_reading_moved_by_hand(way, by_hand):
    found = relative_covariance(way[1])
    inputs, readings = by_hand
    by_inputs = np.array(list(inputs.values())).T
    expected = by_inputs @ by_inputs.T + readings @ readings.T
    u = np.sqrt(np.diag(expected))
    assert found / np.outer(u, u) == pytest.approx(expected / np.outer(u, u), abs=TOLERANCE)


def test_what_the_readings_cause_is_told_from_what_inputs_cause(way, by_hand):
    rows = pd.read_csv(way[1] / "components.csv", dtype={"session": str, "particle": str})
    from_readings = rows["input"].str.startswith("particle/") | rows["input"].str.contains("/readings/")
    rows.assign(component=rows["component"].where(from_readings, 0.0)).to_csv(way[1] / "readings_only.csv", index=False)
    found = relative_covariance(way[1], "readings_only.csv")
    expected = by_hand[1] @ by_hand[1].T
    u = np.sqrt(np.diag(relative_covariance(way[1])))
    assert found / np.outer(u, u) == pytest.approx(expected / np.outer(u, u), abs=TOLERANCE)
    between = np.abs((expected / np.outer(u, u))[: len(RESULTS), len(RESULTS) : 2 * len(RESULTS)]).max()
    # adjusted together, a particle's readings move the other particles of its session
    assert (between > 0.01) == (way[0] != "particle")


def test_covariances_between_sessions_are_those_of_what_they_share(way, by_hand):
    found, half = relative_covariance(way[1]), 2 * len(RESULTS)
    if way[0] == "campaign":  # adjusted together, each session's readings move the other, too
        return
    one = np.array([column for name, column in by_hand[0].items() if not name.startswith("session/")]).T
    expected = (one @ one.T)[:half, half:]
    u = np.sqrt(np.diag(found))
    assert found[:half, half:] / np.outer(u[:half], u[half:]) == pytest.approx(
        expected / np.outer(u[:half], u[half:]), abs=TOLERANCE
    )
    # and much of it: the trap's constants and the density
    assert (expected / np.outer(u[:half], u[half:]))[0, 0] > 0.5


def test_each_input_moves_each_result_as_its_row_says(way, by_hand):
    rows = pd.read_csv(way[1] / "components.csv", dtype={"session": str, "particle": str})
    numbers, order = read_results(way[1]), {result: place for place, result in enumerate(RESULTS)}
    sessions = {"s001": 0, "s002": 1}
    checked_rows = 0
    for row in rows.itertuples():
        if row.input in by_hand[0]:
            number = numbers[row.session, row.particle, row.result]
            place = (sessions[row.session] * 2 + int(row.particle[1:]) - 1) * len(RESULTS) + order[row.result]
            expected = by_hand[0][row.input][place]
            # a prior moved up is followed by the result as far as the readings leave it free
            assert row.component / number.n == pytest.approx(expected, abs=TOLERANCE * abs(number.s / number.n))
            checked_rows += 1
    assert checked_rows > 4 * len(RESULTS) * 8


# --- every covariance, against the dense inverse of the whole normal matrix


def dense(adjust, fitted):
    """Covariance of all results from the undivided normal matrix of everything adjusted together."""
    found = adjusted_by(adjust, [one.alone.model for one in fitted], [one.alone.theta for one in fitted])
    names = sorted({one.model.setting.inputs[k].name for one in found for k in one.model.setting.uncertain})
    particles = sum(one.model.particles for one in found)
    size = 5 * particles + len(names)
    square, slopes, first = np.zeros((size, size)), [], 0
    square[5 * particles :, 5 * particles :] = np.eye(len(names))
    for one in found:
        columns = [5 * particles + names.index(one.model.setting.inputs[k].name) for k in one.model.setting.uncertain]
        for log, line in one.lines.items():
            jacobian = np.zeros((len(line.residual), size))
            for row, particle in enumerate(one.model.logs[log].particle):
                own = 5 * (first + particle)
                jacobian[row, own : own + 5] = line.private[row] * one.model.active[particle]
            jacobian[:, columns] = line.shared
            square += jacobian.T @ jacobian
        for particle in range(one.model.particles):
            for place in np.flatnonzero(~one.model.active[particle]):
                square[5 * (first + particle) + place, 5 * (first + particle) + place] = 1.0
        slopes.append(result_slopes(one, first, columns, size))
        first += one.model.particles
    slope = np.concatenate(slopes)
    return slope @ np.linalg.inv(square) @ slope.T


def result_slopes(one, first, columns, size):
    """Derivatives of ln of each result of a session by all unknowns, central differences."""
    step, count, setting = 1e-5, one.model.particles, one.model.setting

    def at(theta, xi):
        return result_logarithms(setting, surroundings(setting, xi[None]), theta[None], None)[0]

    slope = np.zeros((count, len(RESULTS), size))
    for place in range(5 + len(columns)):
        sides = []
        for side in (step, -step):
            theta, xi = one.theta.copy(), one.xi.copy()
            if place < 5:
                theta[:, place] += side
            else:
                xi[:, place - 5] += side
            sides.append(at(theta, xi))
        derivative = (sides[0] - sides[1]) / (2.0 * step)
        for particle in range(count):
            column = 5 * (first + particle) + place if place < 5 else columns[place - 5]
            slope[particle, :, column] = derivative[particle]
    return slope.reshape(count * len(RESULTS), size)


def test_components_rebuild_the_dense_covariance(way):
    adjust, folder, fitted = way
    if adjust == "particle":  # no normal matrix is common to particles adjusted apart
        return
    found = relative_covariance(folder)
    u, apart = np.sqrt(np.diag(found)), 2 * len(RESULTS)
    blocks = [fitted] if adjust == "campaign" else [[one] for one in fitted]
    for number, block in enumerate(blocks):
        part = slice(None) if adjust == "campaign" else slice(number * apart, (number + 1) * apart)
        expected, scale = dense(adjust, block), np.outer(u[part], u[part])
        assert found[part, part] / scale == pytest.approx(expected / scale, abs=1e-6)


def test_components_rebuild_every_u_and_the_library_agrees_with_the_recipe(way):
    folder = way[1]
    particles = pd.read_csv(folder / "particles.csv", dtype={"session": str, "particle": str})
    found, numbers = by_recipe(folder), read_results(folder)
    columns = {
        "charge_to_mass": ("u_charge_to_mass_C_per_kg", 1.0), "drag_rate": ("u_drag_rate_per_s", 1.0),
        "diameter": ("u_diameter_um", 1e-6), "mass": ("u_mass_kg", 1.0), "charge": ("u_charge_C", 1.0),
        "surface_charge_density": ("u_surface_charge_density_C_per_m2", 1.0),
    }  # fmt: skip
    for row in particles.to_dict("records"):
        for result, (column, unit) in columns.items():
            key = (row["session"], row["particle"], result)
            assert math.sqrt(found.loc[key, key]) == pytest.approx(row[column] * unit, rel=1e-6)
    u = np.sqrt(np.diag(found))
    again = covariance([numbers[key] for key in found.index])
    assert again / np.outer(u, u) == pytest.approx(found.to_numpy() / np.outer(u, u), abs=1e-9)


def test_no_result_has_a_row_for_every_other_particle(way):
    rows = pd.read_csv(way[1] / "components.csv", dtype=str)
    own = rows[rows["scope"] == "particle"]
    assert (own["input"].str.split("/").str[1:3].str.join("/") == own["session"] + "/" + own["particle"]).all()
    # the fewest: q/m and the drag rate of one particle are correlated, so its own part takes two names at least
    assert own.groupby(["session", "particle"])["input"].nunique().min() >= 2
