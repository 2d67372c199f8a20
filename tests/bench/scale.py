"""What an iteration costs at 4096 x 4096 over 512 x 512, and the memory it takes."""

from __future__ import annotations

import json
from collections.abc import Iterator

from tests.bench.measure import Row, apart, at_most

GROUP = "scale"

_TIMED = """
import json, time
from recon.solvers.primal_dual import PrimalDual
from tests.bench.scenes import poisson_problem
problem = poisson_problem(({side}, {side}))
run = PrimalDual(problem, problem.likelihood.estimate())
run._correction = 0.0
for _ in range(3): run.advance()
times = []
for _ in range({repeats}):
    began = time.perf_counter()
    for _ in range({steps}): run.advance()
    times.append((time.perf_counter() - began) / {steps})
print(json.dumps(sorted(times)[len(times) // 2] / {side}**2))
"""

_MEMORY = """
import json
import recon
from tests.bench.measure import peak_megabytes
from tests.bench.scenes import poisson_problem
recon.solve(poisson_problem((64, 64)))
problem = poisson_problem(({side}, {side}))
before = peak_megabytes()
import gc; gc.collect()
with open("/proc/self/status") as status:
    resident = next(int(line.split()[1]) / 1024.0 for line in status if line.startswith("VmRSS"))
with open("/proc/self/clear_refs", "w") as reset:
    reset.write("5")
recon.solve(problem, max_iterations=60)
with open("/proc/self/status") as status:
    peak = next(int(line.split()[1]) / 1024.0 for line in status if line.startswith("VmHWM"))
print(json.dumps(peak - resident))
"""


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    small = json.loads(apart(_TIMED.format(side=512, steps=50, repeats=9)))
    large = json.loads(apart(_TIMED.format(side=4096, steps=3, repeats=5)))
    detail = f"{small * 1e9:.2f} and {large * 1e9:.2f} ns an iteration and pixel"
    yield at_most(GROUP, "cost of a pixel, 4096 over 512", large / small, "x", 4.0, detail)
    megabytes = json.loads(apart(_MEMORY.format(side=4096)))
    images = megabytes / (4096 * 4096 * 4 / 2**20)
    detail = f"{megabytes:.0f} MB above the problem and its data"
    yield at_most(GROUP, "peak memory, 4096 x 4096", images, "float32 images", 14.0, detail)
