"""A night over a pipeline: what comes before the stages run, and night.json after."""

from pathlib import Path

from ..config import Pipeline
from ..engine.atomic import told_as_file_error
from ..engine.chains import chain_of
from ..engine.night import FAILED, REBUILT, UNCHANGED, Night, now, write_night
from ..engine.release import release
from ..engine.stamps import void_stamp
from ..engine.waves import build_wave, waves_of
from .kernels import warm_kernels
from .shares import luigi_tasks, manifests_removed
from .snapshot import Snapshot


def night_file(pipeline: Pipeline) -> Path:
    """Where the summary of the last night lies."""
    return pipeline.build_dir / "night.json"


def bake(snapshot: Snapshot, workers: int, again: bool, verbose: bool, shown) -> Night:
    """One night from the skykiln command.

    Parameters: again : run every stage; verbose : let Luigi log
                shown : context manager that shows the progress of stale chains
    Returns:    the night; its outcomes stand in night.json too
    """
    if again:
        call_for_all(snapshot)
    night = Night(snapshot.targets, now())
    if night.stale:
        prepare(night, snapshot, workers)
        tasks = luigi_tasks(night.stale, snapshot.pipeline.build_dir, workers)
        with shown(night.stale), manifests_removed(tasks):
            for wave in waves_of(tasks):
                build_wave(wave, workers, verbose)
    write_record(night, snapshot)
    return night


def call_for_all(snapshot: Snapshot):
    """Make every stage of the snapshot stale."""
    for target in snapshot.targets:
        for verdict in chain_of(target).verdicts:
            void_stamp(verdict.stage.stamp_path, "was asked for again")


def prepare(night: Night, snapshot: Snapshot, workers: int):
    """Make ready for stages to run: sweep, keep the pins, compile kernels once for all workers."""
    work = snapshot.pipeline.build_dir / "work"
    with told_as_file_error(work):
        work.mkdir(parents=True, exist_ok=True)
    night.sweep()
    snapshot.pins.save()
    warm_kernels(again=workers > 1)


def write_record(night: Night, snapshot: Snapshot):
    """Write night.json."""
    write_night(night_file(snapshot.pipeline), night_record(night, snapshot.pipeline))


def night_record(night: Night, pipeline: Pipeline) -> dict:
    """The values of night.json."""
    table, *outcomes = night.outcomes
    states = [outcome.state for outcome in outcomes]
    counts = {state: states.count(state) for state in (REBUILT, UNCHANGED, FAILED)}
    return {
        "schema": 1,
        "skykiln": release(),
        "started": night.started,
        "seconds": night.seconds,
        "exit_status": 1 if night.failures else 0,
        "totals": {"probes": len(states), **counts},
        "stages_run": sum(len(outcome.ran) for outcome in (table, *outcomes)),
        "shared": table.stages(),
        "probes": [_probe_entry(outcome, f"{pipeline.root}/") for outcome in outcomes],
    }


def _probe_entry(outcome, root):
    failure = outcome.failure and {
        "file": outcome.target.probe.file,
        "stage": outcome.failure.stage,
        "cause": outcome.failure.cause.replace(root, ""),
    }
    return {
        "name": outcome.target.owner,
        "state": outcome.state,
        "stages": outcome.stages(),
        "failure": failure,
    }
