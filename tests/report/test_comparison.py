"""Priors side by side: the record and the picture."""

from dataclasses import replace

import matplotlib.image
import numpy as np
import pytest

import priors
import recon
from recon import Status
from recon.report.comparison import (
    ComparisonPicture,
    comparison_record,
    draw_comparison,
    lines_of,
    panels_of,
    save_comparison,
)
from recon.report.record import acquisition_record


@pytest.fixture(scope="module")
def comparison(counts):
    return recon.compare(counts, [priors.TotalVariation(), priors.Smoothness()])


@pytest.fixture
def picture(comparison, counts, truth):
    record = comparison_record(comparison, truth)
    return ComparisonPicture(comparison, record, acquisition_record(counts), truth, "square.h5")


def written(figure):
    titles = [axes.get_title(loc="left") for axes in figure.axes]
    return "\n".join([text.get_text() for text in figure.texts] + titles)


def marks(figure):
    return [text.get_text() for axes in figure.axes for text in axes.texts]


def test_all_panels_are_on_one_scale_and_the_truth_is_last(picture, comparison, truth):
    panels = panels_of(picture)
    assert [panel.title for panel in panels] == ["Total variation", "Smoothness", "Truth"]
    assert len({(panel.limits, panel.colours, panel.label) for panel in panels}) == 1
    for panel, candidate in zip(panels, comparison.candidates, strict=False):
        np.testing.assert_array_equal(panel.values, candidate.image.image)
    np.testing.assert_array_equal(panels[-1].values, truth)


def test_verdict_and_numbers_are_in_the_picture(picture):
    figure = draw_comparison(picture)
    said = written(figure)
    assert picture.record["verdict"][1:] in said.replace("\n", " ")
    for name, record in picture.record["priors"].items():
        for label, text in lines_of(record, name == picture.record["best"]).items():
            assert label in said
            assert text in said
    assert marks(figure) == []


def test_a_panel_that_is_not_converged_is_marked(picture, comparison):
    late, good = comparison.candidates
    late = replace(late, image=replace(late.image, status=Status.ITERATION_LIMIT))
    odd = replace(comparison, candidates=(late, good))
    figure = draw_comparison(replace(picture, comparison=odd, record=comparison_record(odd)))
    assert marks(figure) == ["NOT CONVERGED"]
    mark = next(text for axes in figure.axes for text in axes.texts)
    assert mark.axes.get_title(loc="left") == "Total variation"
    assert mark.get_bbox_patch() is not None


def test_nothing_is_said_of_a_truth_that_is_not_known(picture, comparison):
    blind = replace(picture, record=comparison_record(comparison), truth=None)
    said = written(draw_comparison(blind))
    assert "ruth" not in said
    assert "rmse" not in said


@pytest.mark.parametrize(
    ("difference", "as_good", "said"), [(3.0, True, "+3 \u00b1 2"), (9.0, False, "worse")]
)
def test_scores_say_whether_they_are_worse(comparison, difference, as_good, said):
    other = replace(comparison.candidates[1], difference=difference, standard_error=2.0, as_good=as_good)
    record = comparison_record(replace(comparison, candidates=(comparison.candidates[0], other)))
    assert said in lines_of(record["priors"]["smoothness"], best=False)["held-out score"]
    assert lines_of(record["priors"]["smoothness"], best=True)["held-out score"] == "best"


@pytest.mark.parametrize("shape", [(1, 40), (40, 1), (30, 12)])
def test_any_shape_can_be_shown(picture, comparison, tmp_path, shape):
    values = np.linspace(0.0, 1.0, shape[0] * shape[1], dtype=np.float32).reshape(shape)
    odd = tuple(replace(c, image=replace(c.image, image=values)) for c in comparison.candidates)
    save_comparison(
        tmp_path / "odd.png", replace(picture, comparison=replace(comparison, candidates=odd), truth=values)
    )
    pixels = matplotlib.image.imread(tmp_path / "odd.png")
    assert 300 < min(pixels.shape[:2]) <= max(pixels.shape[:2]) < 4000
    assert [path.name for path in tmp_path.iterdir()] == ["odd.png"]
