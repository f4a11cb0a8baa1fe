"""Prune: removing what no entry asks for any more, and nothing that skykiln did not write.

What skykiln wrote is known by its stamps: a stamp names its outputs and their digests. A file that is
named by no stamp, or that holds other bytes than its stamp says, stays.
"""

from pathlib import Path
from typing import NamedTuple

from .atomic import remove, sweep
from .chains import stages_below
from .failures import failure_path, is_failure
from .relative import joined
from .stamps import read_stamp


class Leftover(NamedTuple):
    """Outputs that no entry asks for, with what goes when they are gone.

    outputs : what a reader looks at first comes first; records : stamp, seal, cause of a failure
    kept : files that something else has changed
    """

    outputs: list
    records: list
    kept: list


def leftovers(work: Path, targets) -> list[Leftover]:
    """What a build folder holds that the targets don't need.

    Parameters: work : the folder of stamps
    """
    wanted = {path for target in targets for path in _files_of(target)}
    stamps = (path for path in sorted(work.rglob("*.stamp")) if str(path) not in wanted)
    found = [_leftover(path, wanted) for path in stamps]
    failures = [path for path in sorted(work.rglob("*.failure")) if str(path) not in wanted]
    alone = [path for path in failures if is_failure(path)]
    return [each for each in (*found, Leftover([], alone, [])) if each and any(each)]


def remove_leftovers(build_dir: Path, found):
    """Remove leftovers, and the folders that are empty then."""
    folders = set()
    for leftover in found:
        for path in (*leftover.outputs, *leftover.records):
            remove(path)
            folders.add(path.parent)
    for folder in sorted(folders, key=lambda folder: len(folder.parts), reverse=True):
        sweep(folder)
        _remove_empty(folder, build_dir)


def _files_of(target):
    for stage in stages_below(target):
        yield from (stage.stamp_path, stage.seal_path, str(failure_path(stage)), *stage.files().values())


def _leftover(path, wanted):
    stamp = read_stamp(path)
    if stamp is None or not stamp.family.startswith("skykiln."):
        return None
    outputs, kept = [], []
    for record in reversed(stamp.outputs.values()):
        file = Path(joined(str(path.parent), record.file))
        if str(file) not in wanted and file.is_file() and not file.is_symlink():
            (outputs if record.fits(file, believed=False) else kept).append(file)
    beside = [path.with_suffix(suffix) for suffix in (".seal", ".failure")]
    beside = [each for each in beside if each.exists() and str(each) not in wanted]
    return Leftover(outputs, [*beside, path], kept)


def _remove_empty(folder, build_dir):
    while build_dir in folder.parents and folder.parent != build_dir:
        try:
            folder.rmdir()
        except OSError:
            return
        folder = folder.parent
