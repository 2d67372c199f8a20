"""The picture of an image."""

from dataclasses import replace

import matplotlib.image
import numpy as np
import pytest
from matplotlib.figure import Figure

from recon import Status
from recon.report.data_images import data_image, pixel_by_pixel
from recon.report.figure import Picture, draw, main_panel, save_picture, side_panels
from recon.report.panels import Panel, reduced, spread, symmetric
from recon.report.record import acquisition_record, image_record


@pytest.fixture
def picture(counts, result, image, truth) -> Picture:
    alone = pixel_by_pixel(counts, result)["reflectivity"]
    record = image_record(image, truth, alone)
    return Picture(
        "reflectivity", image, record, acquisition_record(counts), data_image(counts), alone, truth,
        "square.h5",
    )  # fmt: skip


def images(picture: Picture) -> list[Panel]:
    """The small panels that show an image."""
    return [panel for panel in side_panels(picture) if panel is not None]


def texts(figure: Figure) -> str:
    """All that is written in a figure."""
    titles = [axes.get_title(loc="left") for axes in figure.axes]
    return "\n".join([text.get_text() for text in figure.texts] + titles)


def test_the_image_and_the_truth_share_their_colours(picture, truth):
    panels = {panel.title: panel for panel in [main_panel(picture), *images(picture)]}
    same = [panels["Reconstruction"], panels["Truth"], panels["Conventional, pixel by pixel"]]
    assert len({(panel.limits, panel.colours) for panel in same}) == 1
    np.testing.assert_array_equal(panels["Reconstruction"].values, picture.image.image)
    error = panels["Reconstruction minus truth"]
    np.testing.assert_array_equal(error.values, picture.image.image - truth)
    assert error.limits[0] == -error.limits[1]


def test_filled_pixels_have_no_uncertainty_to_show(picture):
    uncertainty = next(panel for panel in images(picture) if panel.title == "Uncertainty, calibrated")
    np.testing.assert_array_equal(np.isnan(uncertainty.values), picture.image.filled)
    assert picture.image.filled.any()


def test_a_picture_says_where_the_uncertainty_comes_from(picture, truth):
    assert "uncertainty calibrated on held-out data; truth within" in texts(draw(picture)).replace("\n", " ")
    image = replace(picture.image, held_out=())
    alone = replace(picture, image=image, record=image_record(image, truth))
    written = texts(draw(alone))
    assert "Uncertainty, not calibrated" in written
    assert "not calibrated: nothing was held out" in written.replace("\n", " ")


def test_colour_bars_name_quantity_and_unit(picture):
    depth = replace(picture, name="depth", image=replace(picture.image, unit="m"))
    assert main_panel(picture).label == "reflectivity (no unit)"
    assert main_panel(depth).label == "depth (m)"
    assert {"standard uncertainty (m)", "error (m)"} <= {panel.label for panel in images(depth)}


def test_a_converged_picture_says_so(picture):
    written = texts(draw(picture))
    assert "converged, relative gap" in written
    assert "NOT CONVERGED" not in written
    for words in ("Reflectivity", "square.h5", "total variation, weight", "against the truth", "Truth"):
        assert words in written


@pytest.mark.parametrize("status", [status for status in Status if status is not Status.CONVERGED])
@pytest.mark.parametrize("known", [True, False])
def test_every_other_picture_is_marked(picture, status, known):
    image = replace(picture.image, status=status)
    truth = picture.truth if known else None
    figure = draw(replace(picture, image=image, record=image_record(image, truth), truth=truth))
    marks = [text for text in figure.texts if "NOT CONVERGED" in text.get_text()]
    assert len(marks) == 1
    assert marks[0].get_bbox_patch() is not None
    assert status.meaning in texts(figure).replace("\n", " ")


def test_nothing_is_said_of_a_truth_that_is_not_known(picture):
    without = replace(picture, truth=None, record=image_record(picture.image))
    written = texts(draw(without))
    assert "ruth" not in written
    assert len(images(without)) == 3


@pytest.mark.parametrize("shape", [(1, 1), (1, 40), (40, 1), (30, 12)])
def test_any_shape_can_be_shown(picture, tmp_path, shape):
    values = np.linspace(0.0, 1.0, shape[0] * shape[1], dtype=np.float32).reshape(shape)
    image = replace(picture.image, image=values, uncertainty=values, filled=np.zeros(shape, bool))
    odd = replace(
        picture, image=image, data=replace(picture.data, values=values), conventional=values, truth=values
    )
    save_picture(tmp_path / "odd.png", odd)
    pixels = matplotlib.image.imread(tmp_path / "odd.png")
    assert 300 < min(pixels.shape[:2]) <= max(pixels.shape[:2]) < 4000
    assert [path.name for path in tmp_path.iterdir()] == ["odd.png"]


@pytest.mark.parametrize("block", [1, 2, 3, 7])
def test_large_images_are_reduced_to_the_means_of_their_blocks(block):
    image = np.random.default_rng(block).normal(size=(7, 5))
    image[:2, :2] = np.nan
    image[3, 4] = np.nan
    small = reduced(image, block)
    assert small.shape == (-(-7 // block), -(-5 // block))
    for i, j in np.ndindex(small.shape):
        part = image[i * block : (i + 1) * block, j * block : (j + 1) * block]
        part = part[np.isfinite(part)]
        assert small[i, j] == pytest.approx(part.mean()) if part.size else np.isnan(small[i, j])


def test_limits_leave_out_the_ends():
    values = np.arange(1001.0)
    assert spread(values, share=0.01) == pytest.approx((10.0, 990.0))
    values[0] = np.nan
    assert np.isfinite(spread(values)).all()
    low, high = symmetric(np.array([-3.0, 1.0]))
    assert low == -high < 0.0


@pytest.mark.parametrize("values", [np.zeros(4), np.full(4, 7.0), np.full(4, -7.0), np.full(4, np.nan)])
def test_limits_are_never_equal(values):
    low, high = spread(values)
    assert low < high
    finite = values[np.isfinite(values)]
    assert np.all((low < finite) & (finite < high))


def test_names_are_shown_as_they_are(picture, tmp_path):
    odd = replace(picture, source="a$b^$\u65e5.h5")
    assert "a$b^$\u65e5.h5" in texts(draw(odd))
    save_picture(tmp_path / "odd.png", odd)
    assert (tmp_path / "odd.png").stat().st_size > 10_000
