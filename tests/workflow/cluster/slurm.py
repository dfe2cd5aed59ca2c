"""A real Slurm on this machine: one controller, three nodes, everything inside one folder.

Every program is told where its configuration is by ``SLURM_CONF``, so that nothing outside the
folder is touched and nothing is left when the daemons end. Settings are from the manual page
slurm.conf(5): no accounting, no cgroups; several nodes on one host by ``NodeHostname`` and a port
of their own each.
"""

import getpass
import os
import secrets
import shutil
import signal
import socket
import subprocess
from dataclasses import dataclass
from pathlib import Path

from tests.workflow.cluster.processes import end_process, holders, tree, wait_until

__all__ = ["NODES", "Slurm", "missing_programs"]

NODES = ("n1", "n2", "n3")
_DAEMONS = ("munged", "slurmctld", "slurmd")
_COMMANDS = ("sbatch", "srun", "squeue", "scancel", "scontrol", "sinfo")
_UP = ("idle", "mixed", "allocated")
_PATH = os.pathsep.join([os.environ.get("PATH", os.defpath), "/usr/sbin", "/sbin"])

_SRUN = """\
#!/bin/sh
# The plugin's job step starts srun without any variable of Slurm, this one among them.
SLURM_CONF={folder}/slurm.conf exec {srun} "$@"
"""

_CONFIGURATION = """\
ClusterName=test
SlurmctldHost={host}(127.0.0.1)
SlurmctldPort={ports[0]}
SlurmUser={user}
SlurmdUser={user}
AuthType=auth/munge
AuthInfo=socket={folder}/munge/socket
MpiDefault=none
ProctrackType=proctrack/linuxproc
TaskPlugin=task/none
JobAcctGatherType=jobacct_gather/linux
JobAcctGatherFrequency=1
JobAcctGatherParams=OverMemoryKill
SelectType=select/cons_tres
SelectTypeParameters=CR_Core_Memory
AccountingStorageType=accounting_storage/none
JobCompType=jobcomp/none
MinJobAge=3600
ReturnToService=2
EnforcePartLimits=ALL
SchedulerParameters=batch_sched_delay=0
SlurmdTimeout=10
KillWait=2
StateSaveLocation={folder}/state
SlurmctldPidFile={folder}/controller.pid
SlurmctldLogFile={folder}/controller.log
SlurmdPidFile={folder}/%n.pid
SlurmdLogFile={folder}/%n.log
SlurmdSpoolDir={folder}/%n.spool
SlurmdParameters=config_overrides
NodeName=n1 NodeHostname={host} NodeAddr=127.0.0.1 Port={ports[1]} CPUs=2 RealMemory=6000
NodeName=n2 NodeHostname={host} NodeAddr=127.0.0.1 Port={ports[2]} CPUs=2 RealMemory=6000
NodeName=n3 NodeHostname={host} NodeAddr=127.0.0.1 Port={ports[3]} CPUs=2 RealMemory=6000
PartitionName=main Nodes=ALL Default=YES MaxTime=INFINITE State=UP
"""


def missing_programs() -> list[str]:
    """Return the programs of Slurm and munge that this machine does not have."""
    return [name for name in (*_DAEMONS, *_COMMANDS) if shutil.which(name, path=_PATH) is None]


def _free_ports(number: int) -> list[int]:
    """Return ports that nobody listens on."""
    sockets = [socket.socket() for _ in range(number)]
    for one in sockets:
        one.bind(("127.0.0.1", 0))
    ports = [one.getsockname()[1] for one in sockets]
    for one in sockets:
        one.close()
    return ports


@dataclass(frozen=True)
class Slurm:
    """The cluster, started and stopped as a whole or in parts."""

    folder: Path

    @property
    def environment(self) -> dict[str, str]:
        """Variables with which a program finds this cluster."""
        path = f"{self.folder}/bin{os.pathsep}{_PATH}"
        return {"PATH": path, "SLURM_CONF": str(self.folder / "slurm.conf")}

    def start(self) -> None:
        """Start authentication, controller and nodes, and wait until all nodes are idle."""
        (self.folder / "munge").mkdir(mode=0o755)
        key = self.folder / "munge" / "key"
        key.touch(mode=0o600)
        key.write_bytes(secrets.token_bytes(128))
        text = _CONFIGURATION.format(
            host=socket.gethostname().split(".")[0],
            user=getpass.getuser(),
            folder=self.folder,
            ports=_free_ports(4),
        )
        (self.folder / "slurm.conf").write_text(text)
        srun = self.folder / "bin" / "srun"
        srun.parent.mkdir()
        srun.write_text(_SRUN.format(folder=self.folder, srun=shutil.which("srun", path=_PATH)))
        srun.chmod(0o755)
        files = ("key-file", "socket", "pid-file", "log-file", "seed-file")
        munge = [f"--{file}={self.folder}/munge/{file.removesuffix('-file')}" for file in files]
        self.run("munged", "--force", *munge)  # forced: the folder of a test need not be root's
        self.start_controller()
        for node in NODES:
            self.start_node(node)

    def stop(self) -> None:
        """End everything that start has started, the jobs included."""
        for node in NODES:
            self.crash_node(node)
        for file in ("controller.pid", "munge/pid"):
            self._end_daemon(file)

    def start_controller(self) -> None:
        """Start the controller; it remembers jobs from before."""
        self.run("slurmctld")
        wait_until(lambda: self._call("scontrol", "ping").returncode == 0, 20, "no controller")

    def stop_controller(self) -> None:
        """End the controller; jobs run on, and nobody answers."""
        self._end_daemon("controller.pid")

    def start_node(self, node: str) -> None:
        """Start a node, and wait until it takes jobs."""
        self.run("slurmd", "-N", node)
        self.resume_node(node)

    def resume_node(self, node: str) -> None:
        """Let a node take jobs again that was out of service, unless it does so by itself."""
        if self.node_state(node) not in _UP:
            self._call("scontrol", "update", f"nodename={node}", "state=resume")
        wait_until(lambda: self.node_state(node) in _UP, 20, f"{node} is not up")

    def crash_node(self, node: str) -> None:
        """End a node as a loss of power would: its daemon and all processes of its jobs."""
        daemons = holders(self.folder / f"{node}.log")
        for pid in [pid for daemon in daemons for pid in tree(daemon)]:
            end_process(pid, signal.SIGKILL)

    def node_state(self, node: str) -> str:
        """Return the state of a node, as sinfo names it."""
        return (
            self.run("sinfo", "--noheader", f"--nodes={node}", "--format=%T").strip().rstrip("*$")
        )

    def jobs(self) -> list[dict[str, str]]:
        """Return what the controller knows of each job that it has ever taken."""
        text = self.run("scontrol", "--oneliner", "show", "job")
        lines = [line for line in text.splitlines() if line.startswith("JobId=")]
        return [dict(word.partition("=")[::2] for word in line.split()) for line in lines]

    def run(self, *call: str, folder: Path | None = None) -> str:
        """Run a program that finds this cluster, and return what it printed."""
        done = self._call(*call, folder=folder)
        assert done.returncode == 0, f"{call}: {done.stderr}"
        return done.stdout

    def _call(self, *call: str, folder: Path | None = None) -> subprocess.CompletedProcess[str]:
        environment = {**os.environ, **self.environment}
        return subprocess.run(
            call,
            env=environment,
            cwd=folder or self.folder,
            capture_output=True,
            text=True,
            check=False,
        )

    def _end_daemon(self, file: str) -> None:
        path = self.folder / file
        if path.exists():
            end_process(int(path.read_text()))
            path.unlink(missing_ok=True)
