"""Run benchmarks and print a table, or JSON."""

from __future__ import annotations

import argparse
import dataclasses
import json
import sys

from tests.bench import denoising, depth, electron_yield, engine, scale, startup, trust
from tests.bench.measure import Row

MODULES = (engine, scale, denoising, startup, depth, electron_yield, trust)
GROUPS = {module.GROUP: module.rows for module in MODULES}


def main(arguments: list[str] | None = None) -> int:
    """Run the groups asked for; return 0 if every figure is met, 1 if not."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench", description="Accuracy against time.")
    parser.add_argument("groups", nargs="*", metavar="GROUP", help=f"of {', '.join(GROUPS)}; all if left out")
    parser.add_argument("--json", action="store_true", help="print JSON in place of the table")
    options = parser.parse_args(arguments)
    unknown = [name for name in options.groups if name not in GROUPS]
    if unknown:
        parser.error(f"unknown group {unknown[0]}; give some of {', '.join(GROUPS)}")
    rows: list[Row] = []
    for name in options.groups or GROUPS:
        for row in GROUPS[name]():
            rows.append(row)
            if not options.json:
                mark = "met" if row.met else "SHORT"
                print(
                    f"{row.group:<10} {row.name:<38} {row.value:>9.3g} {row.unit:<15}"
                    f" {row.wanted:<15} {mark:<6} {row.detail}"
                )
                sys.stdout.flush()
    if options.json:
        print(json.dumps([dataclasses.asdict(row) for row in rows], indent=2))
    return 0 if all(row.met for row in rows) else 1


if __name__ == "__main__":
    sys.exit(main())
