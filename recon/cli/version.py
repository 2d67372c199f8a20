"""The version that is running."""

from importlib import metadata


def version() -> str:
    """Return the version of the installed distribution, "unknown" where it runs without being installed."""
    try:
        return metadata.version("fewcount")
    except metadata.PackageNotFoundError:
        return "unknown"
