"""How long it takes to mark a course: sixty benches of five particles, PDFs and all; run with `python`.

The aim is three minutes on two cores. What the workflow prints is shown as it comes; the shares of the steps are those
of the processor, so that they say the same on a busy machine.
"""

from __future__ import annotations

import argparse
import os
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from reduction.simulationcourse import mistake_of, simulate_course

AIM_S = 180.0


def main() -> None:
    """Simulate a course, mark it from nothing, then mark it again with one bench changed."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--benches", type=int, default=60)
    parser.add_argument("--particles", type=int, default=5)
    parser.add_argument("--cores", type=int, default=2)
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as scratch:
        campaign, results = Path(scratch) / "course", Path(scratch) / "results"
        mistakes = [mistake_of(number) for number in range(asked.benches)]
        simulate_course(campaign, mistakes=mistakes, seed=1, particles=asked.particles)
        wall, work = _timed(campaign, results, asked.cores)
        pages = len(list((results / "marking" / "bench").glob("*.pdf")))
        print(
            f"{asked.benches} benches of {asked.particles}, {pages} feedback PDFs, {asked.cores} cores: {wall:.0f} s, "
            f"{work:.0f} s of processor time; {wall / AIM_S:.2f} of the aim of {AIM_S:.0f} s"
        )
        claims = campaign / "sessions" / "bench-002" / "claims.csv"
        claims.write_text("".join(claims.read_text().splitlines(keepends=True)[:-1]))
        again, work = _timed(campaign, results, asked.cores)
        print(f"one claim changed: {again:.0f} s, {work:.0f} s of processor time; {again / wall:.2f} of the first run")


def _timed(campaign: Path, results: Path, cores: int) -> tuple[float, float]:
    command = [sys.executable, "-m", "reduction.command", "run", str(campaign), str(results), "--cores", str(cores)]
    before, start = resource.getrusage(resource.RUSAGE_CHILDREN), time.perf_counter()
    subprocess.run(command, check=True, env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])})
    wall, after = time.perf_counter() - start, resource.getrusage(resource.RUSAGE_CHILDREN)
    return wall, after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime


if __name__ == "__main__":
    main()
