"""Make `data_example/` anew, and the truth behind it: `python tests/reference/make_example.py` from the checkout."""

from __future__ import annotations

import shutil
import sys
import tempfile
from pathlib import Path

HERE = Path(__file__).resolve().parent
CHECKOUT = HERE.parent.parent
sys.path.insert(0, str(CHECKOUT))

from reduction import simulationcourse  # noqa: E402  the checkout comes first
from reduction.simulation import EXAMPLE_SEED, example_plan, simulate_campaign  # noqa: E402  the checkout comes first


def main() -> None:
    """Simulate into a folder of its own, then put the files in place; the README stays."""
    with tempfile.TemporaryDirectory() as scratch:
        made = Path(scratch) / "data_example"
        simulate_campaign(made, plan=example_plan(), seed=EXAMPLE_SEED)
        place = CHECKOUT / "data_example"
        place.mkdir(exist_ok=True)
        for name in ("sessions", "species", "traps", "course"):
            shutil.rmtree(place / name, ignore_errors=True)
        shutil.copytree(made, place, dirs_exist_ok=True)
        for what in ("truth", "truth_inputs"):
            shutil.copy(made.with_name(f"data_example.{what}.csv"), HERE / f"example_{what}.csv")
        course = Path(scratch) / "course"
        truth = simulationcourse.simulate_course(
            course,
            mistakes=simulationcourse.EXAMPLE,
            seed=simulationcourse.EXAMPLE_SEED,
            particles=simulationcourse.EXAMPLE_PARTICLES,
        )
        shutil.copytree(course, place / "course")
        shutil.copy(truth, HERE / "course_truth_marks.csv")


if __name__ == "__main__":
    main()
