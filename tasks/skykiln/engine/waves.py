"""Waves: Luigi builds, each with few enough tasks that its scheduler stays quick.

Luigi's scheduler walks all pending tasks for every task it hands out, so one build of everything is
quadratic; builds of some hundred tasks are linear.
"""

import logging

import luigi
from luigi.scheduler import Scheduler
from luigi.worker import Worker

PENDING = 300


def waves_of(tasks) -> list:
    """Share out tasks, in their order, into waves.

    Parameters: tasks : pairs of a task and of how many tasks it brings along, itself counted
    """
    waves, pending = [], PENDING
    for task, size in tasks:
        if pending + size > PENDING:
            waves.append([])
            pending = 0
        waves[-1].append(task)
        pending += size
    return waves


def build_wave(tasks, workers: int, verbose: bool):
    """Let Luigi bring tasks up to date.

    What came of it is told by the stamps alone: Luigi's own verdict is about its last look, not
    about what is complete.
    """
    if not verbose:
        logging.getLogger("luigi-interface").setLevel(logging.CRITICAL)
    luigi.build(
        tasks,
        worker_scheduler_factory=_Sound(),
        local_scheduler=True,
        workers=workers,
        no_lock=True,
        log_level="INFO" if verbose else "CRITICAL",
    )


class _Sound:
    """Luigi's scheduler and worker with settings for stages that judge themselves."""

    def create_local_scheduler(self):
        # No cool-down: a stage whose input changed again must be able to run again at once.
        return Scheduler(
            prune_on_get_work=False, record_task_history=False, retry_count=1, stable_done_cooldown_secs=0
        )

    def create_remote_scheduler(self, url):
        raise ValueError(f"waves are built without a central scheduler, not on {url}")

    def create_worker(self, scheduler, worker_processes, assistant=False):
        return Worker(
            scheduler=scheduler,
            worker_processes=worker_processes,
            assistant=assistant,
            check_complete_on_run=True,
            keep_alive=False,
            wait_interval=0.05,
            wait_jitter=0.05,
        )
