"""The fit engine against certified values: NIST/ITL Statistical Reference Datasets, nonlinear regression.

Data and certified values stand in tests/reference/strd in NIST's own files. The engine gives a covariance for absolute
weights; the certified standard deviations belong to weights estimated from the residuals, so they are the engine's
times sqrt(RSS / degrees of freedom).
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from reduction.fits import least_squares

STRD = Path(__file__).parent / "reference" / "strd"

MODELS: dict[str, Callable[[np.ndarray, np.ndarray], np.ndarray]] = {
    "Misra1a": lambda b, x: b[0] * -np.expm1(-b[1] * x),
    "DanWood": lambda b, x: b[0] * x ** b[1],
    "MGH09": lambda b, x: b[0] * (x**2 + x * b[1]) / (x**2 + x * b[2] + b[3]),
    "Rat42": lambda b, x: b[0] / (1 + np.exp(b[1] - b[2] * x)),
    "Eckerle4": lambda b, x: b[0] / b[1] * np.exp(-0.5 * ((x - b[2]) / b[1]) ** 2),
    "Thurber": lambda b, x: (b[0] + b[1] * x + b[2] * x**2 + b[3] * x**3) / (1 + b[4] * x + b[5] * x**2 + b[6] * x**3),
    "Bennett5": lambda b, x: b[0] * (b[1] + x) ** (-1 / b[2]),
}
TOLERANCE = {"Bennett5": 1e-4, "MGH09": 1e-4}  # NIST calls these higher difficulty; others 1e-6


@dataclass(frozen=True)
class Certified:
    """One NIST file: data, the two starts and the certified results."""

    starts: np.ndarray
    values: np.ndarray
    deviations: np.ndarray
    residual_sum: float
    freedom: int
    x: np.ndarray
    y: np.ndarray


def certified(name: str) -> Certified:
    text = (STRD / f"{name}.dat").read_text(encoding="ascii")
    table = np.array([line.split("=")[1].split() for line in re.findall(r"^ *b\d+ = .*$", text, re.M)], dtype=float)
    data = np.array(
        [line.split() for line in text[text.rindex("Data:") :].splitlines()[1:] if line.strip()], dtype=float
    )
    return Certified(
        starts=table[:, :2].T,
        values=table[:, 2],
        deviations=table[:, 3],
        residual_sum=float(re.findall(r"Residual Sum of Squares: +(\S+)", text)[0]),
        freedom=int(re.findall(r"Degrees of Freedom: +(\d+)", text)[0]),
        x=data[:, 1],
        y=data[:, 0],
    )


@pytest.mark.parametrize("start", [0, 1], ids=["start-1", "start-2"])
@pytest.mark.parametrize("name", sorted(MODELS))
def test_certified_parameters_and_standard_deviations_are_reproduced(name: str, start: int) -> None:
    known, model = certified(name), MODELS[name]
    names = [f"b{i + 1}" for i in range(len(known.values))]
    fit = least_squares(lambda b: model(b, known.x) - known.y, dict(zip(names, known.starts[start], strict=True)))
    assert fit.status == "ok"
    assert fit.dof == known.freedom
    tolerance = TOLERANCE.get(name, 1e-6)
    np.testing.assert_allclose(fit.values, known.values, rtol=tolerance)
    np.testing.assert_allclose(fit.chi_square, known.residual_sum, rtol=1e-8)
    absolute = np.sqrt(np.diag(fit.covariance))
    np.testing.assert_allclose(
        absolute * np.sqrt(known.residual_sum / known.freedom), known.deviations, rtol=10 * tolerance
    )


def test_the_files_say_as_many_observations_as_they_hold() -> None:
    for name in MODELS:
        known = certified(name)
        assert len(known.x) == known.freedom + len(known.values)


def test_covariance_does_not_follow_the_scatter() -> None:
    """Twice the residuals at the same stated weights: same covariance (absolute weights), four times chi-square."""
    known = certified("DanWood")
    model = MODELS["DanWood"]
    centre = model(known.values, known.x)
    start = dict(zip(["b1", "b2"], known.starts[1], strict=True))
    once = least_squares(lambda b: model(b, known.x) - known.y, start)
    twice = least_squares(lambda b: model(b, known.x) - (centre + 2 * (known.y - centre)), start)
    np.testing.assert_allclose(twice.chi_square, 4 * once.chi_square, rtol=0.02)
    np.testing.assert_allclose(np.diag(twice.covariance), np.diag(once.covariance), rtol=0.02)
