"""A real Slurm on one node of its own: job arrays, the signal, putting back into the queue, resuming, merging.

It is started here without the system's services, on 127.0.0.1, from Debian's packages slurmctld, slurmd, slurm-client
and munge.  Where they are not installed, or this is not root, the tests are skipped and say so.
"""

from __future__ import annotations

import os
import shutil
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from tempfile import TemporaryDirectory

import pytest
import xarray

from scatterpump.sweep.status import sweep_status

EXAMPLES = Path(__file__).parents[1] / "examples" / "cluster"
BIN = Path(sys.executable).parent
NEEDED = ("munged", "slurmctld", "slurmd", "sbatch", "scontrol")
POINTS = 240  # enough that the signal arrives before a task has done its half
PATIENCE = 120.0  # seconds to wait for anything before it is a failure

MISSING = [name for name in NEEDED if not shutil.which(name, path=f"{os.environ['PATH']}:/usr/sbin:/sbin")]
REASON = f"{', '.join(MISSING)} not installed" if MISSING else "only root can start it" if os.geteuid() else ""

# One group, so that with tests side by side there is one Slurm.
pytestmark = [
    pytest.mark.slurm,
    pytest.mark.xdist_group("slurm"),
    pytest.mark.skipif(bool(REASON), reason=f"no real Slurm is tried: {REASON}"),
]

CONFIGURATION = """
ClusterName=test
SlurmctldHost={host}(127.0.0.1)
SlurmctldPort={first}
SlurmdPort={second}
AuthType=auth/munge
AuthInfo=socket={folder}/mrun/munge.sock,cred_expire=10
CredType=cred/munge
SlurmUser=root
SlurmdUser=root
StateSaveLocation={folder}/state
SlurmdSpoolDir={folder}/spool
SlurmctldPidFile={folder}/slurmctld.pid
SlurmdPidFile={folder}/slurmd.pid
SlurmctldLogFile={folder}/log/slurmctld.log
SlurmdLogFile={folder}/log/slurmd.log
ProctrackType=proctrack/linuxproc
TaskPlugin=task/none
JobAcctGatherType=jobacct_gather/none
AccountingStorageType=accounting_storage/none
JobCompType=jobcomp/none
MpiDefault=none
SwitchType=switch/none
SelectType=select/cons_tres
SelectTypeParameters=CR_Core
SchedulerType=sched/builtin
SchedulerParameters=sched_min_interval=0,sched_interval=1
ReturnToService=2
KillWait=5
MinJobAge=300
JobRequeue=1
SlurmdParameters=config_overrides
NodeName={host} NodeAddr=127.0.0.1 CPUs=2 Sockets=1 CoresPerSocket=2 ThreadsPerCore=1 RealMemory=2000 State=UNKNOWN
PartitionName=debug Nodes={host} Default=YES MaxTime=INFINITE State=UP
"""

PLAN = """
sites = 12
fermi_level = -1.2
onsite = [{amplitude = 1.5, period = 3}]
probe = {hopping = 2.0}
drain = {hopping = 2.0}
disorder = {onsite = 0.2}

[sweep]
keep = ["sampled"]
phases = 24

[[sweep.axis]]
seeds = COUNT
"""


