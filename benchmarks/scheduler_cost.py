"""What a Dask scheduler costs a batch: the share of a thousand scenes' time that is not spent in workers.

A real cluster of processes runs pieces of work that sleep as long as a scene takes, so that everything above the
sleep is the way there and back: once a piece a scene, as a batch is spread, and once a piece a block of a scene.

    python benchmarks/scheduler_cost.py [--scenes 1000] [--seconds 0.2] [--processes 2]

Exits 1 where a piece a scene costs 5 % or more.
"""

from __future__ import annotations

import argparse
import time
from concurrent.futures import ThreadPoolExecutor

from groundglow.run.making.scheduler_cluster import Cluster

_BOUND = 0.05


def piece(seconds: float, payload: bytes) -> bytes:
    """Stands for a scene: its reply is as large as a real one."""
    time.sleep(seconds)
    return payload


def cost(cluster: Cluster, pieces: int, seconds: float) -> float:
    """Share of the whole time that is not the pieces' own."""
    reply = b"x" * 4000
    began = time.perf_counter()
    with ThreadPoolExecutor(2 * cluster.workers) as waiting:
        for _ in waiting.map(lambda _: cluster.call(piece, seconds, reply), range(pieces)):
            pass
    whole = time.perf_counter() - began
    return 1.0 - pieces * seconds / cluster.workers / whole


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--scenes", type=int, default=1000)
    parser.add_argument("--seconds", type=float, default=0.2, help="of one scene in a worker")
    parser.add_argument("--processes", type=int, default=2)
    options = parser.parse_args()
    cluster = Cluster(f"processes:{options.processes}")
    try:
        cost(cluster, 4 * options.processes, 0.01)
        whole = cost(cluster, options.scenes, options.seconds)
        print(
            f"{options.scenes} pieces of {options.seconds:g} s, one a scene: the scheduler takes {100 * whole:.1f} %"
        )
        parts = cost(cluster, 16 * options.scenes // 10, options.seconds / 16)
        print(f"in 16 pieces a scene (a tenth of the scenes): {100 * parts:.1f} %")
    finally:
        cluster.close()
    if whole >= _BOUND:
        raise SystemExit(f"above the bound of {100 * _BOUND:.0f} %")


if __name__ == "__main__":
    main()
