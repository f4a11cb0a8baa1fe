"""skykiln why"""

from ..errors import ALL_WELL
from .arguments import add_command, add_names, snapshot_of


def add_to(commands):
    why = add_command(commands, "why", run, "say why stages ran last, or would run next")
    add_names(why, "+")


def run(options):
    from ..engine.chains import chain_of
    from ..engine.wording import why_lines

    snapshot = snapshot_of(options)
    chains = [chain_of(target) for target in snapshot.probes]
    print("\n".join(why_lines(chains, snapshot.pipeline.root)))
    return ALL_WELL
