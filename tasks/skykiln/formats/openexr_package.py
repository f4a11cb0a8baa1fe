"""The `OpenEXR` package's way to open a file, with the causes that it only prints.

It doesn't raise on damaged pixels: it prints a warning on sys.stdout and leaves the part out. The C
library below it has also written a line for every damaged block of the file to file descriptor 2 by
then, hundreds for a picture that was cut, past anything that Python could catch. So the descriptor
itself leads to a temporary file while the package reads. It is the whole process's: the lock keeps two
reads from taking each other's file for stderr, and what others write meanwhile is passed on.
"""

import contextlib
import io
import os
import sys
import tempfile
import threading

import OpenEXR

from skykiln.errors import FileError

_WARNING = "Warning: Exception raised"
_LIBRARY_ERRORS = (b"(EXR_ERR_", b"ojph ")  # of OpenEXR's core and of its JPEG 2000
_stderr_lock = threading.Lock()


def open_openexr(source, name: str, header_only: bool):
    """The package's file object of a path (as str) or a binary file, every channel by itself.

    Raises: FileError where the header can't be read, or the package warned of damage.
    """
    printed = io.StringIO()
    try:
        with _quiet_library(), contextlib.redirect_stdout(printed):
            file = OpenEXR.File(source, separate_channels=True, header_only=header_only)
    except Exception as error:
        raise FileError(
            f"{name}: not a readable OpenEXR file ({error}); its header is damaged or cut: export it again"
        ) from error
    finally:
        lines = printed.getvalue().splitlines()
        # What other threads printed meanwhile goes where it was meant to go.
        for line in lines:
            if line and not line.startswith(_WARNING):
                print(line, file=sys.stdout)
    warnings = [line for line in lines if line.startswith(_WARNING)]
    if warnings:
        cause = warnings[0].rpartition(" - ")[2].strip()
        raise FileError(f"{name}: damaged or cut pixel data ({cause}); export it again")
    return file


@contextlib.contextmanager
def _quiet_library():
    """Keep the library's lines off file descriptor 2 while the block runs."""
    with _stderr_lock, tempfile.TemporaryFile() as caught:
        kept = os.dup(2)
        try:
            os.dup2(caught.fileno(), 2)
            yield
        finally:
            os.dup2(kept, 2)
            os.close(kept)
            caught.seek(0)
            _pass_on(caught)


def _pass_on(lines):
    """Write to stderr what the library has not written."""
    others = b"".join(line for line in lines if not any(error in line for error in _LIBRARY_ERRORS))
    while others:
        others = others[os.write(2, others) :]
