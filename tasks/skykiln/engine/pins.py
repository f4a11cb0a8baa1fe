"""Pins: the digest of a source's bytes, taken once when the graph is made.

A file whose size, time and inode are as they were is not read again. A file that was written less
than two seconds before it was read is: clocks of file systems are too coarse to show a second write.
"""

import json
import stat
import time
from pathlib import Path

from .atomic import write_atomically
from .digests import digest_chunks, digest_file, json_bytes
from .staleness import UNREADABLE

TOO_YOUNG_NS = 2_000_000_000


class Pins:
    """The digest cache of a build folder.

    Parameters: store : the JSON file, .pins*.json, that keeps it between bakes; the others of its
                        folder, which shards of a farm wrote, are read too
                verified : whether to read every file again, whatever the store says
    """

    def __init__(self, store: Path, verified: bool = False):
        self.store = Path(store)
        self._verified = verified
        others = sorted(set(self.store.parent.glob(".pins*.json")) - {self.store})
        self._entries = {}
        for each in (*others, self.store):
            self._entries |= _read(each)
        self._changed = False

    def pin(self, path: Path, largest: int | None = None) -> str:
        """Digest of the file's bytes, or 'unreadable: <cause>', which no file's bytes ever have.

        Parameters: largest : the most bytes of a file that is worth reading
        """
        try:
            status = path.stat()
            if not stat.S_ISREG(status.st_mode):
                return f"{UNREADABLE}: not a file"
            if largest is not None and status.st_size > largest:
                return f"{UNREADABLE}: {status.st_size} bytes, more than the limit of {largest}"
            return self._digest(path, status)
        except OSError as error:
            return f"{UNREADABLE}: {error.strerror}"

    def save(self):
        """Write the cache if it learnt something."""
        if self._changed:
            write_atomically(self.store, [json_bytes(self._entries)], synced=False)
            self._changed = False

    def _digest(self, path, status):
        seen = [status.st_size, status.st_mtime_ns, status.st_ino]
        entry = self._entries.get(str(path))
        if entry and entry[:3] == seen and not self._verified:
            return entry[3]
        young = time.time_ns() - status.st_mtime_ns < TOO_YOUNG_NS
        digest = digest_file(path)
        if not young and entry != [*seen, digest]:
            self._entries[str(path)] = [*seen, digest]
            self._changed = True
        return digest


def joint_pin(pins) -> str:
    """The pin of a source from those of its files: of a single file its own."""
    pins = list(pins)
    unreadable = [pin for pin in pins if pin.startswith(UNREADABLE)]
    return (unreadable or pins)[0] if unreadable or len(pins) == 1 else digest_chunks(map(str.encode, pins))


def _read(store):
    try:
        entries = json.loads(store.read_bytes())
    except (OSError, ValueError):
        return {}
    return entries if isinstance(entries, dict) else {}
