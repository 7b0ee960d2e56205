"""Reports of a session and of a campaign, archival and tagged PDF and a page: the same bytes for the same content."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from functools import lru_cache
from pathlib import Path
from typing import Any

import matplotlib
import typst

from reduction import campaignreport, figures, places, sessionreport, tables, trapreport, webpage
from reduction.campaigntables import NOT_TAKEN
from reduction.errors import ReductionError
from reduction.records import FACTS
from reduction.trapconstants import TrapConstants
from reduction.typeset import foreign, lettered, spelled
from reduction.wholefile import read_json, whole_file
from reduction.wording import CAUTIONS

STANDARDS: list[typst.PDFStandard] = ["a-2a", "ua-1"]
_DATE = 0  # of the document: archival PDF wants one, and the clock must not get in
_AGE = 10  # documents that Typst keeps what it worked out for, in case the next are like them
_FAULTS_MOST, _FAULT_LENGTH = 12, 260  # lines and characters that fit one page
_FIGURES = "figures"  # folder of the numbers drawn, beside the tables they come from


class ReportError(ReductionError, RuntimeError):
    """A report could not be set; the message says where in the template."""


def session_pdf(record_folder: Path, out: Path, *, digest: str, title: str = "") -> None:
    """Write the report of one session.

    Parameters
    ----------
    record_folder : Path
        The session's record; the numbers drawn are written into its `figures/`.
    out : Path
        The PDF, there whole or not at all.
    digest : str
        Digest of all that the session's report depends on, printed in the footer.
    title : str
        The campaign's title, printed below the session's name.

    Raises
    ------
    ReportError
        If the document cannot be set.
    """
    facts = read_json(Path(record_folder) / FACTS)
    if facts.get("status") in NOT_TAKEN:
        why = facts.get("faults") or [facts.get("reason") or ""]
        failed_session_pdf(str(facts["session"]), "\n".join(map(str, why)), out, digest=digest)
        return
    doc, drawings = sessionreport.content(Path(record_folder), digest=digest, title=title)
    rows = [row for drawing in drawings for row in drawing.rows]
    _write_twin(Path(record_folder) / _FIGURES, "particles", figures.COLUMNS, rows)
    set_document("session.typ", doc, out)


def failed_session_pdf(session: str, faults_text: str, out: Path, *, digest: str) -> None:
    """Write the one-page report of a session that was left out, saying why.

    Parameters
    ----------
    session : str
        Id.
    faults_text : str
        What is wrong or the reason given, one fault a line.
    out : Path
        The PDF.
    digest : str
        Digest printed in the footer.
    """
    lines = [foreign(_cut(line)) for line in faults_text.splitlines() if line.strip()]
    if len(lines) > _FAULTS_MOST:
        lines = [
            *lines[:_FAULTS_MOST],
            f"and {len(lines) - _FAULTS_MOST} more; the check of the campaign lists them all",
        ]
    doc = {
        **sessionreport.frame({"session": session}, digest),
        "kind": "Session left out",
        "faults": lines or ["No reason was recorded."],
        "cautions": [list(words) for words in CAUTIONS],
    }
    set_document("failed.typ", doc, out)


def trap_pdf(name: str, found: TrapConstants, out: Path, *, digest: str, source: str = "") -> None:
    """Write the page of one trap whose constants follow from the drawing of its electrodes.

    Parameters
    ----------
    name : str
        Of the trap.
    found : TrapConstants
        What its drawing makes.
    out : Path
        The PDF.
    digest : str
        Digest of the drawing, printed in the footer.
    source : str
        Where the drawing comes from.

    Raises
    ------
    ReportError
        If the document cannot be set.
    """
    set_document("trap.typ", trapreport.document(name, found, digest=digest, source=source), out)


def campaign_pages(
    results: Path,
    records: Mapping[str, Path],
    *,
    digest: str,
    title: str = "",
    traps: Mapping[str, Path] | None = None,
) -> None:
    """Write the report of a campaign, report.pdf to print and report.html for a screen, from the same content.

    Parameters
    ----------
    results : Path
        Folder with the campaign's tables and run.json; the numbers drawn are written into its `figures/`.
    records : mapping of str to Path
        Record folder of each session.
    digest : str
        The run's digest, printed in the footer.
    title : str
        The campaign's title; without it, what run.json names `title` among its settings.
    traps : mapping of str to Path, optional
        Traps whose electrodes are drawn, and the file of the constants that follow.

    Raises
    ------
    ReportError
        If the document cannot be set.
    """
    doc = _campaign(results, records, digest, title, traps or {})
    set_document("campaign.typ", doc, Path(results) / "report.pdf")
    with whole_file(Path(results) / "report.html") as handle:
        handle.write(webpage.page(doc, _faces()))


def campaign_pdf(results: Path, records: Mapping[str, Path], out: Path, *, digest: str, title: str = "") -> None:
    """Write the report of a campaign to print alone, to `out`; else as `campaign_pages`."""
    set_document("campaign.typ", _campaign(results, records, digest, title, {}), out)


def _campaign(
    results: Path, records: Mapping[str, Path], digest: str, title: str, traps: Mapping[str, Path]
) -> Mapping[str, Any]:
    """Content of a campaign's report; the numbers drawn are written beside the tables."""
    doc, drawings = campaignreport.content(Path(results), records, digest=digest, title=title, traps=traps)
    for name in campaignreport.FIGURES:
        (Path(results) / _FIGURES / f"{name}.csv").unlink(missing_ok=True)  # of an earlier run that drew more
        if drawing := drawings.get(name):
            _write_twin(Path(results) / _FIGURES, name, drawing.columns, drawing.rows)
    return doc