class Cluster:
    """A running Slurm, and the commands to it."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.environment = {
            **os.environ,
            "SLURM_CONF": str(folder / "slurm.conf"),
            "PATH": f"{BIN}:{os.environ['PATH']}:/usr/sbin:/sbin",
        }

    def run(self, *arguments: object) -> str:
        done = subprocess.run(
            [*map(str, arguments)], env=self.environment, cwd=self.folder, capture_output=True, text=True
        )
        assert done.returncode == 0, f"{arguments}: {done.stdout}{done.stderr}"
        return done.stdout

    def submit(self, *arguments: object) -> str:
        logs = self.folder / "log" / "%A_%a.out"
        return self.run("sbatch", "--parsable", f"--output={logs}", *arguments).strip()

    def states(self, job: str) -> list[str]:
        """Return the states of the tasks of a job that was submitted."""
        return self.run("squeue", "--noheader", "--array", "--states=all", "--jobs", job, "--format=%T").split()

    def wait(self, job: str) -> list[str]:
        """Wait for the job's end and return its tasks' states."""
        over = {"COMPLETED", "FAILED", "CANCELLED", "TIMEOUT", "NODE_FAIL"}
        until(lambda: bool(self.states(job)) and set(self.states(job)) <= over, lambda: str(self.states(job)))
        return self.states(job)

    def start(self) -> None:
        self._start("munged", *munge_options(self.folder))
        for daemon in ("slurmctld", "slurmd"):
            self._start(daemon, "-c", "-f", self.folder / "slurm.conf")
        until(lambda: "idle" in self.run("sinfo", "--noheader", "--format=%t"), lambda: "no idle node")

    def _start(self, *command: object) -> None:
        # To a file, not a pipe: the daemon it leaves behind would hold the pipe open.
        with (self.folder / "log" / "start.log").open("ab") as log:
            subprocess.run([*map(str, command)], env=self.environment, check=True, stdout=log, stderr=log)

    def stop(self) -> None:
        for name in ("slurmd.pid", "slurmctld.pid", "mrun/munged.pid"):
            path = self.folder / name
            if path.exists():
                number = int(path.read_text())
                os.kill(number, signal.SIGTERM)
                until(lambda number=number: ended(number), lambda name=name: f"{name} does not end")


def until(holds: Callable[[], bool], told: Callable[[], str]) -> None:
    deadline = time.monotonic() + PATIENCE
    while not holds():
        assert time.monotonic() < deadline, told()
        time.sleep(0.1)


def ended(process: int) -> bool:
    """Tell whether a process is gone, or waits only for its parent to notice."""
    try:
        return Path("/proc", str(process), "stat").read_text().rpartition(")")[2].split()[0] == "Z"
    except OSError:
        return True


def munge_options(folder: Path) -> list[str]:
    return [
        f"--socket={folder}/mrun/munge.sock",
        f"--key-file={folder}/munge/munge.key",
        f"--pid-file={folder}/mrun/munged.pid",
        f"--seed-file={folder}/munge/seed",
        f"--log-file={folder}/munge/munged.log",
    ]


def two_free_ports() -> tuple[int, int]:
    with socket.socket() as one, socket.socket() as other:  # both held, so that they differ
        one.bind(("127.0.0.1", 0))
        other.bind(("127.0.0.1", 0))
        return int(one.getsockname()[1]), int(other.getsockname()[1])


@pytest.fixture(scope="module")
def slurm() -> Iterator[Cluster]:
    # Not below pytest's folder: munge insists that others can get to its socket, all the way.
    with TemporaryDirectory(prefix="slurm-") as folder:
        cluster = configured(Path(folder))
        try:
            cluster.start()
            yield cluster
        finally:
            cluster.stop()


def configured(folder: Path) -> Cluster:
    """Write what a Slurm of one node needs into `folder`."""
    for name in ("munge", "mrun", "state", "spool", "log"):
        (folder / name).mkdir(mode=0o755)
    folder.chmod(0o755)
    (folder / "munge").chmod(0o700)
    (folder / "munge" / "munge.key").write_bytes(os.urandom(128))
    (folder / "munge" / "munge.key").chmod(0o400)
    host = socket.gethostname().partition(".")[0]
    first, second = two_free_ports()
    (folder / "slurm.conf").write_text(CONFIGURATION.format(host=host, folder=folder, first=first, second=second))
    return Cluster(folder)


def plan_of(folder: Path, count: int) -> Path:
    path = folder / "plan.toml"
    path.write_text(PLAN.replace("COUNT", str(count)))
    return path


def test_array_is_signalled_put_back_resumed_and_merged(slurm: Cluster, tmp_path: Path) -> None:
    plan, results = plan_of(tmp_path, POINTS), tmp_path / "results"
    job = slurm.submit("--array=1-2", "--mem-per-cpu=300M", EXAMPLES / "slurm_array.sh", plan, results)
    merge = slurm.submit(f"--dependency=afterany:{job}", EXAMPLES / "slurm_gather.sh", results, tmp_path / "map.nc")
    started = results / "runs"
    until(lambda: started.exists() and len(list(started.glob("*.json"))) == 2, lambda: "no task began")
    until(lambda: sweep_status(results).done > 0, lambda: "no point was done")
    # what Slurm itself does a little before the time limit, without waiting for it
    slurm.run("scancel", "--batch", "--signal=USR1", f"{job}_1")
    until(lambda: "stopped" in {run.state for run in sweep_status(results).runs}, lambda: "the signal was not heeded")
    half = sweep_status(results)
    assert 0 < half.done < POINTS
    assert slurm.wait(job) == ["COMPLETED", "COMPLETED"]
    whole = sweep_status(results)
    assert (whole.done, whole.failed, whole.missing) == (POINTS, 0, 0)
    assert sorted(run.share for run in whole.runs) == [1, 1, 2]  # the first share in two runs
    assert sum(run.new for run in whole.runs) == POINTS
    log = (slurm.folder / "log" / f"{job}_1.out").read_text()
    assert "stopped by SIGUSR1; the same command does the rest" in log
    assert f"{POINTS // 2} of {POINTS // 2} points done" in log
    assert slurm.wait(merge) == ["COMPLETED"]
    with xarray.open_dataset(tmp_path / "map.nc") as found:
        assert (found.status == 1).all() and found.sizes["disorder_seed"] == POINTS


def test_workers_of_dask_are_jobs(slurm: Cluster, tmp_path: Path) -> None:
    script = (sys.executable, EXAMPLES / "dask_cluster.py", plan_of(tmp_path, 20), tmp_path / "results")
    told = slurm.run(*script, "--jobs", 2, "--interface", "lo")
    assert told.strip() == "20 of 20 points done, 0 failed, 0 missing"
