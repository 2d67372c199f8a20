"""fewcount reconstruct: files, table, JSON and exit codes."""

import json

import numpy as np
import pytest
import tifffile

import priors
import recon
from recon.files import load_truth, save

FILES = {"diagnostics.json", "reflectivity.png", "reflectivity.tif", "reflectivity_uncertainty.tif"}


def prior_record(name: str, weight: float) -> dict:
    return {"name": name, "weight": weight, "edge_weights": False}


def test_counts_become_images_a_picture_and_diagnostics(run, counts_file, tmp_path):
    ran = run("reconstruct", counts_file, "--out", "results/deep")
    assert (ran.code, ran.err) == (0, "")
    folder = tmp_path / "results" / "deep"
    assert {path.name for path in folder.iterdir()} == FILES
    expected = recon.reconstruct(recon.load(counts_file)).reflectivity
    np.testing.assert_array_equal(tifffile.imread(folder / "reflectivity.tif"), expected.image)
    np.testing.assert_array_equal(
        tifffile.imread(folder / "reflectivity_uncertainty.tif"), expected.uncertainty
    )
    assert (folder / "reflectivity.png").read_bytes().startswith(b"\x89PNG\r\n\x1a\n")


def test_diagnostics_hold_the_certificate_and_the_error(run, counts_file, tmp_path):
    run("reconstruct", counts_file, "--quiet", "--out", "results")
    written = json.loads((tmp_path / "results" / "diagnostics.json").read_text())
    result = recon.reconstruct(recon.load(counts_file)).reflectivity
    image = written["images"]["reflectivity"]
    assert image["objective"] == result.diagnostics.objective
    assert image["dual_value"] == result.diagnostics.dual_value
    assert image["relative_gap"] == result.diagnostics.relative_gap <= image["tolerance"] == 5e-4
    assert image["trace"]["relative_gap"] == list(result.diagnostics.trace.relative_gap)
    assert image["trace"]["iteration"][-1] == image["iterations"]
    assert image["priors"] == [prior_record("total-variation", result.priors[0].weight)]
    truth = load_truth(counts_file)["reflectivity"]
    rmse = np.sqrt(np.mean((result.image.astype(float) - truth) ** 2))
    assert image["error"]["rmse"] == pytest.approx(rmse, rel=1e-6)
    assert image["error"]["rmse"] < image["error"]["conventional"]["rmse"]
    acquisition = written["acquisitions"]["square.h5"]
    assert acquisition["kind"] == "counts"
    assert acquisition["detections"] == recon.load(counts_file).detections.sum()
    assert acquisition["note"] == "Made up."
    assert written["converged"] is True


def test_the_table_says_what_came_out(run, counts_file):
    ran = run("reconstruct", counts_file, "--out", "results")
    for words in (
        "square.h5",
        "counts, 20 x 24 pixels",
        "reflectivity",
        "total variation, weight",
        "converged",
        "against the truth",
        "truth within 68 / 95 %",
        "calibrated on held-out data",
        "no image within the bounds",
        "results",
    ):
        assert words in ran.out
    assert "NOT CONVERGED" not in ran.out


def test_without_a_truth_nothing_is_said_of_it(run, tmp_path):
    save(tmp_path / "dark.h5", recon.Counts(np.eye(4, 5, dtype=int), 10))
    ran = run("reconstruct", tmp_path / "dark.h5", "--out", "results")
    assert ran.code == 0
    assert "truth" not in ran.out
    assert "not calibrated: nothing could be held out" in ran.out.replace("\n", " ")
    assert "calibrated on" not in ran.out


def test_quiet_says_nothing(run, counts_file, tmp_path):
    assert run("--quiet", "reconstruct", counts_file) == (0, "", "")
    assert {path.name for path in (tmp_path / "fewcount-out" / "square").iterdir()} == FILES


def test_json_says_nothing_else(run, counts_file):
    ran = run("reconstruct", counts_file, "--json", "--out", "results")
    assert (ran.code, ran.err) == (0, "")
    summary = json.loads(ran.out)
    assert summary["folder"] == "results"
    assert summary["images"]["reflectivity"]["status"]["name"] == "converged"
    assert "trace" not in summary["images"]["reflectivity"]


