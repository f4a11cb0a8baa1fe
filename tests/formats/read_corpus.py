"""Reads every file of a folder in this one process, and prints what came of it as JSON lines.

A file that takes longer than SECONDS ends the process by its alarm; the parent sees the signal.
"""

import json
import signal
import sys
from pathlib import Path

from skykiln.errors import FileError
from skykiln.formats.image import ReadOptions
from skykiln.formats.radiance_hdr import read_radiance_hdr
from skykiln.formats.source_files import read_source

SECONDS = 5


def told(path: Path) -> str | None:
    """What a reader says of a file; None if it reads it."""
    try:
        read_source(path, ReadOptions(allow_ldr=True))
    except FileError as error:
        return str(error)
    return None


def peak_megabytes() -> int:
    """The most memory that this process had at once; getrusage counts its parent's in."""
    status = Path("/proc/self/status").read_text()
    return int(status.partition("VmHWM:")[2].split()[0]) // 1024


if __name__ == "__main__":
    # Compiles the kernel, which is none of the files' time.
    read_radiance_hdr(b"#?RADIANCE\n\n-Y 1 +X 1\n" + bytes(4), "tiny.hdr")
    for path in sorted(Path(sys.argv[1]).iterdir()):
        print(json.dumps({"file": path.name}), flush=True)
        signal.alarm(SECONDS)
        said = told(path)
        signal.alarm(0)
        print(json.dumps({"file": path.name, "told": said, "megabytes": peak_megabytes()}), flush=True)
