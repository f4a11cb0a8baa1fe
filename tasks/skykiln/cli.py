"""The command line. What a command needs is imported when it runs, so that --help is quick."""

import argparse
import json
import os
import sys

from .errors import ALL_WELL, SOURCE_FAILED, WRONG, PipelineError, SkykilnError


def main(arguments=None) -> int:
    """Run a command. Returns: the exit status."""
    parser = _parser()
    options = parser.parse_args(_joined(sys.argv[1:] if arguments is None else arguments))
    if getattr(options, "workers", None) == 0 and not options.scheduler:
        parser.error("argument --workers: 0 only with --scheduler, where others bake")
    try:
        status = options.run(options)
        sys.stdout.flush()  # here, where a reader who has gone is no error
        return status
    except PipelineError as error:
        print(error, file=sys.stderr)
        return WRONG
    except SkykilnError as error:
        print(error, file=sys.stderr)
        return SOURCE_FAILED
    except KeyboardInterrupt:
        print("stopped; what is done is kept, bake again to go on", file=sys.stderr)
        return 130
    except BrokenPipeError:
        _speak_to_nobody()
        return ALL_WELL


def _bake(options):
    from .config import load_pipeline
    from .engine.locks import at_work_in

    pipeline = load_pipeline(options.file)
    with at_work_in(pipeline.build_dir / "work", options.shard, _say_waiting):
        return _bake_alone(options, pipeline)


def _bake_alone(options, pipeline):
    from .engine.progress import shown
    from .engine.wording import night_sentence
    from .stages.kernels import available_cores
    from .stages.nights import bake, end_shared_night, shared_night
    from .stages.snapshot import Snapshot

    together = options.shard or options.finish
    night_id = shared_night(pipeline) if together else None
    snapshot = Snapshot(pipeline, options.names, night_id, options.verify, options.shard)
    if options.accept:
        _accept(options.names, snapshot)
    workers = available_cores() if options.workers is None else options.workers
    night, record = bake(snapshot, workers, options.again, options.verbose, shown, options.scheduler)
    if options.finish:
        end_shared_night(pipeline)
    for owner, failure in night.failures:
        cause = failure.traceback or failure.cause.replace(f"{snapshot.pipeline.root}/", "")
        print(f"{owner}: {cause}", file=sys.stderr)
    for owner, sentences in night.held:
        print(f"{owner}: held: {'; '.join(sentences)}", file=sys.stderr)
    for gate in record["gates"]:
        print(f"the night: {gate['gate']}: {gate['why']}", file=sys.stderr)
    try:
        print(night_sentence(record), flush=True)
    except BrokenPipeError:  # how the night went is told by the exit status still
        _speak_to_nobody()
    return record["exit_status"]


