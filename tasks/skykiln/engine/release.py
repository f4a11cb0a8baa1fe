"""Which skykiln this is: its version for people, the digest of its code for machines."""

import functools
import hashlib
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path


def release() -> str:
    """The installed version, or 'uninstalled' in a checkout that was never installed."""
    try:
        return version("skykiln")
    except PackageNotFoundError:
        return "uninstalled"


@functools.lru_cache(maxsize=8)
def code_digest(about=()) -> str:
    """Digest of all sources of the package, and of what else decides what it does.

    Parameters: about : any values with a repr of their own
    """
    digest = hashlib.sha256(repr(about).encode())
    package = Path(__file__).parents[1]
    for path in sorted(package.rglob("*.py")):
        digest.update(f"\n{path.relative_to(package)}\n".encode() + path.read_bytes())
    return digest.hexdigest()[:32]
