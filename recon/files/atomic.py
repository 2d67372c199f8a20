"""Writing a file all or nothing."""

import os
import secrets
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from recon.errors import InputError


@contextmanager
def replacing(path: str | os.PathLike) -> Iterator[Path]:
    """Yield a temporary path beside `path`, with its suffix, to be written in the block.

    When the block ends the file takes the place of `path` in one step; when the block raises it is
    removed and `path` is left as it was. Raises InputError if `path` cannot name a file.
    """
    target = checked_path(path)
    if target.is_dir():
        raise InputError(f"path {target} is a directory; give the name of a file.")
    if not target.parent.is_dir():
        raise InputError(f"path {target} is in a directory that does not exist; make the directory first.")
    if not os.access(target.parent, os.W_OK):
        raise InputError(f"path {target} is in a directory that cannot be written to; choose another.")
    temporary = target.with_name(f".{target.stem[:100]}-{secrets.token_hex(6)}{target.suffix}")
    try:
        yield temporary
        os.replace(temporary, target)
    finally:
        temporary.unlink(missing_ok=True)


def checked_path(path: str | os.PathLike) -> Path:
    """The path, with links followed so that the file they point to is meant."""
    try:
        return Path(os.path.realpath(os.fspath(path)))
    except (OSError, TypeError, ValueError) as error:
        raise InputError(f"path {path!r} is not the name of a file; give a string or a path.") from error
