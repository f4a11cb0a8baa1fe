"""Which skykiln this is."""

from importlib.metadata import PackageNotFoundError, version


def release() -> str:
    """The installed version, or 'uninstalled' in a checkout that was never installed."""
    try:
        return version("skykiln")
    except PackageNotFoundError:
        return "uninstalled"
