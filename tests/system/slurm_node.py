"""A Slurm of one node for a test: its own key, sockets and folders, ended by its own process ids."""

import os
import pwd
import shutil
import socket
import subprocess
import time
from pathlib import Path

CONFIGURATION = """\
ClusterName=test
SlurmctldHost={node}(127.0.0.1)
SlurmctldPort={port}
SlurmdPort={other_port}
SlurmUser={user}
SlurmdUser={user}
AuthType=auth/munge
AuthInfo=socket={folder}/munge.socket
CommunicationParameters=NoInAddrAny,NoCtldInAddrAny
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
SelectType=select/cons_tres
SelectTypeParameters=CR_Core
SchedulerType=sched/backfill
SchedulerParameters=sched_interval=1,bf_interval=1
MpiDefault=none
SwitchType=switch/none
ReturnToService=2
MailProg=/bin/true
KillWait=2
MinJobAge=3600
NodeName={node} NodeAddr=127.0.0.1 CPUs=2 RealMemory=2000 State=UNKNOWN
PartitionName=all Nodes={node} Default=YES MaxTime=INFINITE State=UP
"""


class SlurmNode:
    """Started when it is made; `environment` is what Slurm's commands need."""

    def __init__(self, folder: Path):
        self.folder = folder
        self._running = []
        node, user = socket.gethostname().split(".")[0], pwd.getpwuid(os.getuid()).pw_name
        for name in ("state", "spool"):
            (folder / name).mkdir()
        text = CONFIGURATION.format(
            node=node, user=user, folder=folder, port=_free_port(), other_port=_free_port()
        )
        (folder / "slurm.conf").write_text(text)
        self.environment = {**os.environ, "SLURM_CONF": str(folder / "slurm.conf")}
        self._start_munge()
        self._start("slurmctld", "-D", "-i", "-f", folder / "slurm.conf")
        self._start("slurmd", "-D", "-f", folder / "slurm.conf", "-N", node)
        self.wait(lambda: "idle" in self.run("sinfo", "--noheader", "--format=%t"))

    def _start_munge(self):
        key = self.folder / "munge.key"
        key.write_bytes(os.urandom(1024))
        key.chmod(0o400)
        self._start(
            "munged", "--foreground", "--force", "--key-file", key,
            "--socket", self.folder / "munge.socket", "--pid-file", self.folder / "munged.pid",
            "--log-file", self.folder / "munged.log", "--seed-file", self.folder / "munged.seed",
        )  # fmt: skip
        self.wait((self.folder / "munge.socket").exists)

    def _start(self, program, *arguments):
        path = shutil.which(program, path=f"{os.environ['PATH']}:/usr/sbin")
        assert path, f"{program} is not installed; .ci/run installs slurm-wlm and munge"
        with (self.folder / f"{program}.out").open("w") as output:
            command = [path, *map(str, arguments)]
            process = subprocess.Popen(command, env=self.environment, stdout=output, stderr=output)
        self._running.append(process)

    def run(self, *command, **options) -> str:
        """Output of one of Slurm's commands."""
        run = subprocess.run(
            command, env=self.environment, capture_output=True, text=True, check=False, **options
        )
        return run.stdout

    def wait(self, ready, seconds=60):
        """Wait until something holds."""
        until = time.monotonic() + seconds
        while not ready():
            assert time.monotonic() < until, self.run("squeue") + self.run("sinfo", "-R")
            time.sleep(0.1)

    def state(self, job) -> str:
        """Of a job: 'RUNNING', 'COMPLETED', ...; of an array, those of all its elements."""
        told = self.run("scontrol", "show", "job", str(job))
        return " ".join(word[9:] for word in told.split() if word.startswith("JobState="))

    def end(self):
        """End what was started, the last first."""
        for process in reversed(self._running):
            process.terminate()
            try:
                process.wait(timeout=10)
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait()


def _free_port():
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        return free.getsockname()[1]
