"""Paths as records keep them: relative to the record's own folder, so that a build folder may move."""

import functools
import os


def relative_to(folder: str, path: str) -> str:
    """`path` as seen from `folder`, by its text alone."""
    if path.startswith(f"{folder}/"):
        return path[len(folder) + 1 :]
    parent, name = os.path.split(path)
    return f"{_way(folder, parent)}/{name}"


def joined(folder: str, relative: str) -> str:
    """The path that `relative_to` told. By its text alone: a folder on the way may be a link."""
    path = f"{folder}/{relative}"
    return os.path.normpath(path) if relative.startswith("../") else path


@functools.lru_cache(maxsize=64)
def _way(folder, other):
    return os.path.relpath(other, folder)
