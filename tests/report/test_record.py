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
