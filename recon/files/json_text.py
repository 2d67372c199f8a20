"""Records of numbers and arrays as JSON."""

from __future__ import annotations

import json
import math
import os
from collections.abc import Mapping
from typing import Any

import numpy as np

from recon.files.atomic import replacing


def json_text(record: Mapping[str, Any]) -> str:
    """Return a record as JSON, a line a value or list; what is not finite, which JSON cannot say, is null."""
    return _text(_plain(record), "") + "\n"


def write_json(path: str | os.PathLike, record: Mapping[str, Any]) -> None:
    """Write a record as a JSON file, all or nothing. Raises InputError or OSError as `replacing` does."""
    with replacing(path) as temporary:
        temporary.write_text(json_text(record), encoding="utf-8")


def _text(value: Any, margin: str) -> str:
    if not (isinstance(value, dict) and value):
        return json.dumps(value, allow_nan=False)
    inner = margin + "  "
    entries = (f"{inner}{json.dumps(name)}: {_text(entry, inner)}" for name, entry in value.items())
    return "{\n" + ",\n".join(entries) + f"\n{margin}}}"


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {str(key): _plain(entry) for key, entry in value.items()}
    if isinstance(value, np.ndarray | np.generic):
        return _plain(value.tolist())
    if isinstance(value, list | tuple):
        return [_plain(entry) for entry in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
