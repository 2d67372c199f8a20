"""fewcount compare: files, table, JSON, exit codes and refusals."""

import json

import numpy as np
import pytest
import tifffile

import priors
import recon
from recon import simulate
from recon.files import load_truth, save

TWO = ("--prior", "total-variation", "--prior", "smoothness")
FILES = {"comparison.json", "comparison.png"} | {
    f"reflectivity_{name}{ending}.tif"
    for name in ("total-variation", "smoothness")
    for ending in ("", "_uncertainty")
}


@pytest.fixture(scope="module")
def comparison(counts_file):
    return recon.compare(recon.load(counts_file), [priors.TotalVariation(), priors.Smoothness()])


def test_the_folder_holds_what_compare_finds(run, counts_file, tmp_path, comparison):
    ran = run("compare", counts_file, *TWO)
    assert (ran.code, ran.err) == (0, "")
    folder = tmp_path / "fewcount-out" / "square-compared"
    assert {path.name for path in folder.iterdir()} == FILES
    written = json.loads((folder / "comparison.json").read_text())
    truth = load_truth(counts_file)["reflectivity"].astype(float)
    assert (written["image"], written["converged"], written["folds"]) == ("reflectivity", True, 4)
    assert list(written["priors"])[comparison.best] == written["best"]
    for (name, record), candidate in zip(written["priors"].items(), comparison.candidates, strict=True):
        image = tifffile.imread(folder / f"reflectivity_{name}.tif")
        np.testing.assert_array_equal(image, candidate.image.image)
        uncertainty = tifffile.imread(folder / f"reflectivity_{name}_uncertainty.tif")
        np.testing.assert_array_equal(uncertainty, candidate.image.uncertainty)
        assert record["difference"] == candidate.difference
        assert record["difference_standard_error"] == candidate.standard_error
        assert record["as_good"] == candidate.as_good
        assert record["degrees_of_freedom"] == candidate.freedom.number
        assert record["relative_gap"] == candidate.image.diagnostics.relative_gap
        assert record["status"]["name"] == "converged"
        assert record["weight"]["score"] == candidate.image.choice.score.tolist()
        assert record["seconds_in_all"] > 0.0
        assert record["error"]["rmse"] == pytest.approx(np.sqrt(np.mean((image - truth) ** 2)), rel=1e-6)
    for words in (written["verdict"], "total variation", "smoothness", "rmse", "degrees of freedom", "best"):
        assert words.lower() in ran.out.replace("\n", " ").lower()


def test_json_says_nothing_else(run, counts_file, comparison):
    ran = run("compare", counts_file, *TWO, "--json", "--out", "results")
    assert (ran.code, ran.err) == (0, "")
    summary = json.loads(ran.out)
    assert summary["folder"] == "results"
    spelled = comparison.verdict.replace("TotalVariation", "total variation")
    assert summary["verdict"] == spelled.replace("Smoothness", "smoothness")
    assert "trace" not in summary["priors"]["smoothness"]


def test_what_is_not_converged_is_marked(run, counts_file, tmp_path):
    ran = run("compare", counts_file, *TWO, "--max-iterations", 1, "--out", "results", "--quiet")
    assert ran.code == 1
    assert ran.out == ""
    assert ran.err.startswith("fewcount: total variation is not converged: the iteration limit")
    assert ran.err.count("\n") == 2
    assert {path.name for path in (tmp_path / "results").iterdir()} == FILES
    assert "NOT CONVERGED" in json.loads((tmp_path / "results" / "comparison.json").read_text())["verdict"]


@pytest.mark.parametrize(
    ("words", "said"),
    [
        ((), "--prior is given 0 times; give it two times or more"),
        (("--prior", "smoothness"), "--prior is given 1 times; give it two times or more"),
        ((*TWO, "--prior", "smoothness"), "--prior smoothness is given more than once"),
        ((*TWO, "--prior", "entropy"), "--prior is 'entropy'; give one of total-variation"),
        ((*TWO, "--tolerance", "2"), "tolerance is 2.0"),
        ((*TWO, "--max-iterations", "0"), "max_iterations is 0"),
        ((*TWO, "--weight", "2"), "unrecognized arguments: --weight"),
    ],
)
def test_what_cannot_be_compared_is_refused(run, counts_file, tmp_path, words, said):
    ran = run("compare", counts_file, *words, "--out", "results")
    assert (ran.code, ran.out) == (2, "")
    assert ran.err.startswith("fewcount: ")
    assert said in ran.err
    assert ran.err.count("\n") == 1
    assert list(tmp_path.iterdir()) == []


def test_too_few_detections_are_refused(run, tmp_path):
    path = tmp_path / "dark.h5"
    save(path, simulate.counts(np.full((4, 5), 0.1), 10, 0.1, seed=0))
    ran = run("compare", path, *TWO, "--out", "results")
    assert ran.code == 2
    assert "too few detections" in ran.err
    assert [path.name for path in tmp_path.iterdir()] == ["dark.h5"]


def test_progress_names_the_prior_of_each_weight_and_solve(run, counts_file, monkeypatch):
    from recon.cli.progress import SolveProgress

    seen = []
    monkeypatch.setattr(SolveProgress, "__call__", lambda self, name, state: seen.append((self.of, name)))
    monkeypatch.setattr(SolveProgress, "of_weight", lambda self, name, f: seen.append((self.of, name, f)))
    run("compare", counts_file, *TWO, "--out", "results", "--quiet")
    first, second = "total variation", "smoothness"
    turns = [one[0] for one in seen]
    assert turns == sorted(turns, key=[first, second].index)
    for turn in (first, second):
        assert (turn, "reflectivity", 1.0) in seen
        assert [one for one in seen if one[0] == turn][-1] == (turn, "reflectivity")
