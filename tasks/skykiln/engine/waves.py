"""Waves: Luigi builds, each with few enough tasks that its scheduler stays quick.

Luigi's scheduler walks all pending tasks for every task it hands out, so one build of everything is
quadratic; builds of some hundred tasks are linear.
"""

import logging
import time
from contextlib import contextmanager

import luigi
from luigi.rpc import RemoteScheduler, RPCError
from luigi.scheduler import Scheduler
from luigi.worker import Worker

from ..errors import SkykilnError

PENDING = 300
COMES_BACK = 15.0  # seconds after which a failed task is not expected to be handed out again


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
    _build(tasks, workers, verbose, local_scheduler=True)


def build_on(address: str, tasks, workers: int, verbose: bool):
    """Let those who have joined a central scheduler, and this process, run tasks without dependencies.

    Parameters: address : 'host:port' of the scheduler; workers : processes here, 0 to leave all to others
    Raises:     SkykilnError if no scheduler answers
    """
    url = f"http://{address}"

    def build(some):
        _build(some, workers, verbose, scheduler_url=url)

    with _told_as_no_scheduler(address):
        build(tasks)
        # What others run comes back if they die, and may then be taken up here: as failed at first.
        quiet_since = time.monotonic()
        while time.monotonic() - quiet_since < COMES_BACK:
            waiting = _with_status(url, tasks, "PENDING")
            if waiting and workers:
                build(waiting)
            if waiting or _with_status(url, tasks, "RUNNING"):
                quiet_since = time.monotonic()
            elif not _with_status(url, tasks, "FAILED"):
                break
            time.sleep(0.5)


def work_for(address: str, workers: int, verbose: bool):
    """Run what a central scheduler hands out, until SIGUSR1 asks to end after the task at hand.

    Raises: SkykilnError if no scheduler answers
    """
    _let_luigi_log(verbose)
    scheduler = RemoteScheduler(f"http://{address}")
    with _told_as_no_scheduler(address):
        scheduler.ping(worker="")
        with Worker(
            scheduler=scheduler,
            worker_processes=workers,
            assistant=True,
            keep_alive=True,
            wait_interval=0.5,
            wait_jitter=0.5,
        ) as worker:
            worker.run()


def _build(tasks, workers, verbose, **scheduler):
    _let_luigi_log(verbose)
    level = "INFO" if verbose else "CRITICAL"
    luigi.build(
        tasks, worker_scheduler_factory=_Sound(), workers=workers, no_lock=True, log_level=level, **scheduler
    )


def _let_luigi_log(verbose):
    if not verbose:
        for name in ("luigi-interface", "luigi-rpc"):
            logging.getLogger(name).setLevel(logging.CRITICAL)


@contextmanager
def _told_as_no_scheduler(address):
    try:
        yield
    except RPCError as error:
        raise SkykilnError(f"no scheduler answers at {address}; start luigid there") from error


def _with_status(url, tasks, status):
    known = RemoteScheduler(url).task_list(status, "")
    return [task for task in tasks if task.task_id in known]


class _Sound:
    """Luigi's scheduler and worker with settings for stages that judge themselves."""

    def create_local_scheduler(self):
        # No cool-down: a stage whose input changed again must be able to run again at once.
        return Scheduler(
            prune_on_get_work=False, record_task_history=False, retry_count=1, stable_done_cooldown_secs=0
        )

    def create_remote_scheduler(self, url):
        return RemoteScheduler(url)

    def create_worker(self, scheduler, worker_processes, assistant=False):
        return Worker(
            scheduler=scheduler,
            worker_processes=worker_processes,
            assistant=assistant,
            check_complete_on_run=isinstance(scheduler, Scheduler),
            keep_alive=False,
            wait_interval=0.05,
            wait_jitter=0.05,
        )
