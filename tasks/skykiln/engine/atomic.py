"""Files that appear whole or not at all.

A file is written beside its place under a name that holds host and process, brought to the disk
(fsync) where it must outlive a power cut, and renamed into its place. Whoever is killed on the way
leaves a file that no reader looks at and that the next bake sweeps away.
"""

import ctypes
import errno
import functools
import os
import socket

from ..errors import FileError

SUFFIX = ".tmp"


class told_as_file_error:
    """Turn an OSError about writing `path`, of so many bytes, into the sentence the user needs."""

    def __init__(self, path, size: int = 0):
        self._path, self._size = path, size

    def __enter__(self):
        return self

    def __exit__(self, kind, error, trace):
        if not isinstance(error, OSError):
            return
        cause, cure = error.strerror or str(error), "give write permission"
        if error.errno in (errno.ENOSPC, errno.EDQUOT):
            cause, cure = f"{cause}, {self._size:,} bytes are needed", "make room"
        raise FileError(f"{self._path}: can't be written: {cause}; {cure}, then bake again") from error


def temporary_name(path) -> str:
    """Where this process writes what will become `path`."""
    folder, name = os.path.split(path)
    return os.path.join(folder, f".{name}.{_host()}.{os.getpid()}{SUFFIX}")


def write_beside(path, chunks, synced: bool = True) -> str:
    """Write chunks of bytes beside `path`.

    Parameters: synced : whether the bytes must be on the disk before this returns
    Returns:    the temporary file
    Raises:     FileError naming `path`; nothing is left then
    """
    beside, views = temporary_name(path), [memoryview(chunk) for chunk in chunks]
    with told_as_file_error(path, sum(view.nbytes for view in views)):
        try:
            with _created(beside) as file:
                _write(file, views, synced)
        except BaseException:
            remove(beside)
            raise
    return beside


def rename_into_place(beside, path):
    """Let the finished file appear under its own name."""
    with told_as_file_error(path):
        os.replace(beside, path)


def write_atomically(path, chunks, synced: bool = True):
    """Write a file in one go."""
    rename_into_place(write_beside(path, chunks, synced), path)


def remove(path):
    """Remove a file that may be missing."""
    try:
        os.unlink(path)
    except FileNotFoundError:
        return
    except OSError:
        with told_as_file_error(path):
            raise


def sweep(folder):
    """Remove what killed processes of this host left in a folder."""
    if not os.path.isdir(folder):
        return
    for entry in os.scandir(folder):
        if entry.name.startswith(".") and entry.name.endswith(SUFFIX) and _is_left_over(entry.name):
            remove(entry.path)


def sync_folder(folder):
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
    by_device = {os.stat(folder).st_dev: folder for folder in folders if os.path.isdir(folder)}
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
        return open(path, "wb", buffering=0)
    except FileNotFoundError:
        os.makedirs(os.path.dirname(path), exist_ok=True)
        return open(path, "wb", buffering=0)


def _write(file, views, synced):
    for view in views:
        written = file.write(view)
        while written < view.nbytes:  # a full disk takes a part, a signal cuts short
            written += file.write(view.cast("B")[written:])
    if synced:
        os.fsync(file.fileno())


@functools.cache
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
