"""Where the files that belong to the workflow lie: beside the package in a checkout, inside it once installed."""

from __future__ import annotations

from pathlib import Path

PACKAGE = Path(__file__).resolve().parent
"""The folder of this package."""


def root() -> Path:
    """Folder that holds `Snakefile` and `workflow/`: a wheel puts them into the package."""
    return PACKAGE if (PACKAGE / "Snakefile").is_file() else PACKAGE.parent


def snakefile() -> Path:
    """Path of the top-level Snakefile."""
    return root() / "Snakefile"


def workflow_folder() -> Path:
    """Folder of the rules, the report's templates, the schemas and the profiles."""
    return root() / "workflow"


def definition() -> list[tuple[str, Path]]:
    """Files that define the workflow, the Snakefile and its rules: path below `root`, and where it lies; sorted."""
    files = [snakefile(), *(workflow_folder() / "rules").glob("*.smk")]
    return sorted((path.relative_to(root()).as_posix(), path) for path in files)


def lock() -> Path:
    """File that pins every library the program was released with."""
    return root() / ".locks" / "requirements.lock"
