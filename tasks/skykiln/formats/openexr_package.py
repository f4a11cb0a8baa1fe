"""The `OpenEXR` package's way to open a file, with the causes that it only prints.

It doesn't raise on damaged pixels: it prints a warning on sys.stdout and leaves the part out.
"""

import contextlib
import io
import sys

import OpenEXR

from skykiln.errors import FileError

_WARNING = "Warning: Exception raised"


def open_openexr(source, name: str, header_only: bool):
    """The package's file object of a path (as str) or a binary file, every channel by itself.

    Raises: FileError where the header can't be read, or the package warned of damage.
    """
    printed = io.StringIO()
    try:
        with contextlib.redirect_stdout(printed):
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
