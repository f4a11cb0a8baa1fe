"""A night over a pipeline: what comes before the stages run, and night.json and the report after."""

from pathlib import Path

from ..config import Pipeline
from ..engine.atomic import remove, sweep, told_as_file_error
from ..engine.chains import chain_of
from ..engine.night import STATES, Night, shared_night_id, write_night
from ..engine.release import release
from ..engine.seals import break_seal
from ..engine.stamps import void_stamp
from ..engine.waves import build_wave, waves_of
from ..errors import ALL_WELL, GATE_BROKEN, SOURCE_FAILED, FileError
from .bake_lot import BakeLot
from .farm import bake_on_farm
from .gates import NIGHT_GATES, broken_gates
from .judge_probe import accept_judgement
from .kernels import available_cores, warm_kernels
from .night_entries import night_entry
from .shares import luigi_tasks, manifests_removed
from .snapshot import Snapshot
from .write_report import write_report


def night_file(pipeline: Pipeline) -> Path:
    """Where the summary of the last night lies."""
    return pipeline.build_dir / "night.json"


def shared_night(pipeline: Pipeline) -> str:
    """The night that shards bake together, until `end_shared_night`."""
    return shared_night_id(_shared_night_file(pipeline))


def end_shared_night(pipeline: Pipeline):
    """The next shard begins another night."""
    remove(_shared_night_file(pipeline))


def bake(
    snapshot: Snapshot, workers: int, again: bool, verbose: bool, shown, scheduler: str | None = None
) -> tuple[Night, dict]:
    """One night from the skykiln command.

    Parameters: again : run every stage; verbose : let Luigi log
                shown : context manager that shows the progress of stale chains
                scheduler : 'host:port' of a central scheduler that others have joined, if there is one
    Returns:    the night, and the values of the night.json that tells of it; that of a shard isn't written
    """
    if again:
        call_for_all(snapshot)
    night = Night(snapshot.targets, snapshot.night, snapshot.verified)
    for folder in (snapshot.pipeline.build_dir, snapshot.pipeline.build_dir / "work"):
        sweep(folder)
    night.sweep()
    if night.stale:
        prepare(night, snapshot)
        with shown(night.stale):
            if scheduler:
                bake_on_farm(scheduler, night.stale, snapshot, workers, verbose)
            else:
                _bake_here(night.stale, snapshot, workers, verbose)
    night.seal()
    if snapshot.shard:
        return night, night_record(night, snapshot.pipeline)
    try:
        return night, write_record(night, snapshot)
    except FileError as error:
        told = [f"{owner}: {failure.cause}" for owner, failure in night.failures]
        raise FileError("\n".join([*told, str(error)])) from error


def accept_held(snapshot: Snapshot) -> list:
    """Let what gates hold be published as it is packed now. Returns: the names of those that are held."""
    held = [target for target in snapshot.probes if chain_of(target).held_by]
    for target in held:
        with told_as_file_error(target.pinned.work):
            accept_judgement(target.pinned)
    return [target.owner for target in held]


def call_for_all(snapshot: Snapshot):
    """Make every stage of the snapshot stale."""
    for target in snapshot.targets:
        for verdict in chain_of(target).verdicts:
            break_seal(verdict.stage)
            void_stamp(verdict.stage.stamp_path, "was asked for again")


def prepare(night: Night, snapshot: Snapshot, forks: bool = False):
    """Make ready for stages to run: keep the pins, compile kernels once for all workers.

    Parameters: forks : load the kernels too, for the processes that this one will fork
    """
    work = snapshot.pipeline.build_dir / "work"
    with told_as_file_error(work):
        work.mkdir(parents=True, exist_ok=True)
    snapshot.pins.save()
    warm_kernels(again=forks)


def write_record(night: Night, snapshot: Snapshot) -> dict:
    """Write night.json, and the pages that tell of it. Returns: its values."""
    record = night_record(night, snapshot.pipeline)
    write_night(night_file(snapshot.pipeline), record)
    write_report(record, snapshot.pipeline, snapshot.all_probes)
    return record


def night_record(night: Night, pipeline: Pipeline) -> dict:
    """The values of night.json."""
    table, *outcomes = night.outcomes
    states = [outcome.state for outcome in outcomes]
    entries = [night_entry(outcome, pipeline.root) for outcome in outcomes]
    sizes = [entry["bytes"] for entry in entries if entry["bytes"]]
    record = {
        "schema": 1,
        "skykiln": release(),
        "started": night.started,
        "seconds": night.seconds,
        "exit_status": ALL_WELL,
        "totals": {"probes": len(states), **{state: states.count(state) for state in STATES}},
        "bytes": {kind: sum(size[kind] for size in sizes) for kind in ("disk", "gpu")},
        "stages_run": sum(len(outcome.ran) for outcome in (table, *outcomes)),
        "shared": table.stages(),
        "probes": entries,
    }
    gates = broken_gates(NIGHT_GATES, record, pipeline.gates)
    return {**record, "gates": gates, "exit_status": _exit_status(night, gates)}


def _bake_here(chains, snapshot, workers, verbose):
    lots, big = luigi_tasks(chains, snapshot, workers)
    with manifests_removed(lots):
        _bake_lots(lots, workers, verbose)
        for wave in waves_of(big):  # one stage at a time, in this process, its kernels on all cores
            build_wave(wave, 1, verbose)


def _bake_lots(lots, workers, verbose):
    """Small probes go one to a core: their kernels are too short for several."""
    if not lots:
        return
    processes = min(workers, len(lots))
    BakeLot.threads = available_cores() // processes
    if processes > 1:
        warm_kernels(again=True)
    build_wave(lots, processes, verbose)
    from ..jit import use_threads

    use_threads(available_cores())


def _shared_night_file(pipeline):
    return pipeline.build_dir / "work" / ".night"


def _exit_status(night, gates):
    if night.failures:
        return SOURCE_FAILED
    return GATE_BROKEN if night.held or gates else ALL_WELL
