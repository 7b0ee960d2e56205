# Purpose: settle where the run reads and writes and what it has to do, before any rule is looked at.
# Brings:  PLAN (sessions, batches, digests); `step NAME` in the shell of a rule, which runs one step of reduction/steps.py.
# Light:   nothing is imported here that takes longer than reading the campaign's files.

import os
import shlex
import subprocess
import sys
from pathlib import Path

from snakemake.exceptions import WorkflowError
from snakemake_interface_executor_plugins.settings import ExecMode

HERE = Path(workflow.basedir)
INSTALLED = (HERE / "places.py").is_file()  # this workflow lies in the package, and not beside it in a checkout
HOME = HERE.parent if INSTALLED else HERE
sys.path.insert(len(sys.path) if INSTALLED else 0, str(HOME))

from reduction import batches, resultsfolder
from reduction.errors import ReductionError

IS_RUN = workflow.exec_mode == ExecMode.DEFAULT  # and no job of a run that re-reads this file on a cluster

try:
    if IS_RUN:
        CAMPAIGN = resultsfolder.folder_of(config.get("campaign", str(HERE / "data_example")), "campaign")
        RESULTS = resultsfolder.folder_of(config.get("results", "results"), "results")
    else:
        CAMPAIGN, RESULTS = (Path(os.environ[name]) for name in resultsfolder.FOLDERS)
    resultsfolder.check_code(HOME)
    if IS_RUN:
        HELD, PLAN = resultsfolder.begin(CAMPAIGN, RESULTS)
    else:
        HELD, PLAN = resultsfolder.join(RESULTS), batches.Plan.load(RESULTS)
except ReductionError as error:
    raise WorkflowError(str(error)) from None


workdir: str(RESULTS)


SESSIONS = sorted(PLAN.sessions)
STEP = [sys.executable, "-m", "reduction.steps", "--campaign", str(CAMPAIGN)]

os.environ.update(resultsfolder.job_environment(CAMPAIGN, RESULTS, None if INSTALLED else HOME))
TOLD = 'echo "$*: ended by signal $((code - 128)), as where memory runs out. What is done stays: start the same command again."'
STEPS = f'set -euo pipefail; step() {{ {shlex.join(STEP)} "$@" || {{ code=$?; [ $code -le 128 ] || {TOLD}; return $code; }}; }}; '
shell.prefix(STEPS.replace("{", "{{").replace("}", "}}"))


wildcard_constraints:
    batch=r"[A-Za-z0-9][A-Za-z0-9_-]*",


onstart:
    if subprocess.run([*STEP, "check"]).returncode:
        raise WorkflowError(
            "The campaign has faults, listed above. Nothing was computed, earlier results are as they were."
        )
