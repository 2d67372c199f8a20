"""fewcount demo: both bundled acquisitions, start to finish."""

import json

import numpy as np
import pytest
import tifffile

from recon.bundled import NAMES, bundled
from recon.errors import InputError
from recon.files import load_truth

IMAGES = {"reflectivity": "1", "depth": "m", "electron_yield": "1"}


def test_the_demo_makes_every_image_and_beats_the_conventional_ones(run, tmp_path):
    ran = run("demo", "--out", "shown")
    assert (ran.code, ran.err) == (0, "")
    folder = tmp_path / "shown"
    endings = (".png", ".tif", "_uncertainty.tif")
    expected = {f"{name}{ending}" for name in IMAGES for ending in endings} | {"diagnostics.json"}
    expected |= {f"depth_{part}.tif" for part in ("signal_tags", "target", "wrong_surface")}
    assert {path.name for path in folder.iterdir()} == expected

    written = json.loads((folder / "diagnostics.json").read_text())
    assert set(written["acquisitions"]) == set(NAMES)
    assert all(record["note"].startswith("Invented") for record in written["acquisitions"].values())
    truth = load_truth(bundled("bench.h5")) | load_truth(bundled("coupon.h5"))
    for name, unit in IMAGES.items():
        record = written["images"][name]
        assert (record["unit"], record["status"]["name"]) == (unit, "converged")
        image = tifffile.imread(folder / f"{name}.tif")
        assert image.dtype == np.float32
        off = np.abs(image.astype(float) - truth[name])
        assert record["error"]["median_absolute"] == pytest.approx(np.median(off), rel=1e-6)
        assert record["error"]["rmse"] < record["error"]["conventional"]["rmse"]
        assert record["error"]["median_absolute"] < record["error"]["conventional"]["median_absolute"]
    for words in ("bench.h5", "coupon.h5", "time tags", "160 frames", "depth", "electron yield", "Invented"):
        assert words in ran.out


def test_a_missing_acquisition_is_named():
    with pytest.raises(InputError, match=r"no\.h5 is not among the installed files"):
        bundled("no.h5")
