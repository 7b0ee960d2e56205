"""Small simulated campaigns that several tests copy and change."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest
from edited import Edited, copied, simulated
from finished import finish
from finished import simulated as two_materials
from hypothesis import HealthCheck, settings

settings.register_profile("untimed", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("untimed")  # how busy the machine is says nothing about the program


@pytest.fixture(scope="session")
def light(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One 20 um bead in room air: balance and heights; no secular oscillation exists."""
    return simulated(tmp_path_factory.mktemp("simulated") / "light", "room_air_light", seed=5)


@pytest.fixture(scope="session")
def pair(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The same bead and another one."""
    return simulated(tmp_path_factory.mktemp("simulated") / "pair", "room_air_light", seed=5, particles=2)


@pytest.fixture(scope="session")
def dense(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One dense 60 um bead in room air: balance, heights and secular frequencies."""
    return simulated(tmp_path_factory.mktemp("simulated") / "dense", "room_air_dense", seed=5)


@pytest.fixture(scope="session")
def low_pressure(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One 30 um bead at a few hectopascal: balance and secular frequencies."""
    return simulated(tmp_path_factory.mktemp("simulated") / "low", "low_pressure", seed=5)


@pytest.fixture(scope="session")
def finished_run(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    """A campaign of three sessions and its results, in folders with spaces and umlauts; not to be changed."""
    folder = tmp_path_factory.mktemp("finished") / "Büro (2)"
    folder.mkdir()
    campaign = two_materials(folder / "my campaign")
    return campaign, finish(campaign, folder / "my results")


@pytest.fixture
def edit(tmp_path: Path) -> Callable[[Path], Edited]:
    """Copy a campaign into this test's folder, to change it."""

    def copy(source: Path) -> Edited:
        return copied(source, tmp_path / f"campaign-{len(list(tmp_path.iterdir()))}")

    return copy