@pytest.mark.parametrize("where", ["before", "after"])
def test_an_image_that_is_not_converged_is_written_and_marked(run, counts_file, tmp_path, where):
    words = ["reconstruct", counts_file, "--max-iterations", 1, "--out", "results"]
    ran = run(*(["--json", *words] if where == "before" else words))
    assert ran.code == 1
    assert ran.err.startswith("fewcount: reflectivity is not converged: the iteration limit")
    assert ran.err.count("\n") == 1
    if where == "before":
        assert json.loads(ran.out)["converged"] is False
    else:
        assert "NOT CONVERGED" in ran.out
    assert {path.name for path in (tmp_path / "results").iterdir()} == FILES
    written = json.loads((tmp_path / "results" / "diagnostics.json").read_text())
    assert written["images"]["reflectivity"]["status"]["name"] == "iteration_limit"


@pytest.mark.parametrize(
    ("name", "cls"),
    [
        ("total-variation", "TotalVariation"),
        ("generalized-variation", "GeneralizedVariation"),
        ("wavelet-sparsity", "WaveletSparsity"),
        ("smoothness", "Smoothness"),
    ],
)
def test_the_prior_and_its_weight_are_those_asked_for(run, counts_file, tmp_path, name, cls):
    ran = run("reconstruct", counts_file, "--prior", name, "--weight", 1.5, "--tolerance", 1e-3, "--json")
    assert ran.code == 0
    assert json.loads(ran.out)["images"]["reflectivity"]["priors"] == [prior_record(name, 1.5)]
    prior = getattr(priors, cls)(1.5)
    expected = recon.reconstruct(recon.load(counts_file), prior, tolerance=1e-3).reflectivity
    written = tifffile.imread(tmp_path / "fewcount-out" / "square" / "reflectivity.tif")
    np.testing.assert_array_equal(written, expected.image)


def test_a_weight_alone_is_that_of_total_variation(run, counts_file):
    ran = run("reconstruct", counts_file, "--weight", 2, "--json")
    assert json.loads(ran.out)["images"]["reflectivity"]["priors"] == [prior_record("total-variation", 2.0)]


def test_frames_become_the_yield(run, frames_file, tmp_path):
    ran = run("reconstruct", frames_file, "--out", "results", "--json")
    assert ran.code == 0
    summary = json.loads(ran.out)
    assert list(summary["images"]) == ["electron_yield"]
    assert summary["acquisitions"]["coupon.h5"]["frames"] == 80
    expected = recon.reconstruct(recon.load(frames_file)).electron_yield
    written = tifffile.imread(tmp_path / "results" / "electron_yield.tif")
    np.testing.assert_array_equal(written, expected.image)


def test_files_of_an_earlier_run_are_replaced(run, counts_file, tmp_path):
    run("reconstruct", counts_file, "--weight", 0.5, "--out", "results", "--quiet")
    before = tifffile.imread(tmp_path / "results" / "reflectivity.tif")
    run("reconstruct", counts_file, "--weight", 5, "--out", "results", "--quiet")
    after = tifffile.imread(tmp_path / "results" / "reflectivity.tif")
    assert {path.name for path in (tmp_path / "results").iterdir()} == FILES
    variation = priors.TotalVariation(1.0).value
    assert variation(after) < variation(before)


def test_file_names_of_any_kind_can_be_shown(run, counts_file, tmp_path, monkeypatch):
    monkeypatch.setattr("recon.cli.job.save_picture", lambda *_: None)
    odd = tmp_path / "a$b^$\u65e5\udcff.h5"
    odd.write_bytes(counts_file.read_bytes())
    ran = run("reconstruct", odd, "--out", "out\udcff")
    assert (ran.code, ran.err) == (0, "")
    assert "a$b^$\u65e5\\udcff.h5" in ran.out
    assert "out\\udcff" in ran.out
    assert json.loads((tmp_path / "out\udcff" / "diagnostics.json").read_text())["acquisitions"]
