"""The folder that results go to."""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from recon.errors import InputError


@contextmanager
def output_folder(path: str | os.PathLike) -> Iterator[Path]:
    """Make the folder before the work begins; if the block raises, take away what was made and is empty.

    Raises InputError if it cannot be made or written to.
    """
    folder = Path(path)
    made: list[Path] = []
    try:
        made = [parent for parent in (folder, *folder.parents) if not parent.exists()]
        folder.mkdir(parents=True, exist_ok=True)
        if not os.access(folder, os.W_OK | os.X_OK):
            raise PermissionError(None, "Permission denied")
    except (OSError, ValueError) as error:
        _remove(made)
        reason = getattr(error, "strerror", None) or error
        raise InputError(
            f"--out {path} is not a folder that can be written to ({reason}); give another."
        ) from error
    try:
        yield folder
    except BaseException:
        _remove(made)
        raise


def _remove(folders: list[Path]) -> None:
    for folder in folders:
        with suppress(OSError, ValueError):  # not empty, or never made
            folder.rmdir()
