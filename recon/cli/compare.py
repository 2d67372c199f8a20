"""fewcount compare"""

from __future__ import annotations

import sys
from argparse import Namespace
from collections.abc import Sequence
from pathlib import Path

from priors import Prior
from recon.cli.job import Source, complain_of_images, without_trace
from recon.cli.output_folder import output_folder
from recon.cli.prior_names import prior_named
from recon.cli.progress import SolveProgress
from recon.cli.version import version
from recon.errors import InputError
from recon.files.json_text import json_text, write_json
from recon.files.tiff import write_tiff
from recon.imaging import Comparison
from recon.imaging.compare import compare
from recon.report import words
from recon.report.comparison import ComparisonPicture, comparison_record, save_comparison
from recon.report.record import acquisition_record


def run(options: Namespace) -> int:
    """Compare priors on an acquisition file; return the exit code."""
    source = Source.read(Path(options.file))
    names = options.prior
    priors = priors_named(names)
    out = Path(options.out or Path("fewcount-out", f"{Path(options.file).stem}-compared"))
    with output_folder(out) as folder:
        with SolveProgress(options.tolerance, hidden=options.quiet) as progress:
            progress.step(f"{source.name}: starting")

            def turn(index: int) -> None:
                progress.of = words.spelled(names[index])

            comparison = compare(
                source.acquisition,
                priors,
                tolerance=options.tolerance,
                max_iterations=options.max_iterations,
                callback=progress,
                on_weight=progress.of_weight,
                on_prior=turn,
            )
            progress.step("writing")
            record = _write(folder, source, names, comparison)
        if options.json:
            short = {name: without_trace(prior) for name, prior in record["priors"].items()}
            sys.stdout.write(json_text(record | {"folder": str(folder), "priors": short}))
        elif not options.quiet:
            from recon.cli.comparison_table import print_comparison

            print_comparison(source.name, record, folder)
        complain_of_images(record["priors"])
        return 0 if record["converged"] else 1


def priors_named(names: Sequence[str]) -> list[Prior]:
    """Return the priors of these names, their weights open. Raises InputError."""
    from recon.cli.prior_names import CLASSES

    found = []
    for index, name in enumerate(names):
        if name in names[:index]:
            raise InputError(f"--prior {name} is given more than once; give each prior once.")
        found.append(prior_named(name, None, of_depth=False))
    if len(found) < 2:
        raise InputError(
            f"--prior is given {len(found)} times; give it two times or more, each with one of"
            f" {', '.join(CLASSES)}."
        )
    return found


def _write(folder: Path, source: Source, names: Sequence[str], comparison: Comparison) -> dict:
    kind = comparison.kind
    truth = source.truth.get(kind)
    if truth is not None and truth.shape != source.acquisition.shape:
        truth = None
    compared = comparison_record(comparison, truth)
    acquisition = acquisition_record(source.acquisition, source.note)
    for name, candidate in zip(names, comparison.candidates, strict=True):
        image = candidate.image
        files = {"image": f"{kind}_{name}.tif", "uncertainty": f"{kind}_{name}_uncertainty.tif"}
        compared["priors"][name]["files"] = files
        write_tiff(folder / files["image"], image.image, kind, image.unit)
        uncertain = f"standard uncertainty of {kind}"
        write_tiff(folder / files["uncertainty"], image.uncertainty, uncertain, image.unit)
    picture = ComparisonPicture(comparison, compared, acquisition, truth, source.name)
    save_comparison(folder / "comparison.png", picture)
    record = {
        "version": version(),
        "converged": all(words.is_converged(prior) for prior in compared["priors"].values()),
        "acquisitions": {source.name: acquisition},
        "files": {"picture": "comparison.png"},
    } | compared
    write_json(folder / "comparison.json", record)
    return record
