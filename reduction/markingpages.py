"""PDFs of a marked course: the feedback of one bench, and the summary of the class for the staff."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path

from reduction import benchreport, classsummary
from reduction.markrecord import BenchMarks
from reduction.report import set_document


def bench_pdf(
    marks: BenchMarks,
    record_folder: Path | None,
    out: Path,
    *,
    digest: str,
    title: str = "",
    show_reduction: bool = False,
) -> None:
    """Write the feedback of one bench; see `benchreport.content` for what it depends on.

    Raises
    ------
    ReportError
        If the document cannot be set.
    """
    doc = benchreport.content(marks, record_folder, digest=digest, title=title, show_reduction=show_reduction)
    set_document("bench.typ", doc, out)


def class_pdf(
    benches: Sequence[BenchMarks],
    out: Path,
    *,
    digest: str,
    title: str = "",
    unknown: Mapping[str, str] | None = None,
) -> None:
    """Write the summary of a class; see `classsummary.content` for what it depends on.

    Raises
    ------
    ReportError
        If the document cannot be set.
    """
    set_document("class.typ", classsummary.content(benches, digest=digest, title=title, unknown=unknown), out)
