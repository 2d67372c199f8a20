"""fewcount reconstruct"""

from __future__ import annotations

from argparse import Namespace
from pathlib import Path

from recon.acquisition import TimeHistogram, TimeTags
from recon.cli.job import Job, Settings, Source
from recon.cli.output_folder import output_folder
from recon.cli.prior_names import prior_named
from recon.weights import checked_rule


def run(options: Namespace) -> int:
    """Reconstruct an acquisition file; return the exit code."""
    source = Source.read(Path(options.file))
    named = isinstance(options.weight, str)
    rule, weight = (checked_rule(options.weight), None) if named else ("auto", options.weight)
    prior = prior_named(options.prior, weight, isinstance(source.acquisition, TimeTags | TimeHistogram))
    settings = Settings(
        prior,
        options.tolerance,
        options.max_iterations,
        options.unknown_current,
        options.moving,
        options.fit,
        rule,
    )
    out = Path("fewcount-out", Path(options.file).stem) if options.out is None else Path(options.out)
    with output_folder(out) as folder:
        job = Job(folder, settings, options)
        job.add(source)
        return job.finish()
