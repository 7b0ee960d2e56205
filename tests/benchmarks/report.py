"""Cost of a session's report of ten particles, against bare matplotlib drawing as many figures of the same readings.

Run from the checkout: python tests/benchmarks/report.py
"""

from __future__ import annotations

import io
import sys
import tempfile
import time
from pathlib import Path

from matplotlib.figure import Figure

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))
sys.path.insert(0, str(Path(__file__).resolve().parent.parent.parent))

from fake_record import write_record

from reduction import report
from reduction.tables import read_table


def bare(folder: Path) -> None:
    """Draw heights, secular frequencies and balance voltages of each particle on a figure of its own."""
    readings = read_table(folder / "readings.csv")
    for _, own in readings.groupby("particle"):
        figure = Figure(figsize=(6.5, 2.6))
        panels = figure.subplots(2, 3)
        for panel, (log, x, y) in zip(
            panels.flat,
            [("height", "dc_voltage_V", "height_mm"), ("secular", "drive_voltage_peak_V", "secular_frequency_Hz"),
             ("balance", "time_s", "balance_voltage_V"), ("height", "dc_voltage_V", "residual"),
             ("secular", "drive_voltage_peak_V", "residual"), ("balance", "time_s", "residual")],
            strict=True,
        ):  # fmt: skip
            chosen = own[own["log"] == log]
            panel.errorbar(chosen[x], chosen[y], chosen["u_reading"], linestyle="none", marker="o")
        figure.savefig(io.BytesIO(), format="svg")


def main() -> None:
    """Print both costs and their ratio, from one run."""
    with tempfile.TemporaryDirectory() as name:
        folder = write_record(Path(name) / "record", particles=11)
        report.session_pdf(folder, Path(name) / "warm.pdf", digest="0" * 64)
        bare(folder)
        start = time.process_time()
        report.session_pdf(folder, Path(name) / "out.pdf", digest="0" * 64)
        ours = time.process_time() - start
        start = time.process_time()
        bare(folder)
        theirs = time.process_time() - start
    print(f"session report, 10 particles: {ours:.2f} s of core time")
    print(f"bare matplotlib, the same 10 figures alone: {theirs:.2f} s")
    print(f"ratio: {ours / theirs:.2f}")


if __name__ == "__main__":
    main()
