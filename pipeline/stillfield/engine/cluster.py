"""Blocks worked by other processes, here or on other hosts, through dask.distributed.

Each block is one task. A task that fails for want of its worker is given to another; what all tasks share is made
anew on whichever worker lacks it. So a run outlives its workers as long as one is left or comes back.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from stillfield.engine.block import BlockResult, Work, work_block
from stillfield.engine.planning import BlockPlan, Plan
from stillfield.errors import StillfieldError

if TYPE_CHECKING:
    from distributed import Client

#: How often a block is tried again.
RETRIES = 3
#: Name of a cluster of processes on this machine.
LOCAL = "processes"


class ClusterError(StillfieldError):
    """A cluster that cannot be reached, or cannot do the work."""


def check_scheduler(scheduler: str) -> None:
    """Find out before anything is read whether the cluster is there.

    Parameters
    ----------
    scheduler : str
        `LOCAL`, or the address of a running scheduler such as ``tcp://host:8786``.

    Raises
    ------
    ClusterError
        If dask.distributed is not installed, or no scheduler answers.
    """
    with _client(scheduler, 1, only_look=True):
        pass


def work_on_cluster(work: Work, plan: Plan, *, scheduler: str) -> Iterator[BlockResult]:
    """Work all blocks of a plan on a cluster.

    Parameters
    ----------
    work : Work
        What is done with every block.
    plan : Plan
        Blocks, and for a cluster on this machine the number of processes.
    scheduler : str
        As for `check_scheduler`.

    Yields
    ------
    BlockResult
        In the order in which blocks are done.

    Raises
    ------
    ClusterError
        If the cluster cannot be reached or loses its workers for good.
    """
    with _client(scheduler, plan.workers) as client:
        import cloudpickle  # lazy weather holds functions that plain pickling cannot carry
        from distributed import as_completed
        from distributed.scheduler import KilledWorker

        # Every worker makes the shared part from its text, so no worker's death loses it.
        text = cloudpickle.dumps(replace(work, reader=work.reader.from_anywhere()))
        shared = client.submit(cloudpickle.loads, text, pure=False)
        futures = [client.submit(_task, shared, block, retries=RETRIES, pure=False) for block in plan.blocks]
        try:
            for future in as_completed(futures):
                yield future.result()
                future.release()
        except KilledWorker as fault:
            raise ClusterError(
                "workers died again and again on one block", where=scheduler, got=" ".join(str(fault).split())[:160],
                cure="They may lack memory: set compute.memory to what one worker has, or give them more.",
            ) from None
        finally:
            client.cancel(futures, force=True)


def _task(work: Work, block: BlockPlan) -> BlockResult:
    return work_block(work, block)


@contextmanager
def _client(scheduler: str, workers: int, *, only_look: bool = False) -> Iterator[Client]:
    try:
        import distributed
    except ImportError:
        raise ClusterError(
            "a cluster needs the package 'distributed'", where="compute.scheduler", got=scheduler,
            cure="Install stillfield with the extra 'cluster', or leave compute.scheduler out.",
        ) from None
    if scheduler == LOCAL:
        if only_look:
            yield None  # type: ignore[misc]
            return
        # No dashboard, and its server on any free port: on the usual one, a second run beside this one would be warned.
        cluster: Any = distributed.LocalCluster(
            n_workers=workers, threads_per_worker=1, processes=True, dashboard_address="127.0.0.1:0",
            scheduler_kwargs={"dashboard": False}, silence_logs=40)
        with cluster, distributed.Client(cluster) as client:
            yield client
        return
    try:
        client = distributed.Client(scheduler, timeout="10s")
    except (OSError, ValueError, TimeoutError) as fault:
        raise ClusterError(
            "no scheduler answers", where="compute.scheduler",
            got=f"{scheduler} ({' '.join(str(fault).split())[:120]})",
            wanted="the address of a running scheduler such as tcp://host:8786, or 'processes'",
            cure="Start `dask scheduler` and `dask worker`, or correct the address.",
        ) from None
    with client:
        yield client
