"""skykiln join"""

from ..errors import ALL_WELL
from .arguments import add_command, address, count


def add_to(commands):
    join = add_command(commands, "join", run, "bake what a central scheduler hands out, until SIGUSR1")
    join.add_argument("scheduler", type=address, metavar="HOST:PORT", help="where luigid listens")
    join.add_argument("--workers", type=count, metavar="N", help="processes here (as many as cores)")
    join.add_argument("-v", "--verbose", action="store_true", help="show what Luigi logs")


def run(options):
    from ..config import load_pipeline
    from ..stages.farm import join
    from ..stages.kernels import available_cores

    join(
        options.scheduler,
        load_pipeline(options.file),
        options.workers or available_cores(),
        options.verbose,
    )
    return ALL_WELL
