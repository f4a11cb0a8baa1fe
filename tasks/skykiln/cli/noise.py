"""skykiln noise"""

from pathlib import Path

from ..errors import ALL_WELL
from .arguments import add_command, positive, snapshot_of
from .telling import say_waiting

TECHNIQUES = {"ggx": "GGX sampling", "filtered": "filtered lookups", "mis": "multiple importance sampling"}


def add_to(commands):
    text = "give a level as importance sampling would, its error, and the samples that it needs"
    noise = add_command(commands, "noise", run, text)
    noise.set_defaults(refuse=noise.error)
    noise.add_argument("names", nargs=1, metavar="NAME", help="a probe")
    noise.add_argument("--level", type=positive, required=True, metavar="K", help="a filtered level, from 1")
    noise.add_argument("--samples", type=positive, required=True, metavar="N", help="samples of each texel")
    told = ", ".join(f"{name}: {words}" for name, words in TECHNIQUES.items())
    noise.add_argument("--technique", choices=TECHNIQUES, default="ggx", help=f"{told} (ggx)")
    noise.add_argument(
        "--out", type=Path, default=Path(), metavar="FOLDER", help="where the two files go (here)"
    )


def run(options):
    from ..engine.locks import at_work_in
    from ..engine.progress import one_bar
    from ..stages.sampled_level import sampled_level

    if options.samples < 4 or (options.technique == "mis" and options.samples % 2):
        options.refuse("argument --samples: from 4, and an even number with --technique mis")
    snapshot = snapshot_of(options)
    if len(snapshot.probes) > 1:
        options.refuse("argument NAME: is more than one probe; name one")
    (target,) = snapshot.probes
    work, text = snapshot.pipeline.build_dir / "work", f"sampling level {options.level} of {target.owner}"
    with at_work_in(work, None, say_waiting), one_bar(text, None):
        found = sampled_level(target, options.level, options.samples, options.technique, options.out)
    _tell(options, target, found)
    return ALL_WELL


def _tell(options, target, found):
    for path, what in zip(found.files, ("radiance", "standard error"), strict=True):
        print(f"{path}: {what}, 6 faces of {found.face_size} x {found.face_size}, cube space")
    print(
        f"{TECHNIQUES[options.technique]}, {options.samples:,} samples a texel: in 95 % of all values the "
        f"standard error that the samples show is within {100 * found.error:.2g} %, "
        f"the deviation from the baked level within {100 * found.deviation:.2g} %"
    )
    needs = ((TECHNIQUES[name], _counts(found.needs[name], found.most)) for name in TECHNIQUES)
    told = "; ".join(f"{name} {counts}" for name, counts in needs)
    print(f"samples a texel for an error of 5, 1, 0.5 %: {told}")


def _counts(counts, most):
    return " / ".join(f"over {most:,}" if count is None else f"{_rounded(count):,}" for count in counts)


def _rounded(count):
    """Two digits: more are not known."""
    return int(float(f"{count:.2g}"))
