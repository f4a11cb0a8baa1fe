"""Files that appear whole or not at all.

A file is written beside its place under a name that holds host and process, brought to the disk
(fsync) where it must outlive a power cut, and renamed into its place. Whoever is killed on the way
leaves a file that no reader looks at and that the next bake sweeps away.
"""

import ctypes
import errno
import os
import socket
from contextlib import contextmanager
from pathlib import Path

from ..errors import FileError

SUFFIX = ".tmp"


@contextmanager
def told_as_file_error(path, size: int = 0):
    """Turn an OSError about writing `path`, of so many bytes, into the sentence the user needs."""
    try:
        yield
    except OSError as error:
        cause, cure = error.strerror or str(error), "give write permission"
        if error.errno in (errno.ENOSPC, errno.EDQUOT):
            cause, cure = f"{cause}, {size:,} bytes are needed", "make room"
        raise FileError(f"{path}: can't be written: {cause}; {cure}, then bake again") from error


def temporary_name(path: Path) -> Path:
    """Where this process writes what will become `path`."""
    return path.with_name(f".{path.name}.{_host()}.{os.getpid()}{SUFFIX}")


def write_beside(path: Path, chunks, synced: bool = True) -> Path:
    """Write chunks of bytes beside `path`.

    Parameters: synced : whether the bytes must be on the disk before this returns
    Returns:    the temporary file
    Raises:     FileError naming `path`; nothing is left then
    """
    beside, chunks = temporary_name(path), list(chunks)
    with told_as_file_error(path, sum(memoryview(chunk).nbytes for chunk in chunks)):
        try:
            with _created(beside) as file:
                _write(file, chunks, synced)
        except BaseException:
            beside.unlink(missing_ok=True)
            raise
    return beside


def rename_into_place(beside: Path, path: Path):
    """Let the finished file appear under its own name."""
    with told_as_file_error(path):
        beside.replace(path)


def write_atomically(path: Path, chunks, synced: bool = True):
    """Write a file in one go."""
    rename_into_place(write_beside(path, chunks, synced), path)


def remove(path: Path):
    """Remove a file that may be missing."""
    with told_as_file_error(path):
        path.unlink(missing_ok=True)


def sweep(folder: Path):
    """Remove what killed processes of this host left in a folder."""
    if not folder.is_dir():
        return
    for entry in os.scandir(folder):
        if entry.name.startswith(".") and entry.name.endswith(SUFFIX) and _is_left_over(entry.name):
            remove(Path(entry.path))


def sync_folder(folder: Path):
    """Bring a folder's names to the disk: what was renamed in it stays so through a power cut."""
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def sync_file_systems(folders):
    """Bring all that was written in the file systems of some folders to the disk.

    One call for many files, where a call for each would wait for the disk each time. Without the
    system's syncfs, all file systems are synced.
    """
    by_device = {folder.stat().st_dev: folder for folder in folders if folder.is_dir()}
    call = getattr(ctypes.CDLL(None, use_errno=True), "syncfs", None)
    if call is None:
        os.sync()
        return
    for folder in by_device.values():
        handle = os.open(folder, os.O_RDONLY)
        try:
            with told_as_file_error(folder):
                if call(handle):
                    raise OSError(ctypes.get_errno(), os.strerror(ctypes.get_errno()))
        finally:
            os.close(handle)


def _created(path):
    try:
        return path.open("wb")
    except FileNotFoundError:
        path.parent.mkdir(parents=True, exist_ok=True)
        return path.open("wb")


def _write(file, chunks, synced):
    for chunk in chunks:
        file.write(chunk)
    if synced:
        file.flush()
        os.fsync(file.fileno())


def _host():
    return socket.gethostname().replace(".", "-")


def _is_left_over(name):
    host, _, process = name.removesuffix(SUFFIX).rpartition(".")
    if not host.endswith(f".{_host()}") or not process.isdecimal():
        return False
    try:
        os.kill(int(process), 0)
    except ProcessLookupError:
        return True
    except OSError:
        return False
    return int(process) == os.getpid()
