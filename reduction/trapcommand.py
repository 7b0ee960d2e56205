"""One trap file by itself: its constants from the drawing of the electrodes, in words and as a page."""

from __future__ import annotations

from pathlib import Path

from reduction.batches import constants_folder
from reduction.digests import content, drawing_digest
from reduction.errors import Fault, Faults, InputError, ResultsError
from reduction.settings import load_trap
from reduction.trapwords import constants_text


def trap_text(file: Path, *, page: Path | None = None, results: Path | None = None) -> str:
    """What the drawing in a trap file says, for the terminal; its page is written where one is asked for.

    Parameters
    ----------
    file : Path
        A trap file with `electrodes`.
    page : Path, optional
        PDF to write.
    results : Path, optional
        A results folder, whose computed constants are used and added to.

    Raises
    ------
    InputError
        With every fault of the file.
    ResultsError
        If `results` holds no results.
    """
    if results is not None and not (results / "run.json").is_file():
        message = f"{results}: found no run.json; expected a results folder. Run a campaign into it first."
        raise ResultsError(message)
    faults = Faults()
    trap = load_trap(file, faults=faults, keep=None if results is None else constants_folder(results))
    if trap is None:
        raise InputError(faults)
    if trap.constants is None:
        raise InputError([
            Fault(file.name, column="electrodes", found="the two constants as stated",
                  expected="a drawing of the electrodes to compute them from",
                  advice="Draw the electrodes in place of the constants; see the README."),
        ])  # fmt: skip
    text = constants_text(trap.id, trap.constants, trap.source)
    if page is not None:
        from reduction.report import trap_pdf

        trap_pdf(trap.id, trap.constants, page, digest=drawing_digest(content(file)), source=trap.source)
        text += f"\npage: {page}\n"
    return text
