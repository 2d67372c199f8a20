"""The picture of a fit, and its record."""

from dataclasses import replace

import numpy as np
import pytest

from recon.fit import Finding, Statistic, goodness
from recon.report.fit_figure import draw_fit, save_fit_picture
from recon.report.fit_record import fit_in_words, fit_record, statistic_in_words


@pytest.fixture(scope="module")
def fit(result):
    return goodness(result).images["reflectivity"]


def written(figure):
    return "\n".join(text.get_text() for part in (figure, *figure.axes) for text in part.texts)


def test_map_histogram_statistics_and_verdict_are_shown(fit, image):
    figure = draw_fit(fit, image, "square.h5")
    titles = {axes.get_title(loc="left") for axes in figure.axes}
    assert {"Quantile residuals", "Their histogram", "Statistics"} <= titles
    said = written(figure)
    assert fit.verdict in said
    for statistic in fit.statistics:
        assert statistic.name in said
    shown = next(axes for axes in figure.axes if axes.images).images[0].get_array()
    np.testing.assert_allclose(shown.filled(np.nan), fit.residuals, rtol=1e-6)


def test_a_misfit_is_in_the_alarm_style(fit, image, tmp_path):
    denied = Statistic("lone bright pixels", 9.0, 1.0, 1.0, 1e-9, 0.01)
    bad = replace(
        fit, findings=(Finding("hot pixels", "too bright", "mask them"),), statistics=(denied,),
        lone=np.eye(*fit.lone.shape, dtype=bool),
    )  # fmt: skip
    figure = draw_fit(bad, image, "square.h5")
    alarms = [text for text in figure.texts if text.get_bbox_patch() is not None]
    assert [text.get_text() for text in alarms] == ["does not fit: hot pixels"]
    for words in ("too bright", "mask them", "< 0.0001"):
        assert words in written(figure)
    save_fit_picture(tmp_path / "fit.png", bad, image, "a$b^$.h5")
    assert (tmp_path / "fit.png").stat().st_size > 10_000


def test_text_stays_within_the_figure(fit, image):
    many = replace(fit, statistics=fit.statistics * 3)
    figure = draw_fit(many, image, "square.h5")
    figure.canvas.draw()
    whole = figure.bbox
    for part in (figure, *figure.axes):
        for text in part.texts:
            box = text.get_window_extent()
            assert whole.x0 <= box.x0 <= box.x1 <= whole.x1, text.get_text()
            assert whole.y0 <= box.y0 <= box.y1 <= whole.y1, text.get_text()


def test_too_few_data_are_said_to_be_so(fit):
    none = replace(fit, enough=False, statistics=())
    assert "nothing can be said" in fit_in_words(fit_record(none))


@pytest.mark.parametrize(
    ("values", "said"),
    [
        ((63230.4, 0.0123456, 27.04, 1e-9), ("63230", "0.01235", "27", "< 0.0001")),
        ((-0.5, 1e9, 251.0, 0.047), ("-0.5", "1e+09", "251", "0.047")),
    ],
)
def test_statistics_in_words(values, said):
    record = fit_record_of(Statistic("a", *values))
    assert statistic_in_words(record) == ("a", *said)


def fit_record_of(statistic):
    from recon.fit import ImageFit

    nothing = np.zeros((2, 2))
    fit = ImageFit("reflectivity", nothing, None, nothing > 0, (statistic,), (), (), True)
    return fit_record(fit)["statistics"][0]
