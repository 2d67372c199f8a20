"""The weight chosen, the cover of intervals, posterior draws, and whether a wrong model is found."""

from __future__ import annotations

from collections.abc import Iterator

from tests.bench import trust_choice, trust_coverage, trust_fit, trust_sampler
from tests.bench.measure import Row

GROUP = "trust"


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    for part in (trust_choice, trust_coverage, trust_sampler, trust_fit):
        yield from part.rows()
