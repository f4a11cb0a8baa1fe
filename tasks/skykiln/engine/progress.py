"""Progress of a bake, told by the stamps that appear: stages may run in any process, on any machine.

On a terminal: a bar for the bake and one for each probe at work. Elsewhere: a line for each probe
that is done.
"""

import sys
import threading
import time
from contextlib import contextmanager
from pathlib import Path

from .chains import chain_of
from .stamps import read_stamp

CLOSELY = 300  # targets; of more, only the last stage of each is watched
EVERY = 0.2  # seconds between two looks at the stamps
BARS = 8


@contextmanager
def shown(standings):
    """Show how far targets are, as they stood when the night began, while the block runs."""
    closely = len(standings) <= CLOSELY
    watched, file = [_Watched(standing, closely) for standing in standings], sys.stdout
    with _bars(watched, file) if file.isatty() else _lines(watched, file) as draw:
        ended = threading.Event()
        watcher = threading.Thread(target=_watch, args=(watched, draw, ended), daemon=True)
        watcher.start()
        try:
            yield
        finally:
            ended.set()
            watcher.join()


@contextmanager
def one_bar(text, total):
    """A bar on a terminal, nothing elsewhere. Gives: a function of how much is done, of `total`."""
    if not sys.stderr.isatty():
        yield lambda done: None
        return
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    columns = TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn()
    with Progress(*columns, console=Console(file=sys.stderr), transient=True) as progress:
        bar = progress.add_task(text, total=total)
        yield lambda done: progress.update(bar, completed=done)


class _Watched:
    """A target with stale stages, and how many of them have a new stamp.

    Unless it is watched closely, all count when the last has one.
    """

    def __init__(self, standing, closely):
        target = standing.target
        # What a single stage makes at once, and for all, is told by what it is.
        self.owner = target.owner if target.requires() else target.label
        self.total = standing.waiting
        self.done = 0
        self.seconds = 0.0 if closely else None
        self._last = target.stamp_path
        stages = [verdict.stage for verdict in chain_of(target).stale] if closely else [target]
        self._waiting = {stage.stamp_path: _sign(stage.stamp_path) for stage in stages}

    def look(self):
        """Count new stamps. Returns: whether there are any."""
        news = [path for path, sign in self._waiting.items() if _sign(path) not in (None, sign)]
        for path in news:
            del self._waiting[path]
            stamp = read_stamp(path)
            if self.seconds is not None and stamp:
                self.seconds += stamp.seconds
        self.done += len(news)
        if self._last in news:  # what has no new stamp by now did not have to run
            self.total = self.done
        return bool(news)

    @property
    def finished(self):
        return self.done == self.total

    def sentence(self):
        if self.seconds is None:  # one of many: its stages weren't counted
            return f"{self.owner}: done"
        stages = "1 stage" if self.total == 1 else f"{self.total} stages"
        return f"{self.owner}: {stages} in {self.seconds:.2f} s"


def _sign(path):
    try:
        status = Path(path).stat()
    except OSError:
        return None
    return status.st_mtime_ns, status.st_ino


def _watch(watched, draw, ended):
    """Look until the bake ends, and once more then; looking takes a tenth of the time at most."""
    last = False
    while not last:
        began = time.monotonic()
        last = ended.is_set()
        changed = [chain for chain in watched if not chain.finished and chain.look()]
        try:
            draw(changed)
        except BrokenPipeError:  # whoever read along has gone; the bake goes on
            return
        if not last:
            ended.wait(max(EVERY, 10 * (time.monotonic() - began)))


@contextmanager
def _lines(watched, file):
    def draw(changed):
        for chain in changed:
            if chain.finished:
                print(chain.sentence(), file=file, flush=True)

    yield draw


@contextmanager
def _bars(watched, file):
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeElapsedColumn

    columns = TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeElapsedColumn()
    with Progress(*columns, console=Console(file=file)) as progress:
        everything = progress.add_task("all stages", total=sum(chain.total for chain in watched))
        bars = {}

        def draw(changed):
            for chain in changed:
                _draw_chain(progress, bars, chain)
            done, total = sum(chain.done for chain in watched), sum(chain.total for chain in watched)
            progress.update(everything, completed=done, total=total)

        yield draw


def _draw_chain(progress, bars, chain):
    """Move a probe's bar; a probe that is done leaves a line in its place."""
    if chain.finished:
        if chain.owner in bars:
            progress.remove_task(bars.pop(chain.owner))
        progress.console.print(chain.sentence(), highlight=False, markup=False)
        return
    if chain.owner not in bars and len(bars) < BARS:
        bars[chain.owner] = progress.add_task(f"  {chain.owner}", total=chain.total)
    if chain.owner in bars:
        progress.update(bars[chain.owner], completed=chain.done)
