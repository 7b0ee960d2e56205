"""The files of a results folder: what each is, which of them a run has made, and what is no result."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path

from reduction.batches import STATE

PROGRAM = "program"  # folder of the workflow's definition, as it was run
MARKING = "marking"  # folder of marks and bench reports: personal, with checksums of its own
CAMPAIGN = "campaign"  # folder of the input files in a bundle that was packed with them
SUMS = "SHA256SUMS"  # file of the checksums of all others
NO_RESULTS = (STATE, ".snakemake")
"""Folders of a results folder that hold the state of its runs."""


@dataclass(frozen=True)
class Kind:
    """One kind of file in a results folder."""

    pattern: str  # path; `{session}` stands for each session's id, `{name}` for one part of a name
    about: str
    maker: str = ""  # file that the same job makes and the workflow knows of, where it does not know this one

    @property
    def media(self) -> str:
        """Media type."""
        return _MEDIA.get(Path(self.pattern).suffix, "text/plain")


_MEDIA = {".csv": "text/csv", ".json": "application/json", ".pdf": "application/pdf", ".html": "text/html"}

KINDS = (
    Kind("particles.csv", "Charge-to-mass ratio, mass, charge and u of each particle."),
    Kind("methods.csv", "What each method says of each particle alone, and all of them adjusted together."),
    Kind("agreement.csv", "How well each pair of methods agrees on a particle."),
    Kind("inputs.csv", "Inputs that readings share: the stated estimate and the adjusted one."),
    Kind("components.csv", "Components of every result: a square root of the covariance of all of them."),
    Kind("budget.csv", "Uncertainty of every result, by what causes it."),
    Kind("comparison.csv", "Mean of each group, with the session as the unit, and the chance of each rank."),
    Kind("contrasts.csv", "Differences and ratios of each pair of groups."),
    Kind("session_means.csv", "Mean of each session in each group, with what it was measured in."),
    Kind("trends.csv", "What session means go with: order, humidity, temperature, contacts."),
    Kind("series.csv", "Whether pairwise differences make one order of the groups."),
    Kind("group_budget.csv", "Uncertainty of group means and differences, by what causes it."),
    Kind("histogram.csv", "Charge in electrons, counted in bins no finer than its uncertainty."),
    Kind("charge_distribution.csv", "Charges in order, with the share of particles at or below each."),
    Kind("charge_summary.csv", "Charge of each group and species: mean, intrinsic spread, fraction positive, window."),
    Kind("comparison.json", "What the comparison says in words, and what it rests on."),
    Kind("run.json", "What the results were made from: digests of input files and program, settings, versions."),
    Kind("figures/agreement.csv", "Numbers drawn in the figure of the methods' agreement.", "report.pdf"),
    Kind("figures/comparison.csv", "Numbers drawn in the figure of the groups.", "report.pdf"),
    Kind("figures/sessions_in_time.csv", "Numbers drawn in the figure of the sessions in time.", "report.pdf"),
    Kind("figures/field_on_axis.csv", "Numbers drawn in the figures of drawn traps' fields.", "report.pdf"),
    Kind("report.pdf", "The campaign's report."),
    Kind("report.html", "The campaign's report as a page for a screen."),
    Kind("readings/{session}.csv", "The checked readings of one session in SI, with residuals, flags and exclusions."),
    Kind("sessions/{session}.pdf", "The report of one session."),
    Kind(f"{PROGRAM}/Snakefile", "The workflow's definition: which step follows which.", SUMS),
    Kind(f"{PROGRAM}/workflow/rules/{{name}}.smk", "Rules of the workflow.", SUMS),
    Kind("readings.schema.json", "Columns of the tables of readings, for the data package."),
    Kind("datapackage.json", "Data package: every table with the type, unit and meaning of its columns."),
    Kind("ro-crate-metadata.json", "Research object: files, inputs, program and the run that ties them together."),
)
"""Every kind of file a run makes, except checksums and the marking."""

_KIND = {kind.pattern: kind for kind in KINDS}


def kind_of(name: str) -> Kind | None:
    """Kind of a file by its path in the results folder; None where no run makes such a file."""
    folder, _, file = name.rpartition("/")
    stem, dot, end = file.rpartition(".")
    for form in (name, f"{folder}/{{session}}{dot}{end}", f"{folder}/{{name}}{dot}{end}"):
        if stem and form in _KIND:
            return _KIND[form]
    return _KIND.get(name)


def made_files(results: Path, sessions: Iterable[str]) -> list[str]:
    """Paths of the files a run has made, sorted: those of a kind in the table, and of sessions the run has.

    Parameters
    ----------
    results : Path
        A results folder.
    sessions : iterable of str
        Ids of the run's sessions.
    """
    known = set(sessions)
    found = []
    for name in every_file(results):
        kind = kind_of(name)
        if kind is not None and ("{session}" not in kind.pattern or Path(name).stem in known):
            found.append(name)
    return found


def every_file(folder: Path) -> list[str]:
    """Paths of all files of a results folder, sorted, without the state of its runs and without the marking."""
    return sorted(_files(folder, ""))


def _files(folder: Path, inside: str) -> Iterator[str]:
    for path in folder.iterdir():
        name = f"{inside}{path.name}"
        if name in (*NO_RESULTS, MARKING):
            continue
        if path.is_dir() and not path.is_symlink():
            yield from _files(path, f"{name}/")
        else:
            yield name
