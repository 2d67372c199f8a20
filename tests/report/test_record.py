"""Records: what the table and diagnostics.json say."""

from dataclasses import replace

import numpy as np
import pytest

import priors
import recon
from recon.report import words
from recon.report.record import acquisition_record, image_record, name_of


def test_an_acquisition_is_counted_without_masked_pixels(counts):
    record = acquisition_record(counts, "a note")
    used = counts.detections[1:]
    assert record["kind"] == "counts"
    assert record["shape"] == [16, 20]
    assert record["detections"] == used.sum()
    assert record["detections_per_pixel"] == pytest.approx(used.sum() / used.size)
    assert record["share_of_pixels_without_detection"] == np.mean(used == 0)
    assert record["note"] == "a note"


def test_time_tags_and_frames_are_counted():
    pulse = recon.GaussianPulse(1e-10)
    tags = recon.TimeTags(
        [0, 0, 1], [1, 1, 0], [1e-9, 2e-9, 3e-9], shape=(2, 2), trials=10, period=1e-8, pulse=pulse
    )
    record = acquisition_record(tags)
    assert (record["kind"], record["detections"], record["detections_per_pixel"]) == ("time tags", 3, 0.75)
    assert record["share_of_pixels_without_detection"] == 0.5
    frames = recon.Frames(np.array([[[200, 0]], [[100, 0]]], np.uint8), 1.0)
    record = acquisition_record(frames)
    assert (record["kind"], record["detections"], record["frames"]) == ("frames", 300, 2)


def test_an_image_is_described(image):
    record = image_record(image)
    assert record["range"] == [image.image.min(), image.image.max()]
    assert record["median_uncertainty"] == pytest.approx(np.median(image.uncertainty[1:]))
    assert record["filled_pixels"] == 20
    assert record["status"]["name"] == "converged"
    assert record["error"] is None
    assert len(set(map(len, record["trace"].values()))) == 1


def test_priors_say_whether_they_have_edge_weights(image):
    plain, weighted = priors.TotalVariation(2.0), priors.TotalVariation(3.0, edge_weights=np.ones((16, 20)))
    problem = recon.Problem(image.problem.likelihood, [plain, weighted])
    record = image_record(replace(image, problem=problem))
    said = words.priors_in_words(record)
    assert said == "total variation, weight 2 + total variation with edge weights, weight 3"


def test_errors_leave_out_pixels_without_a_value(image):
    truth = image.image.astype(float) - 0.3
    truth[2, 2] = np.nan
    conventional = image.image + np.float32(0.1)
    conventional[0] = np.nan
    error = image_record(image, truth, conventional)["error"]
    assert error["rmse"] == pytest.approx(0.3)
    assert error["median_absolute"] == pytest.approx(0.3)
    assert error["conventional"]["rmse"] == pytest.approx(0.4, rel=1e-5)


def test_the_root_mean_square_is_not_the_median(image):
    truth = image.image.astype(float)
    truth.flat[:80] -= 2.0
    error = image_record(image, truth)["error"]
    assert error["rmse"] == pytest.approx(2.0 * np.sqrt(80 / truth.size))
    assert error["median_absolute"] == 0.0
    assert "conventional" not in error


def test_coverage_counts_the_pixels_whose_truth_is_in_the_interval(image):
    truth = image.image.astype(float)
    truth[5] += 1.5 * image.uncertainty[5]  # beyond the 68 % interval, within the 95 % one
    truth[6] += 3.0 * image.uncertainty[6]
    truth[7] = np.nan
    coverage = image_record(image, truth)["coverage"]
    assert coverage["pixels"] == truth.size - 20
    assert coverage["68"] == pytest.approx(1.0 - 40 / 300, abs=0.01)
    assert coverage["95"] == pytest.approx(1.0 - 20 / 300, abs=0.01)
    assert image_record(image)["coverage"] is None
    assert image_record(image, np.full(truth.shape, np.nan))["coverage"] is None


def test_coverage_of_depth_is_of_targets_on_the_right_surface():
    truth = np.full((12, 16), 2.0)
    pulse = recon.GaussianPulse(3e-10)
    tags = recon.simulate.time_tags(truth, np.ones((12, 16)), 100, 1e-7, pulse, 0.03, 0.002, seed=3)
    depth = recon.reconstruct(tags).depth
    wrong, absent = np.zeros((12, 16), np.float32), np.ones((12, 16), np.float32)
    wrong[0], absent[1] = 0.9, 0.1
    depth = replace(depth, wrong_surface=wrong, target=absent, uncertainty=np.full((12, 16), 9.0, np.float32))
    off = truth.copy()
    off[:2] = 99.0
    assert image_record(depth, off)["coverage"] == {"68": 1.0, "95": 1.0, "pixels": 160}


def test_records_say_what_was_calibrated(image):
    assert image_record(image)["calibrated"] is True
    assert image_record(replace(image, held_out=()))["calibrated"] is False


@pytest.mark.parametrize(
    ("objective", "dual", "relative", "convex", "said"),
    [
        (
            1000.0,
            999.601,
            3.99e-4,
            True,
            "no image within the bounds has an objective more than 0.04 % below",
        ),
        (1000.0, 999.599, 4.01e-4, True, "more than 0.041 % below"),
        (1000.0, 1000.0, 0.0, True, "no image within the bounds has an objective below this one's"),
        (1e-9, 5e-10, 1e-3, True, "more than 5e-10 below"),
        (1000.0, -500.0, 1.5, True, "no use yet"),
        (np.inf, 1.0, np.inf, True, "no use yet"),
        (
            1000.0,
            990.0,
            1e-2,
            False,
            "in the convex majorant at this image, no image within the bounds has an",
        ),
    ],
)
def test_the_certificate_never_says_less_than_the_gap(objective, dual, relative, convex, said):
    record = {
        "objective": objective, "dual_value": dual, "relative_gap": relative, "convex": convex,
        "iterations": 40, "trace": {"iteration": [20, 40]},
    }  # fmt: skip
    text = words.certificate_in_words(record)
    assert said in text
    if "no use" not in said:
        assert "(measured 2 times in 40 iterations)" in text
        assert ("not convex" in text) is not convex


def test_the_certificate_is_in_the_record(image):
    record = image_record(image)
    assert record["convex"] is image.problem.likelihood.convex
    assert record["certificate"] == words.certificate_in_words(record)


@pytest.mark.parametrize(
    ("prior", "name"),
    [
        (priors.TotalVariation(1.0), "total-variation"),
        (priors.GeneralizedVariation(1.0), "generalized-variation"),
        (priors.Smoothness(1.0), "smoothness"),
    ],
)
def test_priors_are_named_as_on_the_command_line(prior, name):
    assert name_of(prior) == name


@pytest.mark.parametrize("status", list(recon.Status))
def test_only_converged_reads_as_converged(image, status):
    record = image_record(replace(image, status=status))
    text = words.status_in_words(record)
    assert status.meaning in text
    if status is recon.Status.CONVERGED:
        assert text.startswith("converged: ")
    else:
        assert text.startswith("NOT CONVERGED: ")
        assert status.remedy in text


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [(0.012345, "m", "0.0123 m"), (2.0, "1", "2"), (None, "m", "-"), (123456.0, "m", "1.23e+05 m")],
)
def test_quantities_have_three_digits_and_their_unit(value, unit, text):
    assert words.quantity(value, unit) == text
