"""A Slurm cluster of several nodes on one machine: all of it in one folder, ended by whoever began it.

Nothing of the machine's own configuration is read or written: SLURM_CONF names a file in the folder, the ports are free
ones, and the daemons are children of this process, ended by their own ids.
"""

from __future__ import annotations

import contextlib
import getpass
import os
import re
import secrets
import shutil
import signal
import socket
import subprocess
import time
from collections.abc import Callable, Iterator
from pathlib import Path

DAEMONS = ("munged", "slurmctld", "slurmd")
COMMANDS = ("sbatch", "squeue", "sinfo", "scancel", "scontrol", "srun")
SBIN = os.pathsep.join(["/usr/sbin", "/usr/local/sbin", "/sbin"])

CONFIGURATION = """\
ClusterName=test
SlurmctldHost={host}(127.0.0.1)
SlurmctldPort={controller}
SlurmUser={user}
SlurmdUser={user}
AuthType=auth/munge
AuthInfo=socket={folder}/munge.sock
CredType=cred/munge
StateSaveLocation={folder}/state
SlurmdSpoolDir={folder}/spool-%n
SlurmctldPidFile={folder}/slurmctld.pid
SlurmdPidFile={folder}/slurmd-%n.pid
SlurmdParameters=config_overrides
ProctrackType=proctrack/linuxproc
JobAcctGatherType=jobacct_gather/none
AccountingStorageType=accounting_storage/none
TaskPlugin=task/none
MpiDefault=none
SelectType=select/cons_tres
SelectTypeParameters=CR_Core
SchedulerParameters=sched_min_interval=100000,bf_interval=1
MinJobAge=3600
ReturnToService=2
SlurmdTimeout=10
KillWait=2
{nodes}
PartitionName=all Nodes=ALL Default=YES State=UP MaxTime=INFINITE
"""
NODE = "NodeName={name} NodeHostname={host} NodeAddr=127.0.0.1 Port={port} CPUs=1 RealMemory=2000 State=UNKNOWN"


def missing() -> str:
    """What of Slurm is not on this machine; empty where all of it is."""
    path = os.pathsep.join([os.environ.get("PATH", ""), SBIN])
    return ", ".join(name for name in (*DAEMONS, *COMMANDS) if not shutil.which(name, path=path))


