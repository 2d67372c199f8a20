"""fewcount demo"""

from __future__ import annotations

from argparse import Namespace

from recon.bundled import NAMES, bundled
from recon.cli.job import Job, Settings, Source
from recon.cli.output_folder import output_folder
from recon.cli.warm_up import compiling_ahead


def run(options: Namespace) -> int:
    """Reconstruct the bundled acquisitions; return the exit code."""
    sources = [Source.read(bundled(name)) for name in NAMES]
    with output_folder(options.out) as folder, compiling_ahead():
        job = Job(folder, Settings(), options)
        for source in sources:
            job.add(source)
        return job.finish()