def _speak_to_nobody():
    """Whoever read the output has gone: let Python's last flush go nowhere."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _say_waiting():
    print("another bake of this folder is at work; waiting until it ends", file=sys.stderr, flush=True)


def _accept(names, snapshot):
    from .stages.nights import accept_held

    if not names:
        raise PipelineError(["--accept: name the probes whose held files are to be published, or '*'"])
    if not accept_held(snapshot):
        print(f"nothing is held of {', '.join(names)}", file=sys.stderr)


def _plan(options):
    from .engine.chains import chain_of, glance_at
    from .engine.wording import plan_lines, plan_record

    targets = _snapshot(options).targets
    if options.json:
        chains = [chain_of(target) for target in targets]
        print(json.dumps({"chains": plan_record(chains)}, indent=1, ensure_ascii=False))
    else:
        print("\n".join(plan_lines([glance_at(target) for target in targets])))
    return ALL_WELL


def _why(options):
    from .engine.chains import chain_of
    from .engine.wording import why_lines

    snapshot = _snapshot(options)
    chains = [chain_of(target) for target in snapshot.probes]
    print("\n".join(why_lines(chains, snapshot.pipeline.root)))
    return ALL_WELL


def _join(options):
    from .config import load_pipeline
    from .stages.farm import join
    from .stages.kernels import available_cores

    join(
        options.scheduler,
        load_pipeline(options.file),
        options.workers or available_cores(),
        options.verbose,
    )
    return ALL_WELL


def _prune(options):
    from .config import load_pipeline
    from .engine.locks import at_work_in
    from .engine.prune import leftovers, remove_leftovers
    from .engine.wording import prune_lines
    from .stages.snapshot import Snapshot

    pipeline = load_pipeline(options.file)
    work = pipeline.build_dir / "work"
    if not work.is_dir():
        print("nothing was baked here yet")
        return ALL_WELL
    with at_work_in(work, None, _say_waiting):
        found = leftovers(work, Snapshot(pipeline).targets)
        print("\n".join(prune_lines(found, pipeline.root, options.dry_run)))
        if not options.dry_run:
            remove_leftovers(pipeline.build_dir, found)
    return ALL_WELL


def _inspect(options):
    from pathlib import Path

    from .report.inspection import Inspection, broken_file_rules

    path = Path(options.packed)
    if options.check:
        broken = broken_file_rules(path)
        print("\n".join(f"{path}: {rule}" for rule in broken) or f"{path}: sound")
        return SOURCE_FAILED if broken else ALL_WELL
    found = Inspection(path)
    if options.picture:
        found.draw(Path(options.picture))
    print(found.samples(options.at, options.level) if options.at else "\n".join(found.lines()))
    return ALL_WELL


def _schema(options):
    from .config import pipeline_schema

    print(json.dumps(pipeline_schema(), indent=1, ensure_ascii=False))
    return ALL_WELL


def _snapshot(options):
    from .config import load_pipeline
    from .stages.snapshot import Snapshot

    return Snapshot(load_pipeline(options.file), options.names)


def _parser():
    parser = argparse.ArgumentParser(
        prog="skykiln",
        description="Bakes HDR skies and light probes into filtered cube maps for image-based lighting.",
    )
    parser.add_argument("--version", action=_Version, help="show the version and end")
    commands = parser.add_subparsers(required=True, metavar="COMMAND")
    bake = _command(commands, "bake", _bake, "bring probes up to date and publish them")
    _names(bake, "*")
    bake.add_argument("--again", action="store_true", help="run every stage, up to date or not")
    bake.add_argument(
        "--accept", action="store_true", help="publish what a gate holds of the probes named, as it is packed"
    )
    bake.add_argument(
        "--workers", type=_count, metavar="N", help="processes for small probes (as many as cores)"
    )
    bake.add_argument(
        "--verify", action="store_true", help="read all bytes again where size and time would do"
    )
    farm = bake.add_mutually_exclusive_group()
    farm.add_argument(
        "--shard", type=_shard, metavar="K/N", help="bake share K of N, K from 0: on one machine of a farm"
    )
    farm.add_argument(
        "--finish", action="store_true", help="end a night of shards: bake what is left, write night.json"
    )
    farm.add_argument(
        "--scheduler", type=_address, metavar="HOST:PORT", help="share the work with who joined this luigid"
    )
    bake.add_argument("-v", "--verbose", action="store_true", help="show what Luigi logs")
    plan = _command(commands, "plan", _plan, "say which stages would run, and why")
    _names(plan, "*")
    plan.add_argument("--json", action="store_true", help="every stage and its state, as JSON")
    why = _command(commands, "why", _why, "say why stages ran last, or would run next")
    _names(why, "+")
    join = _command(commands, "join", _join, "bake what a central scheduler hands out, until SIGUSR1")
    join.add_argument("scheduler", type=_address, metavar="HOST:PORT", help="where luigid listens")
    join.add_argument("--workers", type=_count, metavar="N", help="processes here (as many as cores)")
    join.add_argument("-v", "--verbose", action="store_true", help="show what Luigi logs")
    prune = _command(commands, "prune", _prune, "remove what no entry asks for any more")
    prune.add_argument("--dry-run", action="store_true", help="say what would go, and leave it")
    inspect = _command(commands, "inspect", _inspect, "show what a packed file holds", pipeline=False)
    inspect.add_argument("packed", metavar="FILE", help="a KTX2, DDS or OpenEXR file")
    inspect.add_argument("--check", action="store_true", help="name every broken rule of the format")
    inspect.add_argument("--picture", metavar="PNG", help="draw all levels, unfolded")
    inspect.add_argument(
        "--at", type=_direction, metavar="X,Y,Z", help="print what a sampler gives for a vector of cube space"
    )
    inspect.add_argument("--level", type=float, default=0.0, metavar="K", help="level of detail for --at (0)")
    _command(commands, "schema", _schema, "print the JSON Schema of pipeline.yaml", pipeline=False)
    return parser


class _Version(argparse.Action):
    """Looks the version up when it is asked for, not at every start."""

    def __init__(self, option_strings, dest, help):
        super().__init__(option_strings, argparse.SUPPRESS, nargs=0, help=help)

    def __call__(self, parser, namespace, values, option_string=None):
        from .engine.release import release

        print(f"skykiln {release()}")
        parser.exit()


def _command(commands, name, run, text, pipeline=True):
    command = commands.add_parser(name, help=text, description=f"{text[0].upper()}{text[1:]}.")
    command.set_defaults(run=run)
    if pipeline:
        command.add_argument(
            "-f", "--file", default="pipeline.yaml", metavar="FILE", help="the pipeline file (pipeline.yaml)"
        )
    return command


def _names(command, count):
    text = "a probe, or a pattern such as 'concourse/*'"
    command.add_argument("names", nargs=count, metavar="NAME", help=text)


def _joined(arguments):
    """`--at -1,0,0` as one argument: argparse would take the vector for an option."""
    joined = []
    for argument in arguments:
        if joined and joined[-1] == "--at":
            joined[-1] = f"--at={argument}"
        else:
            joined.append(argument)
    return joined


def _direction(text):
    numbers = [float(part) for part in text.split(",")]
    if len(numbers) != 3 or not all(abs(number) < 1e30 for number in numbers) or not any(numbers):
        raise argparse.ArgumentTypeError(f"{text!r} is no vector x,y,z")
    return numbers


def _shard(text):
    from .engine.shards import Shard

    try:
        return Shard.parse(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not K/N, with K from 0 to N - 1") from None


def _address(text):
    host, _, port = text.rpartition(":")
    if not host or not port.isdecimal():
        raise argparse.ArgumentTypeError(f"{text!r} is not HOST:PORT")
    return text


def _count(text):
    number = int(text)
    if number < 0:
        raise argparse.ArgumentTypeError(f"{number} is less than 0")
    return number
