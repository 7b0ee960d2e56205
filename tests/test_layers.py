"""The house: imports go one way, each outside library has its door, what must be quick imports nothing heavy."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PACKAGE = ROOT / "reduction"

# A module imports from modules above it only.
_ORDER = """
errors places wholefile units flags
textfile contract yamlfile quantity entries logged sessionfile csvfile heads wording benchrows stateddigits digests
air gravity drag conductors clearances meridian boundary trapfield electrodes tolerances
fieldmap drawing drawingfile drawingcheck trapconstants trapsolution
recurrence floquet secular resonance motion
markrows markscheme claims markingfiles markrecord pseudonyms
settings schemas logs check newcampaign
inputs methods fits normalequations reducedequations lotvolume adjustment charge starts propagation
budget agreement preparation slips solution strain
shapes noise montecarlo outcome window sanity refits validation
tables correlated multiplicity randomeffects sessionmeans groupmeans pairs ranks transitivity trends comparison
unseen intrinsic histogram planning comparisonwords groupbudget comparisontables
records resultrows readingrows curves sessionfacts session
benchreference mistakes criteria valuemark marking markedbench marksheet postedmarks fieldspans gradebook
simulationplan simulationtruth simulationreadings simulationfiles simulationexample simulation
simulationclaims simulationcourse
typeset sheets figurestyle panels figures campaignfigures comparisonfigures chargefigures trapwords trapfigures
limits sessiontables sessionbudget glance campaigntables sessionreport
comparisonpages comparisonsheets comparisonreport campaignsections trapreport campaignreport
benchfigures advice benchreport classfigures classsummary
webfigure webfont webpage report markingpages findings equations explain
batches resultfiles columns checksums datapackage crate provenance
resultsfolder rundiff reasons resultsdiff diffwords bundle sessionsneeded assembly steps running trapcommand command
"""
ORDER = _ORDER.split()

# Libraries that one part of the house alone may use, and why there.
DOORS = {
    "lmfit": {"fits"},
    "typst": {"report"},
    "jinja2": {"webpage"},
    "markupsafe": {"webpage"},
    "fontTools": {"webfont"},
    "matplotlib": {
        "figurestyle",
        "panels",
        "figures",
        "campaignfigures",
        "benchfigures",
        "classfigures",
        "trapfigures",
        "report",
    },  # report: the folder of its fonts
    "yaml": {"yamlfile", "digests", "newcampaign", "simulationtruth"},  # digests: texts only, before the check
    "snakemake": set(),
}
FORBIDDEN = {"pickle", "dill", "marshal", "shelve"}
HEAVY = ("numpy", "pandas", "scipy", "matplotlib", "lmfit", "typst", "uncertainties")


def modules() -> list[Path]:
    return sorted(path for path in PACKAGE.glob("*.py") if path.stem != "__init__")


def imports(path: Path) -> Iterator[str]:
    """Full names of what a module imports, wherever in it."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path.name}: relative import"
            assert node.module
            yield from (f"{node.module}.{alias.name}" for alias in node.names)


def test_every_module_has_its_place_in_the_order() -> None:
    assert sorted(ORDER) == [path.stem for path in modules()]


@pytest.mark.parametrize("path", modules(), ids=lambda path: path.stem)
def test_module_imports_from_modules_above_it_only(path: Path) -> None:
    assert path.stem in ORDER, "give it a place in ORDER, above all that import it"
    own = [name.split(".")[1] for name in imports(path) if name.startswith("reduction.")]
    below = [name for name in own if ORDER.index(name) >= ORDER.index(path.stem)]
    assert not below


@pytest.mark.parametrize("path", modules(), ids=lambda path: path.stem)
def test_library_is_used_behind_its_door_only(path: Path) -> None:
    used = {name.split(".")[0] for name in imports(path)}
    assert not [name for name in used if path.stem not in DOORS.get(name, {path.stem})]
    assert not used & FORBIDDEN


@pytest.mark.parametrize("path", modules(), ids=lambda path: path.stem)
def test_module_runs_no_text_as_code(path: Path) -> None:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Call):
            called = ast.unparse(node.func)
            assert called not in {"eval", "exec", "compile", "__import__", "os.system", "yaml.load", "yaml.unsafe_load"}
            words = {word.arg: word.value for word in node.keywords}
            assert "shell" not in words, f"line {node.lineno}: shell="
            if "scale_covar" in words:
                assert ast.unparse(words["scale_covar"]) == "False"


def test_package_is_flat_and_nothing_invites_dumping() -> None:
    assert [path.name for path in PACKAGE.iterdir() if path.is_dir() and path.name != "__pycache__"] == []
    assert not {"utils", "helpers", "common", "core", "lib", "misc", "tools", "base"} & set(ORDER)
    assert len((PACKAGE / "__init__.py").read_text().splitlines()) == 1


def _loaded(code: str) -> set[str]:
    told = f"import sys\n{code}\nprint('\\n', *sys.modules)"
    ran = subprocess.run([sys.executable, "-c", told], capture_output=True, text=True, check=True, cwd=ROOT)
    return set(ran.stdout.splitlines()[-1].split())


@pytest.mark.parametrize(
    "code",
    [
        "import reduction.command",
        "import reduction.command\ntry: reduction.command.main(['--help'])\nexcept SystemExit: pass",
        "import reduction.running",
        "from reduction import batches, resultsfolder",  # what workflow/rules/start.smk imports
        "from pathlib import Path\nfrom reduction import batches\nbatches.make_plan(Path('data_example'))",
    ],
)
def test_command_line_and_snakefile_import_nothing_heavy(code: str) -> None:
    assert not _loaded(code) & set(HEAVY)


def test_snakefile_imports_nothing_but_the_light_part_of_the_package() -> None:
    text = "".join(path.read_text() for path in [ROOT / "Snakefile", *(ROOT / "workflow" / "rules").glob("*.smk")])
    lines = [line for line in text.splitlines() if line.startswith(("import ", "from "))]
    named = {line.split()[1] for line in lines}
    assert named == {
        "os", "shlex", "subprocess", "sys", "pathlib", "reduction", "reduction.errors",
        "snakemake.exceptions", "snakemake.utils", "snakemake_interface_executor_plugins.settings",
    }  # fmt: skip
    assert "from reduction import batches, resultsfolder" in lines
    assert "run:" not in text
    assert "checkpoint" not in text


def test_fitting_job_loads_no_drawing_library() -> None:
    loaded = _loaded("import reduction.session, reduction.settings, reduction.logs")
    assert not loaded & {"matplotlib.pyplot", "reduction.figures", "typst"}


def test_drawing_job_loads_no_fitting_library() -> None:
    assert not _loaded("import reduction.report") & {"lmfit", "matplotlib.pyplot", "scipy.optimize"}
