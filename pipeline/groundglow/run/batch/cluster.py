"""Scenes on a Dask cluster: a moderate one is one worker's piece of work, a large one is spread by blocks."""

from __future__ import annotations

from pathlib import Path
from uuid import uuid4

from groundglow.errors import InputError
from groundglow.run.access.retry import LostWorkerError
from groundglow.run.batch.scene import SceneReply, SceneRequest, make_scene, make_scene_on_worker
from groundglow.run.making.outcome import SceneOutcome
from groundglow.run.making.progress import Progress
from groundglow.run.making.scheduler_cluster import Cluster
from groundglow.run.placing.place import Place

# Scenes under way for each thread of the cluster, and at most: each takes a waiting thread here.
_AHEAD = 2
# A scene of more pixels is spread by blocks instead of being given to one worker.
LARGEST_UNIT = 16 * 1024 * 1024
_MOST_AT_ONCE = 256


class ClusterRunner:
    """Makes scenes on a cluster.

    Parameters
    ----------
    address : str
        As for :class:`Cluster`.
    place : Place
        Where results go; locked by this process.

    Raises
    ------
    InputError
        If no cluster answers.
    """

    def __init__(self, address: str, place: Place) -> None:
        self._cluster = Cluster(address)
        self.workers = self._cluster.workers
        self.at_once = min(_AHEAD * self.workers, _MOST_AT_ONCE)
        self.may_leave = True
        self._shared = place.put_by_maker or self._see_the_place(place)

    def make(self, request: SceneRequest, progress: Progress) -> SceneReply:
        """See :class:`groundglow.run.batch.batch.Runner`."""
        if self._shared:
            try:
                reply = self._cluster.call(make_scene_on_worker, request, LARGEST_UNIT)
            except LostWorkerError as error:
                return _lost(request, error)
            if reply.outcome is not None:
                return reply
        return make_scene(request, self._cluster, progress)

    def stop(self) -> None:
        """See :class:`groundglow.run.batch.batch.Runner`."""
        self._cluster.stop()

    def close(self) -> None:
        """See :class:`groundglow.run.batch.batch.Runner`."""
        self._cluster.close()

    def _see_the_place(self, place: Place) -> bool:
        """Whether every worker sees the output folder; else only blocks are given away."""
        folder = place.run_folder()
        if folder is None:
            return False
        mark = folder.absolute() / f"seen-{uuid4().hex}"
        try:
            mark.touch()
            return all(self._cluster.client.run(_sees, str(mark)).values())
        except OSError as error:
            raise InputError(f"the cluster's workers do not answer ({error})", where="--scheduler") from error
        finally:
            mark.unlink(missing_ok=True)


def _sees(path: str) -> bool:
    return Path(path).exists()


def _lost(request: SceneRequest, error: LostWorkerError) -> SceneReply:
    request.place.discard(None, request.token)
    outcome = SceneOutcome(request.entry.label, "failed", str(error), address=request.entry.address)
    return SceneReply(outcome, may_pass=True)
