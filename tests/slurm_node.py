"""A whole Slurm on this machine: its own munge, controller and one node, in a temporary folder.

Needs Debian's packages slurm-wlm and munge, and root. Everything listens on the loopback address
and on ports that were free a moment ago.
"""

from __future__ import annotations

import contextlib
import os
import shutil
import signal
import socket
import subprocess
import time
from dataclasses import dataclass, field
from pathlib import Path

NEEDED = ("munged", "slurmctld", "slurmd", "sbatch", "scontrol", "squeue")

SLURM_CONF = """
ClusterName=topovettest
SlurmctldHost={host}(127.0.0.1)
SlurmctldPort={control_port}
SlurmdPort={node_port}
SlurmUser=root
AuthType=auth/munge
AuthInfo=socket={socket}
CredType=cred/munge
StateSaveLocation={folder}/state
SlurmdSpoolDir={folder}/spool
SlurmctldPidFile={folder}/slurmctld.pid
SlurmdPidFile={folder}/slurmd.pid
SlurmctldLogFile={folder}/slurmctld.log
SlurmdLogFile={folder}/slurmd.log
ProctrackType=proctrack/linuxproc
TaskPlugin=task/none
JobAcctGatherType=jobacct_gather/none
AccountingStorageType=accounting_storage/none
MpiDefault=none
SelectType=select/cons_tres
SelectTypeParameters=CR_CPU
SchedulerType=sched/backfill
ReturnToService=2
KillWait=3
JobRequeue=1
NodeName={host} NodeAddr=127.0.0.1 CPUs=2 RealMemory=8000 State=UNKNOWN
PartitionName=main Nodes={host} Default=YES State=UP MaxTime=60
"""


def why_not() -> str:
    """Why a Slurm cannot be started here; "" where it can."""
    missing = [name for name in NEEDED if _where(name) is None]
    if missing:
        return f"{', '.join(missing)} not installed (Debian: slurm-wlm, munge)"
    return "" if os.geteuid() == 0 else "starting Slurm needs root"


@dataclass
class Slurm:
    """A running Slurm.

    Attributes
    ----------
    folder
        Short enough for the path of a socket.
    environment
        For commands that are to talk to it.
    """

    folder: Path
    environment: dict[str, str]
    _daemons: list[subprocess.Popen[bytes]] = field(default_factory=list)

    def start(self) -> None:
        """Start it; raises RuntimeError with the ends of its logs where it does not come up."""
        host = socket.gethostname().split(".")[0]
        munge = self.folder / "munge.socket"
        for name in ("state", "spool"):
            (self.folder / name).mkdir()
        (self.folder / "slurm.conf").write_text(
            SLURM_CONF.format(
                host=host,
                control_port=_free_port(),
                node_port=_free_port(),
                socket=munge,
                folder=self.folder,
            )
        )
        (self.folder / "cgroup.conf").write_text("CgroupPlugin=cgroup/v1\n")
        key = self.folder / "munge.key"
        key.write_bytes(os.urandom(128))
        key.chmod(0o600)
        self.environment["SLURM_CONF"] = str(self.folder / "slurm.conf")
        self._daemon(
            *("munged", "--foreground", "--force", f"--socket={munge}", f"--key-file={key}"),
            *(f"--{kind}-file={self.folder}/munge.{kind}" for kind in ("pid", "log", "seed")),
        )
        self._until(munge.exists, "munge")
        self._daemon("slurmctld", "-D", "-c")
        self._daemon("slurmd", "-D", "-N", host)
        self._until(lambda: "idle" in self.query("sinfo", "-h", "-o", "%T"), "the node")

    def query(self, *words: str) -> str:
        """Output of a command; "" where it fails."""
        done = subprocess.run(words, env=self.environment, capture_output=True, text=True)
        return done.stdout.strip() if done.returncode == 0 else ""

    def submit(self, *words: str, cwd: Path) -> str:
        """Number of a job that was handed in with sbatch."""
        done = subprocess.run(
            ["sbatch", "--parsable", *words],
            env=self.environment,
            cwd=cwd,
            capture_output=True,
            text=True,
        )
        assert done.returncode == 0, done.stderr
        return done.stdout.strip()

    def state(self, job: str) -> str:
        """State of a job or of a task of an array."""
        shown = self.query("scontrol", "-o", "show", "job", job)
        words = [word for word in shown.split() if word.startswith("JobState=")]
        return words[0].partition("=")[2] if words else ""

    def wait_until_empty(self, seconds: float) -> None:
        """Wait until no job is left."""
        deadline = time.monotonic() + seconds
        while self.query("squeue", "-h"):
            if time.monotonic() > deadline:
                raise TimeoutError(self.query("squeue", "-r") + self._last_words())
            time.sleep(0.2)

    def stop(self) -> None:
        """End the daemons and what they started."""
        self.query("scancel", "--full", "--signal=KILL", "--user=root")
        for daemon in reversed(self._daemons):
            daemon.terminate()
        for daemon in reversed(self._daemons):
            try:
                daemon.wait(10)
            except subprocess.TimeoutExpired:
                with contextlib.suppress(ProcessLookupError):
                    os.killpg(daemon.pid, signal.SIGKILL)
                daemon.wait()

    def _daemon(self, name: str, *words: str) -> None:
        path = _where(name)
        assert path is not None
        with (self.folder / f"{name}.out").open("wb") as log:
            self._daemons.append(
                subprocess.Popen(
                    [path, *words],
                    env=self.environment,
                    stdout=log,
                    stderr=subprocess.STDOUT,
                    start_new_session=True,
                )
            )

    def _until(self, ready: object, what: str, seconds: float = 30) -> None:
        assert callable(ready)
        deadline = time.monotonic() + seconds
        while not ready():
            if time.monotonic() > deadline:
                raise RuntimeError(f"{what} did not come up\n{self._last_words()}")
            time.sleep(0.1)

    def _last_words(self) -> str:
        logs = [*self.folder.glob("*.log"), *self.folder.glob("*.out")]
        return "\n".join(f"{log.name}: {log.read_text(errors='replace')[-600:]}" for log in logs)


def _where(name: str) -> str | None:
    return shutil.which(name) or shutil.which(name, path="/usr/sbin:/sbin:/usr/local/sbin")


def _free_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])
