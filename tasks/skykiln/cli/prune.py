"""skykiln prune"""

from ..errors import ALL_WELL
from .arguments import add_command
from .telling import say_waiting


def add_to(commands):
    prune = add_command(commands, "prune", run, "remove what no entry asks for any more")
    prune.add_argument("--dry-run", action="store_true", help="say what would go, and leave it")


def run(options):
    from ..config import load_pipeline
    from ..engine.locks import at_work_in
    from ..engine.prune import leftovers, remove_leftovers
    from ..engine.wording import prune_lines
    from ..stages.snapshot import Snapshot

    pipeline = load_pipeline(options.file)
    work = pipeline.build_dir / "work"
    if not work.is_dir():
        print("nothing was baked here yet")
        return ALL_WELL
    with at_work_in(work, None, say_waiting):
        found = leftovers(work, Snapshot(pipeline).targets)
        print("\n".join(prune_lines(found, pipeline.root, options.dry_run)))
        if not options.dry_run:
            remove_leftovers(pipeline.build_dir, found)
    return ALL_WELL
