"""Who may work in a build folder: one bake at a time, or the shards of one night together.

The locks are the system's (flock): they go with the process that holds them, however it ends. Where a
file system has none, bakes go on without: stamps and renames alone keep every result right then, and
two bakes at once do some work twice.
"""

import errno
import fcntl
from contextlib import ExitStack, contextmanager
from pathlib import Path

from .atomic import told_as_file_error

_NO_LOCKS_HERE = {errno.ENOLCK, errno.ENOTSUP, errno.EOPNOTSUPP, errno.ENOSYS, errno.EBADF}


@contextmanager
def at_work_in(work: Path, shard, waiting):
    """Hold the right to bake while the block runs.

    Parameters: shard : the Shard that is baked, None for a bake of everything
                waiting : called once if another bake has to end first
    """
    with ExitStack() as held:
        with told_as_file_error(work):
            work.mkdir(parents=True, exist_ok=True)
        if shard is None:
            _lock(held, work / ".lock", fcntl.LOCK_EX, waiting)
        else:
            _lock(held, work / ".lock", fcntl.LOCK_SH, waiting)
            _lock(held, work / f".lock.{shard.file_name}", fcntl.LOCK_EX, waiting)
        yield


def _lock(held, path, kind, waiting):
    with told_as_file_error(path):
        file = held.enter_context(path.open("a"))
    try:
        try:
            fcntl.flock(file, kind | fcntl.LOCK_NB)
        except BlockingIOError:
            waiting()
            fcntl.flock(file, kind)
    except OSError as error:
        if error.errno not in _NO_LOCKS_HERE:
            raise
