"""How soon the command line answers."""

from __future__ import annotations

import subprocess
import sys
import tempfile
from collections.abc import Iterator

from tests.bench.measure import Row, at_most, seconds

GROUP = "startup"


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""

    def run(*arguments: str) -> None:
        subprocess.run([sys.executable, *arguments], check=True, capture_output=True)

    numpy = seconds(lambda: run("-c", "import numpy"), 9)
    ours = seconds(lambda: run("-m", "recon.cli", "--help"), 9)
    detail = f"{ours * 1e3:.0f} ms over {numpy * 1e3:.0f} ms"
    yield at_most(GROUP, "fewcount --help over import numpy", ours / numpy, "x", 3.0, detail)
    with tempfile.TemporaryDirectory() as folder:
        demo = seconds(lambda: run("-m", "recon.cli", "--quiet", "demo", "--out", folder), 3)
    yield at_most(GROUP, "fewcount demo, compiled", demo, "s", 20.0, "median of 3")
