"""skykiln inspect"""

from pathlib import Path

from ..errors import ALL_WELL, SOURCE_FAILED
from .arguments import add_command, direction


def add_to(commands):
    inspect = add_command(commands, "inspect", run, "show what a packed file holds", pipeline=False)
    inspect.add_argument("packed", metavar="FILE", help="a KTX2, DDS or OpenEXR file")
    inspect.add_argument("--check", action="store_true", help="name every broken rule of the format")
    inspect.add_argument("--picture", metavar="PNG", help="draw all levels, unfolded")
    inspect.add_argument(
        "--at", type=direction, metavar="X,Y,Z", help="print what a sampler gives for a vector of cube space"
    )
    inspect.add_argument("--level", type=float, default=0.0, metavar="K", help="level of detail for --at (0)")


def run(options):
    from ..report.inspection import Inspection, broken_file_rules

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
