"""Blocks worked in this process, by as many threads as there are workers."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ThreadPoolExecutor, wait
from itertools import islice

from stillfield.engine.block import BlockResult, Work, work_block
from stillfield.engine.planning import Plan


def work_embedded(work: Work, plan: Plan, tell: Callable[[int], None] | None = None) -> Iterator[BlockResult]:
    """Work all blocks of a plan in this process.

    Parameters
    ----------
    work : Work
        What is done with every block.
    plan : Plan
        Blocks, and how many of them at the same time.
    tell : callable, optional
        Told after every window how many records times cells are done; from the thread that did it.

    Yields
    ------
    BlockResult
        In the order in which blocks are done.
    """
    if plan.workers == 1:
        for block in plan.blocks:
            yield work_block(work, block, tell)
        return
    waiting = iter(plan.blocks)
    with ThreadPoolExecutor(plan.workers, thread_name_prefix="block") as pool:
        running: set[Future[BlockResult]] = {
            pool.submit(work_block, work, block, tell) for block in islice(waiting, plan.workers)}
        try:
            while running:
                done, running = wait(running, return_when=FIRST_COMPLETED)
                for future in done:
                    yield future.result()
                    following = next(waiting, None)
                    if following is not None:
                        running.add(pool.submit(work_block, work, following, tell))
        finally:
            for future in running:
                future.cancel()
