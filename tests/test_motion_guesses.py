"""Short cuts of the motion against the long way: a guess of the frequency saves time and must change nothing."""

import numpy as np
import pytest

from reduction import motion
from reduction.floquet import held, share_if_steady
from reduction.recurrence import equivalent_steady, medium
from reduction.secular import root_by_region, secular_root

COUNT = 1500


def practice(rng):
    powers = rng.uniform([-4, -4, -2], [0, -2, 0.3], (COUNT, 3)).T
    return rng.uniform(0.02, 0.25, COUNT), *10.0**powers


def anywhere(rng):
    b = 10 ** rng.uniform(-4, 1, COUNT)
    added_mass, history = 10 ** rng.uniform(-4, -1, COUNT), 10 ** rng.uniform(-4, 1.2, COUNT)
    return rng.uniform(0, 1.2, COUNT) * motion.stability_limit(b), b, added_mass, history


def onset_of_oscillation(rng):
    b = 10 ** rng.uniform(-3, 0.6, COUNT)
    return b * rng.uniform(0.2, 0.6, COUNT), b, 10 ** rng.uniform(-4, -1, COUNT), 10 ** rng.uniform(-3, 0.7, COUNT)


def onset_of_locking(rng):
    b, history = 10 ** rng.uniform(-3, 0.6, COUNT), 10 ** rng.uniform(-3, 0.7, COUNT)
    return motion.stability_limit(b, 1e-3, history) * rng.uniform(0.8, 1.01, COUNT), b, np.full(COUNT, 1e-3), history


def wild(rng):
    powers = rng.uniform([-6, -6, -6, -6], [2, 3, 0, 2], (COUNT, 4)).T
    return tuple(10.0**powers)


def with_steady_drag(rng):
    h, b, added_mass, history = anywhere(rng)
    return h, b, added_mass, np.where(rng.random(COUNT) < 0.5, 0.0, history)


PLACES = [practice, anywhere, onset_of_oscillation, onset_of_locking, wild, with_steady_drag]


def guesses_for(nu, rng):
    about = np.where(np.isfinite(nu), nu, 0.2)
    return {
        "right": about,
        "good": about * (1 + 0.01 * rng.standard_normal(COUNT)),
        "fair": about * (1 + 0.3 * rng.standard_normal(COUNT)),
        "anywhere": rng.uniform(0, 0.5, COUNT),
        "slow": 10 ** rng.uniform(-5, -0.4, COUNT),
        "absurd": rng.standard_normal(COUNT) * 10 ** rng.uniform(-3, 3, COUNT),
        "none": np.where(rng.random(COUNT) < 0.5, np.nan, np.inf),
    }


@pytest.mark.parametrize("function", [motion.ring_down, motion.response_peak])
@pytest.mark.parametrize("place", PLACES)
def test_a_guess_changes_nothing(place, function):
    rng = np.random.default_rng(11)
    arguments = place(rng)
    nu, codes = function(*arguments)
    assert np.any(codes == motion.OSCILLATES)
    assert np.any(codes != motion.OSCILLATES)
    for kind, near in guesses_for(nu, rng).items():
        guessed, guessed_codes = function(*arguments, near=near)
        np.testing.assert_array_equal(guessed_codes, codes, err_msg=kind)
        np.testing.assert_allclose(guessed, nu, rtol=0.0, atol=1e-12, err_msg=kind)


@pytest.mark.parametrize("place", PLACES)
def test_the_first_attempt_finds_what_the_search_by_region_finds(place):
    m, _ = medium(*place(np.random.default_rng(12)))
    m = m.take((held(m)[0] == motion.OSCILLATES) & (m.history != 0.0))
    root, codes = secular_root(m)
    strength, drag = equivalent_steady(m)
    share = share_if_steady(strength, drag)
    inside = np.clip(share, 0.0, 1.0)
    with np.errstate(over="ignore"):
        fading = np.arcsinh(np.sqrt(np.maximum(np.maximum(-share, share - 1.0), 0.0))) / np.pi
    start = np.arctan2(np.sqrt(inside), np.sqrt(1.0 - inside)) / np.pi + 1j * (0.5 * drag - fading)
    searched, searched_codes = root_by_region(m, start, share)
    np.testing.assert_array_equal(codes, searched_codes)
    oscillates = codes == motion.OSCILLATES
    np.testing.assert_allclose(root[oscillates], searched[oscillates], rtol=0.0, atol=1e-12)


def test_guesses_broadcast_with_the_arguments():
    h, near = np.array([0.08, 0.1, 0.12]), np.array([0.1, np.nan, 0.16])
    rows = np.full((2, 1), 0.1)
    nu, codes = motion.ring_down(h, rows, 6e-4, 0.4, near=near)
    assert nu.shape == codes.shape == (2, 3)
    np.testing.assert_allclose(nu, motion.ring_down(h, rows, 6e-4, 0.4)[0], atol=1e-12)
    assert isinstance(motion.response_peak(0.1, 0.1, 6e-4, 0.4, near=0.12)[0], float)
    assert motion.ring_down([], [], near=[])[0].shape == (0,)
    assert motion.response_peak([], [], near=0.1)[0].shape == (0,)


@pytest.mark.parametrize("place", [anywhere, wild])
def test_the_branch_ends_at_the_greatest_stiffness(place):
    h, b, added_mass, history = place(np.random.default_rng(13))
    top = motion.stiffness_maximum(b, added_mass, history)
    h = np.where(np.arange(COUNT) % 2 == 0, h, top * np.random.default_rng(14).uniform(0.999, 1.001, COUNT))
    on = motion.on_branch(h, b, added_mass, history)
    np.testing.assert_array_equal(on, h <= top)
    np.testing.assert_array_equal(motion.on_branch(-h, b, added_mass, history), on)
    assert np.any(on)
    assert not np.all(on)


def test_no_frequency_is_made_of_rounding():
    # locked however near the line Re v = 1/2 the search ends, relaxing however little it leaves Re v = 0
    strongly_driven = (2.403968251674657, 3.2530497416756323, 0.008260050470524477, 0.009228911817780872)
    hardly_driven = (1.2311839395694181e-06, 0.013769990880705432, 0.05488575965789911, 2.993394912274978)
    assert motion.regime(*strongly_driven) == motion.LOCKED
    assert motion.regime(*hardly_driven) == motion.RELAXES
