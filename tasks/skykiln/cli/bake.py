"""skykiln bake"""

import sys

from ..errors import PipelineError
from .arguments import add_command, add_names, address, count, shard
from .telling import say_waiting, speak_to_nobody


def add_to(commands):
    bake = add_command(commands, "bake", run, "bring probes up to date and publish them")
    bake.set_defaults(refuse=bake.error)
    add_names(bake, "*")
    bake.add_argument("--again", action="store_true", help="run every stage, up to date or not")
    bake.add_argument(
        "--accept", action="store_true", help="publish what a gate holds of the probes named, as it is packed"
    )
    bake.add_argument(
        "--workers", type=count, metavar="N", help="processes for small probes (as many as cores)"
    )
    bake.add_argument(
        "--verify", action="store_true", help="read all bytes again where size and time would do"
    )
    farm = bake.add_mutually_exclusive_group()
    farm.add_argument(
        "--shard", type=shard, metavar="K/N", help="bake share K of N, K from 0: on one machine of a farm"
    )
    farm.add_argument(
        "--finish", action="store_true", help="end a night of shards: bake what is left, write night.json"
    )
    farm.add_argument(
        "--scheduler", type=address, metavar="HOST:PORT", help="share the work with who joined this luigid"
    )
    bake.add_argument("-v", "--verbose", action="store_true", help="show what Luigi logs")


def run(options):
    from ..config import load_pipeline
    from ..engine.locks import at_work_in

    if options.workers == 0 and not options.scheduler:
        options.refuse("argument --workers: 0 only with --scheduler, where others bake")
    pipeline = load_pipeline(options.file)
    with at_work_in(pipeline.build_dir / "work", options.shard, say_waiting):
        return _bake_alone(options, pipeline)


def _bake_alone(options, pipeline):
    from ..engine.progress import shown
    from ..stages.kernels import available_cores
    from ..stages.nights import bake, end_shared_night, shared_night
    from ..stages.snapshot import Snapshot

    together = options.shard or options.finish
    night_id = shared_night(pipeline) if together else None
    snapshot = Snapshot(pipeline, options.names, night_id, options.verify, options.shard)
    if options.accept:
        _accept(options.names, snapshot)
    workers = available_cores() if options.workers is None else options.workers
    night, record = bake(snapshot, workers, options.again, options.verbose, shown, options.scheduler)
    if options.finish:
        end_shared_night(pipeline)
    _tell(night, record, pipeline.root)
    return record["exit_status"]


def _accept(names, snapshot):
    from ..stages.nights import accept_held

    if not names:
        raise PipelineError(["--accept: name the probes whose held files are to be published, or '*'"])
    if not accept_held(snapshot):
        print(f"nothing is held of {', '.join(names)}", file=sys.stderr)


def _tell(night, record, root):
    from ..engine.wording import night_sentence, unheld_audits

    for owner, failure in night.failures:
        cause = failure.traceback or failure.cause.replace(f"{root}/", "")
        print(f"{owner}: {cause}", file=sys.stderr)
    for owner, sentences in night.held:
        print(f"{owner}: held: {'; '.join(sentences)}", file=sys.stderr)
    for sentence in unheld_audits(record):
        print(sentence, file=sys.stderr)
    for gate in record["gates"]:
        print(f"the night: {gate['gate']}: {gate['why']}", file=sys.stderr)
    try:
        print(night_sentence(record), flush=True)
    except BrokenPipeError:  # how the night went is told by the exit status still
        speak_to_nobody()
