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