class Cluster:
    """A controller and nodes that run until the cluster is stopped."""

    def __init__(self, folder: Path, nodes: int = 2) -> None:
        self.folder = folder
        self.nodes = [f"n{number}" for number in range(1, nodes + 1)]
        self.environment = {
            "SLURM_CONF": str(folder / "slurm.conf"),
            "PATH": os.pathsep.join([str(folder / "bin"), os.environ.get("PATH", ""), SBIN]),
        }
        self._running: dict[str, subprocess.Popen[bytes]] = {}

    def start(self) -> None:
        """Start the daemons and wait until every node is idle."""
        folder = self.folder
        folder.chmod(0o755)
        for part in ("state", "bin", "log"):
            (folder / part).mkdir()
        (folder / "munge.key").write_bytes(secrets.token_bytes(128))
        (folder / "munge.key").chmod(0o600)
        host = socket.gethostname().split(".")[0]
        controller, *ports = free_ports(1 + len(self.nodes))
        nodes = [NODE.format(name=name, host=host, port=port) for name, port in zip(self.nodes, ports, strict=True)]
        text = CONFIGURATION.format(
            host=host, controller=controller, user=getpass.getuser(), folder=folder, nodes="\n".join(nodes)
        )
        (folder / "slurm.conf").write_text(text)
        self._wrap_srun()
        munge = ["--foreground", f"--key-file={folder}/munge.key", f"--socket={folder}/munge.sock"]
        munge += [f"--pid-file={folder}/munged.pid", f"--log-file={folder}/log/munge", f"--seed-file={folder}/seed"]
        self._daemon("munged", "munged", *munge)
        self._wait(lambda: (folder / "munge.sock").exists(), "munged did not start")
        self._daemon("slurmctld", "slurmctld", "-D")
        for name in self.nodes:
            self.start_node(name)
        self._wait(lambda: self.states() == dict.fromkeys(self.nodes, "idle"), "the nodes did not come up")

    def start_node(self, name: str) -> None:
        """Start the daemon of one node."""
        self._daemon(name, "slurmd", "-D", "-N", name)

    def lose_node(self, name: str) -> None:
        """Kill the daemon of one node and all that runs on it, as where its power fails."""
        lost = {job for job, (_, node, _) in self.jobs("running").items() if node == name}
        self._end(name, signal.SIGKILL)
        self._kill_steps(lost)

    def states(self) -> dict[str, str]:
        """State of each node."""
        told = self.ask("sinfo", "--noheader", "--Node", "--format=%N %T")
        return dict(line.split() for line in told.splitlines())

    def jobs(self, state: str = "all") -> dict[str, tuple[str, str, str]]:
        """Id of each job with its state, its node and its comment."""
        told = self.ask("squeue", "--noheader", f"--states={state}", "--format=%i|%T|%N|%k")
        return {key: (what, node, about) for key, what, node, about in (line.split("|") for line in told.splitlines())}

    def ask(self, *command: str) -> str:
        """Output of one of Slurm's commands; empty where it fails."""
        ran = subprocess.run(
            command, capture_output=True, text=True, check=False, timeout=60, env=os.environ | self.environment
        )
        return ran.stdout if ran.returncode == 0 else ""

    def stop(self) -> None:
        """Cancel every job and end every daemon that was started here."""
        if "slurmctld" in self._running:
            self.ask("scancel", f"--user={getpass.getuser()}")
            with contextlib.suppress(AssertionError):
                self._wait(lambda: not self.jobs("running,completing"), "jobs go on", seconds=10)
        for name in [name for name in self.nodes if name in self._running]:
            self._end(name, signal.SIGKILL)
        self._kill_steps(None)
        for name in ("slurmctld", "munged"):
            self._end(name, signal.SIGTERM)

    def _daemon(self, name: str, *command: str) -> None:
        program = shutil.which(command[0], path=self.environment["PATH"])
        with open(self.folder / "log" / f"{name}.out", "ab") as log:
            self._running[name] = subprocess.Popen(
                [str(program), *command[1:]],
                stdout=log, stderr=log, stdin=subprocess.DEVNULL, env=os.environ | self.environment,
                start_new_session=True,
            )  # fmt: skip

    def _end(self, name: str, number: signal.Signals) -> None:
        process = self._running.pop(name, None)
        if process is None:
            return
        process.send_signal(number)
        try:
            process.wait(10)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait(10)

    def _kill_steps(self, jobs: set[str] | None) -> None:
        """Kill the processes of jobs (all where None); they are no children of ours, and known by our configuration."""
        ours = f"SLURM_CONF={self.folder}/slurm.conf".encode()
        for path in Path("/proc").glob("[0-9]*"):
            with contextlib.suppress(OSError):
                step = re.match(rb"slurmstepd: \[(\d+)\.", (path / "cmdline").read_bytes())
                if not step or ours not in (path / "environ").read_bytes().split(b"\0"):
                    continue
                if jobs is None or step[1].decode() in jobs:
                    for pid in (*descendants(int(path.name)), int(path.name)):
                        with contextlib.suppress(ProcessLookupError):
                            os.kill(pid, signal.SIGKILL)

    def _wrap_srun(self) -> None:
        """Give `srun` the configuration again, which the step of a job takes away: a cluster's own lies in /etc."""
        real = shutil.which("srun", path=os.pathsep.join([os.environ.get("PATH", ""), SBIN]))
        wrapper = self.folder / "bin" / "srun"
        wrapper.write_text(f'#!/bin/sh\nexport SLURM_CONF="{self.folder}/slurm.conf"\nexec "{real}" "$@"\n')
        wrapper.chmod(0o755)

    def _wait(self, done: Callable[[], object], message: str, seconds: float = 60) -> None:
        deadline = time.monotonic() + seconds
        while not done():
            if time.monotonic() > deadline:
                logs = [path.read_text(errors="replace")[-2000:] for path in (self.folder / "log").iterdir()]
                raise AssertionError("\n".join([message, *logs]))
            time.sleep(0.2)


def descendants(pid: int) -> Iterator[int]:
    """Children of a process and theirs, the youngest first."""
    with contextlib.suppress(OSError):  # it has ended meanwhile
        for thread in Path(f"/proc/{pid}/task").iterdir():
            for child in (thread / "children").read_text().split():
                yield from descendants(int(child))
                yield int(child)


def free_ports(count: int) -> list[int]:
    """Ports nobody listens on."""
    with contextlib.ExitStack() as stack:
        sockets = [stack.enter_context(socket.socket()) for _ in range(count)]
        for one in sockets:
            one.bind(("127.0.0.1", 0))
        return [one.getsockname()[1] for one in sockets]
