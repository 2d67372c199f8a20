"""fewcount reconstruct --fit: what is printed and written about the fit of the model."""

import json

import numpy as np
import pytest
import tifffile

import recon
from recon import simulate
from recon.files import save

SHAPE = (12, 16)


def test_the_fit_is_printed_and_written(run, counts_file, tmp_path):
    ran = run("reconstruct", counts_file, "--fit", "--out", "results")
    assert (ran.code, ran.err) == (0, "")
    folder = tmp_path / "results"
    fit = recon.goodness(recon.reconstruct(recon.load(counts_file))).images["reflectivity"]
    record = json.loads((folder / "diagnostics.json").read_text())["images"]["reflectivity"]
    assert record["files"]["residuals"] == "reflectivity_residuals.tif"
    residuals = tifffile.imread(folder / "reflectivity_residuals.tif")
    np.testing.assert_array_equal(residuals, fit.residuals.astype(np.float32))
    assert (folder / "reflectivity_fit.png").read_bytes().startswith(b"\x89PNG\r\n\x1a\n")
    written = record["fit"]
    assert written["verdict"] == fit.verdict
    assert [one["name"] for one in written["statistics"]] == [one.name for one in fit.statistics]
    for one, statistic in zip(written["statistics"], fit.statistics, strict=True):
        assert one["observed"] == statistic.observed
        assert one["expected"] == statistic.expected
        assert one["standard_deviation"] == statistic.standard_deviation
        assert one["p"] == statistic.p_value
        assert statistic.name.split()[0] in ran.out
    assert written["unidentified"] == list(fit.unidentified)
    assert written["histogram"]["counts"] == fit.histogram.counts.tolist()
    for words in (fit.verdict, *fit.unidentified, "observed", "expected", "standard deviation"):
        assert words in ran.out


def test_a_misfit_is_named_with_its_remedy(run, tmp_path):
    """Three in ten trials detect, and no trial detects twice: the variance is 0.7 of the mean."""
    image = np.full((48, 48), 0.36)
    image[10:30, 12:40] = 0.7
    drawn = np.random.default_rng(0).binomial(3, 1.0 - np.exp(-image))
    save(tmp_path / "piled.h5", recon.Counts(drawn, 1, several_per_trial=True))
    ran = run("reconstruct", tmp_path / "piled.h5", "--fit", "--out", "results")
    assert ran.code == 0
    written = json.loads((tmp_path / "results" / "diagnostics.json").read_text())
    finding = written["images"]["reflectivity"]["fit"]["findings"][0]
    assert finding["cause"] == "pile-up"
    for words in ("does not fit: pile-up", finding["sentence"], finding["remedy"]):
        assert words in ran.out


def test_depth_has_a_picture_but_no_residuals(run, tmp_path):
    depth = np.full(SHAPE, 2.0)
    depth[3:9, 4:12] = 1.5
    pulse = recon.GaussianPulse(3e-10)
    tags = simulate.time_tags(depth, np.ones(SHAPE), 100, 1e-7, pulse, 0.02, 0.005, seed=1)
    save(tmp_path / "tags.h5", tags, truth={"depth": depth})
    words = ("--prior", "total-variation", "--fit", "--out", "results", "--json")
    ran = run("reconstruct", tmp_path / "tags.h5", *words)
    assert ran.code == 0
    images = json.loads(ran.out)["images"]
    assert "residuals" not in images["depth"]["files"]
    names = {path.name for path in (tmp_path / "results").iterdir()}
    assert {"depth_fit.png", "reflectivity_fit.png", "reflectivity_residuals.tif"} <= names
    assert "depth_residuals.tif" not in names
    assert {one["name"] for one in images["depth"]["fit"]["statistics"]} >= {
        "spread of the tags about the surface"
    }
    assert "convex majorant at this image" in images["depth"]["certificate"]
    assert "convex majorant" not in images["reflectivity"]["certificate"]


@pytest.mark.parametrize("words", [(), ("--quiet",)])
def test_nothing_is_asked_unless_it_is_wanted(run, counts_file, monkeypatch, words):
    monkeypatch.setattr("recon.cli.job.goodness", lambda *_, **__: pytest.fail("asked"))
    assert run("reconstruct", counts_file, "--out", "results", *words).code == 0
