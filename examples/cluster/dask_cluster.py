"""A sweep on a dask cluster whose workers are jobs of Slurm; with --local they are processes of this machine.

    python dask_cluster.py map.toml map --jobs 16
    python dask_cluster.py map.toml map --jobs 2 --local

Run it where it may stay for as long as the sweep takes.  A worker that is killed costs nothing: dask starts another and
repeats its batches.  Should this script be killed, the same command does what is missing.
"""

import argparse

import scatterpump as sp

ONE_THREAD = [f"export {name}=1" for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "SCOTCH_PTHREAD_NUMBER")]

ANY_PORT = ":0"  # for dask's dashboard: its usual port is often taken by somebody else on a login node


def start(local: bool, jobs: int, interface: str | None):
    """Return a cluster with one single-threaded process for each job: kwant's solver is not made for threads."""
    if local:
        from distributed import LocalCluster

        return LocalCluster(n_workers=jobs, threads_per_worker=1, host="127.0.0.1", dashboard_address=ANY_PORT)
    from dask_jobqueue import SLURMCluster

    cluster = SLURMCluster(
        cores=1,
        processes=1,
        memory="500MB",
        walltime="01:00:00",
        interface=interface,
        job_script_prologue=ONE_THREAD,
        scheduler_options={"dashboard_address": ANY_PORT},
    )
    cluster.scale(jobs=jobs)
    return cluster


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("plan")
    parser.add_argument("results")
    parser.add_argument("--jobs", type=int, default=16)
    parser.add_argument("--local", action="store_true")
    parser.add_argument("--interface", help="network interface of the nodes, such as ib0")
    options = parser.parse_args()
    with start(options.local, options.jobs, options.interface) as cluster, cluster.get_client() as client:
        report = sp.run_sweep(
            options.plan, into=options.results, executor=client.get_executor(pure=False), workers=options.jobs
        )
    print(f"{report.done} of {report.points} points done, {report.failed} failed, {report.missing} missing")


if __name__ == "__main__":
    main()
