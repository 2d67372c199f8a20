"""From acquisition files to a folder of results; what `demo` and `reconstruct` share."""

from __future__ import annotations

import sys
from argparse import Namespace
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from priors import Prior
from recon.cli.progress import SolveProgress
from recon.cli.version import version
from recon.files import load, load_note, load_truth
from recon.files.json_text import json_text, write_json
from recon.files.tiff import write_tiff
from recon.fit import ImageFit, goodness
from recon.imaging import DepthImage, PhysicalImage, Reconstruction, reconstruct
from recon.report import words
from recon.report.data_images import Acquisition, data_image, pixel_by_pixel
from recon.report.figure import Picture, save_picture
from recon.report.fit_figure import save_fit_picture
from recon.report.fit_record import fit_record
from recon.report.record import acquisition_record, image_record


@dataclass(frozen=True)
class Settings:
    """How to reconstruct."""

    prior: Prior | None = None
    tolerance: float | None = None
    max_iterations: int = 30_000
    unknown_current: bool = False
    moving: bool = False
    fit: bool = False  # whether to ask afterwards if the model fits
    weight: str = "auto"  # how to set it where the prior leaves it open


@dataclass(frozen=True, eq=False)
class Source:
    """An acquisition file that has been read."""

    name: str
    acquisition: Acquisition
    truth: Mapping[str, np.ndarray]
    note: str

    @classmethod
    def read(cls, path: Path) -> Source:
        """Read a file; raises InputError."""
        name = path.name.encode(errors="backslashreplace").decode()  # bytes that are no text, written out
        return cls(name, load(path), load_truth(path), load_note(path))


@dataclass
class Job:
    """Reconstructs acquisitions one after another and keeps the records of all of them."""

    folder: Path
    settings: Settings
    options: Namespace
    acquisitions: dict[str, dict[str, Any]] = field(default_factory=dict)
    images: dict[str, dict[str, Any]] = field(default_factory=dict)

    def add(self, source: Source) -> None:
        """Reconstruct, write the images and show the table."""
        quiet = self.options.quiet
        with SolveProgress(self.settings.tolerance, hidden=quiet) as progress:
            progress.step(f"{source.name}: starting")
            result = reconstruct(
                source.acquisition,
                self.settings.prior,
                tolerance=self.settings.tolerance,
                max_iterations=self.settings.max_iterations,
                callback=progress,
                on_weight=progress.of_weight,
                unknown_current=self.settings.unknown_current,
                moving=self.settings.moving,
                weight=self.settings.weight,
            )
            fits: Mapping[str, ImageFit] = {}
            if self.settings.fit:
                progress.step("asking whether the model fits")
                fits = goodness(result, callback=progress.of_fit).images
            progress.step("writing")
            records = self._write(source, result, fits)
        self.images.update(records)
        if not (quiet or self.options.json):
            from recon.cli.table import print_summary

            print_summary(source.name, self.acquisitions[source.name], records)
            if fits:
                from recon.cli.fit_table import print_fits

                print_fits(records)

    def finish(self) -> int:
        """Write diagnostics.json, say where everything is and what is wrong; return the exit code."""
        record = {
            "version": version(),
            "converged": all(words.is_converged(image) for image in self.images.values()),
            "acquisitions": self.acquisitions,
            "images": self.images,
        }
        write_json(self.folder / "diagnostics.json", record)
        if self.options.json:
            short = {name: without_trace(image) for name, image in self.images.items()}
            sys.stdout.write(json_text(record | {"folder": str(self.folder), "images": short}))
        elif not self.options.quiet:
            from recon.cli.table import print_line

            print_line(f"Images, pictures and diagnostics.json are in {self.folder}")
        complain_of_images(self.images)
        return 0 if record["converged"] else 1

    def _write(
        self, source: Source, result: Reconstruction, fits: Mapping[str, ImageFit]
    ) -> dict[str, dict[str, Any]]:
        acquisition = acquisition_record(source.acquisition, source.note)
        self.acquisitions[source.name] = acquisition
        data = data_image(source.acquisition)
        alone = pixel_by_pixel(source.acquisition, result)
        records = {}
        for name, image in result.images.items():
            truth = source.truth.get(name)
            if truth is not None and truth.shape != image.image.shape:
                truth = None
            record = image_record(image, truth, alone[name])
            files = {kind: f"{name}{ending}" for kind, ending in ENDINGS.items()}
            records[name] = {"acquisition": source.name, "files": files} | record
            write_tiff(self.folder / files["image"], image.image, name, image.unit)
            uncertain = f"standard uncertainty of {name}"
            write_tiff(self.folder / files["uncertainty"], image.uncertainty, uncertain, image.unit)
            if isinstance(image, DepthImage):
                for part, values in image.maps.items():
                    files[part] = f"{name}_{part}.tif"
                    write_tiff(self.folder / files[part], values, f"{words.spelled(part)} of {name}", "1")
            picture = Picture(name, image, record, acquisition, data, alone[name], truth, source.name)
            save_picture(self.folder / files["picture"], picture)
            if name in fits:
                records[name]["fit"] = self._write_fit(files, source, image, fits[name])
        return records

    def _write_fit(
        self, files: dict[str, str], source: Source, image: PhysicalImage, fit: ImageFit
    ) -> dict[str, Any]:
        if fit.histogram is not None:
            files["residuals"] = f"{fit.name}_residuals.tif"
            write_tiff(
                self.folder / files["residuals"], fit.residuals, f"quantile residuals of {fit.name}", "1"
            )
        files["fit"] = f"{fit.name}_fit.png"
        save_fit_picture(self.folder / files["fit"], fit, image, source.name)
        return fit_record(fit)


ENDINGS = {"image": ".tif", "uncertainty": "_uncertainty.tif", "picture": ".png"}


def complain_of_images(images: Mapping[str, Mapping[str, Any]]) -> None:
    """Name the images that are not converged on standard error, by their records."""
    for name, image in images.items():
        if not words.is_converged(image):
            status = image["status"]
            print(
                f"fewcount: {words.spelled(name)} is not converged: {status['meaning']};"
                f" to do: {status['remedy']}.",
                file=sys.stderr,
            )


def without_trace(record: Mapping[str, Any]) -> dict[str, Any]:
    return {name: value for name, value in record.items() if name != "trace"}