def _cut(line: str) -> str:
    return line if len(line) <= _FAULT_LENGTH else line[: _FAULT_LENGTH - 1] + "\N{HORIZONTAL ELLIPSIS}"


def _write_twin(folder: Path, name: str, columns: Sequence[str], rows: Sequence[Sequence[object]]) -> None:
    folder.mkdir(parents=True, exist_ok=True)
    listed = [dict(zip(columns, row, strict=True)) for row in rows]
    tables.write_table(folder / f"{name}.csv", columns, listed)


@lru_cache(maxsize=1)
def _fonts() -> typst.Fonts:
    """The faces Typst carries and those matplotlib carries, none of the machine's own."""
    return typst.Fonts(include_system_fonts=False, include_embedded_fonts=True, font_paths=[str(_faces())])


def _faces() -> Path:
    """Folder of the font files matplotlib brings."""
    return Path(matplotlib.get_data_path()) / "fonts" / "ttf"


def set_document(template: str, doc: Mapping[str, Any], out: Path) -> None:
    """Set one document of `workflow/report/` with its data, and write it as a PDF that is there whole or not at all."""
    text = json.dumps(_printable(doc), ensure_ascii=False, allow_nan=False)
    try:
        try:
            pdf = _compiled(template, text)
        except typst.TypstError:
            # Marks on letters of another script, some signs: no face has them, and an archive takes no page without.
            if (plain := spelled(text)) == text:
                raise
            pdf = _compiled(template, plain)
    except typst.TypstError as error:
        message = f"the report {Path(out).name} could not be set: {error.message}"
        raise ReportError(message) from error
    _forget()
    with whole_file(out) as handle:
        handle.write(pdf)


def _forget() -> None:
    """Let Typst age what it keeps of a document until it drops it; a batch would grow by 30 MB with each session."""
    for _ in range(_AGE):
        typst.compile(b"", font_paths=_fonts(), ignore_system_fonts=True)


def _printable(value: Any) -> Any:
    """The content with its drawings' letters as the page's faces have them."""
    if isinstance(value, Mapping):
        return {
            key: lettered(one) if key == "svg" and isinstance(one, str) else _printable(one)
            for key, one in value.items()
        }
    return [_printable(one) for one in value] if isinstance(value, list | tuple) else value


def _compiled(template: str, doc: str) -> bytes:
    folder = places.workflow_folder() / "report"
    return typst.compile(
        str(folder / template),
        root=str(folder),
        font_paths=_fonts(),
        ignore_system_fonts=True,
        sys_inputs={"doc": doc},
        pdf_standards=STANDARDS,
        timestamp=_DATE,
    )
