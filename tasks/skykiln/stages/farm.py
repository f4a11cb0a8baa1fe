"""A farm with Luigi's central scheduler: one bake hands out lots, machines join to bake them.

Only lots travel through the scheduler, with paths relative to the build folder: each machine may have the
shared folder at a place of its own. The table that all probes share is baked by who begins the night.
"""

import json
from pathlib import Path

from ..config import Pipeline
from ..engine.atomic import write_atomically
from ..engine.digests import json_bytes
from ..engine.release import code_digest, release
from ..engine.waves import build_on, build_wave, work_for
from ..errors import PipelineError
from .bake_lot import BakeLot
from .kernels import available_cores, warm_kernels
from .shares import farm_lots, manifests_removed
from .tabulate_brdf import TabulateBrdf


def bake_on_farm(address, chains, snapshot, workers, verbose):
    """Bring stale chains up to date with all who have joined the scheduler at `address`."""
    _settle(snapshot.pipeline, workers)
    told = {"code": code_digest(), "skykiln": release()}
    write_atomically(_version_file(snapshot.pipeline), [json_bytes(told)], synced=False)
    lots = farm_lots(chains, snapshot)
    tables = [chain.target.full() for chain in chains if isinstance(chain.target, TabulateBrdf)]
    with manifests_removed(lots):
        build_wave(tables, 1, verbose)
        build_on(address, lots, workers, verbose)


def join(address, pipeline: Pipeline, workers, verbose):
    """Bake what the scheduler at `address` hands out, until SIGUSR1.

    Raises: PipelineError if the night was begun by other code
    """
    try:
        told = json.loads(_version_file(pipeline).read_bytes())
    except (OSError, ValueError):
        told = {"code": code_digest()}  # no night on this farm yet; every lot asks again
    if told["code"] != code_digest():
        began = f"the night was begun by skykiln {told['skykiln']}, this is {release()}"
        raise PipelineError([f"{began}, and its code differs; install the same on all machines"])
    _settle(pipeline, workers)
    warm_kernels(again=True)
    work_for(address, workers, verbose)


def _settle(pipeline, workers):
    """Tell this process where the pipeline lies here, and how many cores each of its lots has."""
    BakeLot.folders = {"root": str(pipeline.root), "build_dir": str(pipeline.build_dir)}
    BakeLot.threads = max(1, available_cores() // max(1, workers))


def _version_file(pipeline) -> Path:
    return pipeline.build_dir / "work" / ".farm.json"
