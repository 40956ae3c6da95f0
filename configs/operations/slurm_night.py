"""One night's batch on a SLURM cluster through Dask's own deployment package. UNTESTED: no SLURM was at hand.

Needs: pip install 'groundglow[cluster]' dask-jobqueue, on a file system that all nodes see.

    python slurm_night.py /shared/thermal/night.toml
"""

from __future__ import annotations

import subprocess
import sys

from dask_jobqueue import SLURMCluster


def main() -> int:
    # One job of SLURM is one worker with one thread; a scene needs about 0.5 GiB of memory.
    with SLURMCluster(
        cores=1,
        processes=1,
        memory="2GiB",
        walltime="02:00:00",
        job_extra_directives=["--job-name=groundglow"],
    ) as cluster:
        cluster.adapt(minimum=1, maximum=64)
        command = ["groundglow", "run", sys.argv[1], "--scheduler", cluster.scheduler_address, "--quiet"]
        return subprocess.run(command, check=False).returncode


if __name__ == "__main__":
    sys.exit(main())
