"""Bad input to a simulation: one sentence that names the argument."""

import numpy as np
import pytest

from recon.acquisition import DeadTime, GaussianPulse
from recon.errors import InputError
from recon.simulate import counts, frames, time_tags

IMAGE = np.full((3, 4), 0.5)
WITH_NAN = IMAGE.copy()
WITH_NAN[1, 2] = np.nan
NEGATIVE = IMAGE.copy()
NEGATIVE[2, 0] = -0.25

COUNTS = {"image": IMAGE, "trials": 5, "seed": 0}
TAGS = {
    "depth": IMAGE,
    "reflectivity": IMAGE,
    "trials": 5,
    "period": 1e-7,
    "pulse": GaussianPulse(1e-9),
    "seed": 0,
}
FRAMES = {"eta": IMAGE, "dose": 0.5, "frames": 3, "seed": 0}

CASES = [
    (counts, COUNTS, {"image": WITH_NAN}, r"image at \(1, 2\) is nan"),
    (counts, COUNTS, {"image": NEGATIVE}, r"image at \(2, 0\) is -0\.25"),
    (counts, COUNTS, {"image": np.ones(4)}, r"image has shape \(4,\)"),
    (counts, COUNTS, {"image": np.ones((0, 4))}, "image is empty"),
    (counts, COUNTS, {"image": "scene"}, "image"),
    (counts, COUNTS, {"image": 1j * IMAGE}, "image"),
    (counts, COUNTS, {"trials": 2.5}, "trials is 2.5"),
    (counts, COUNTS, {"trials": -1}, "trials is -1"),
    (counts, COUNTS, {"trials": 0}, "trials is 0"),
    (counts, COUNTS, {"trials": None}, "trials is None"),
    (counts, COUNTS, {"trials": np.ones((4, 3))}, r"trials has shape \(4, 3\)"),
    (counts, COUNTS, {"gain": -1.0}, "gain is -1"),
    (counts, COUNTS, {"gain": np.inf}, "gain is inf"),
    (counts, COUNTS, {"background": NEGATIVE}, r"background at \(2, 0\)"),
    (counts, COUNTS, {"stop_after": 0}, "stop_after is 0"),
    (counts, COUNTS, {"stop_after": 1.5}, "stop_after is 1.5"),
    (counts, COUNTS, {"stop_after": 2, "several_per_trial": True}, "stop_after is 2"),
    (counts, COUNTS, {"several_per_trial": "yes"}, "several_per_trial is str"),
    (counts, COUNTS, {"several_per_trial": True, "trials": None, "stop_after": 1}, "stop_after is 1"),
    (counts, COUNTS, {"image": 0 * IMAGE, "trials": None, "stop_after": 1}, r"\(0, 0\) is 0 photons"),
    (counts, COUNTS, {"trials": 10**10}, r"image, gain, background and trials call for 6e\+10 detections"),
    (counts, COUNTS, {"trials": 1e300, "several_per_trial": True}, "photons in a pixel"),
    (counts, COUNTS, {"trials": 1e300, "gain": 1e300, "several_per_trial": True}, "photons in a pixel"),
    (counts, COUNTS, {"seed": -1}, "seed is -1"),
    (counts, COUNTS, {"seed": "lucky"}, "seed is 'lucky'"),
    (counts, COUNTS, {"seed": None}, "seed is None"),
    (counts, COUNTS, {"seed": True}, "seed is True"),
    (time_tags, TAGS, {"depth": WITH_NAN}, r"depth at \(1, 2\) is nan"),
    (time_tags, TAGS, {"depth": 1e300 * IMAGE}, "depth at"),
    (time_tags, TAGS, {"reflectivity": NEGATIVE}, r"reflectivity at \(2, 0\)"),
    (time_tags, TAGS, {"reflectivity": IMAGE.T}, r"reflectivity has shape \(4, 3\)"),
    (time_tags, TAGS, {"trials": 1e12}, r"reflectivity, .* call for 6e\+12 photons"),
    (time_tags, TAGS, {"trials": 1e300, "gain": 1e300}, "call for inf photons"),
    (time_tags, TAGS, {"trials": 0}, "trials is 0"),
    (time_tags, TAGS, {"period": 0.0}, "period is 0"),
    (time_tags, TAGS, {"pulse": 1e-9}, "pulse is a float"),
    (time_tags, TAGS, {"background": -0.1}, "background is -0.1"),
    (time_tags, TAGS, {"offset": WITH_NAN}, r"offset at \(1, 2\)"),
    (time_tags, TAGS, {"time_zero": np.nan}, "time_zero is nan"),
    (time_tags, TAGS, {"refractive_index": 0.0}, "refractive_index is 0"),
    (time_tags, TAGS, {"interval": 0.3e-7}, "interval is 3e-08 s; give one that divides"),
    (time_tags, TAGS, {"interval": 2e-7}, "interval is 2e-07 s; give one that divides"),
    (time_tags, TAGS, {"dither": 1e-9}, "dither is 1e-09 and interval None"),
    (time_tags, TAGS, {"dither": -1e-9, "interval": 1e-9}, "dither is -1e-09"),
    (time_tags, TAGS, {"dither": "some", "interval": 1e-9}, "dither"),
    (time_tags, TAGS, {"gate": (2e-8, 1e-8)}, r"gate is \(2e-08, 1e-08\)"),
    (time_tags, TAGS, {"gate": (1.5e-9, 1e-8), "interval": 1e-9}, r"gate is \(1.5e-09, 1e-08\) s, parts"),
    (time_tags, TAGS, {"dead_time": 1e-8}, "dead_time is float"),
    (time_tags, TAGS, {"dead_time": DeadTime(1e-8), "trials": 2.5}, "trials is 2.5; give whole periods"),
    (time_tags, TAGS, {"dead_time": DeadTime(1e-8), "trials": 2.5 + 0 * IMAGE}, r"trials at \(0, 0\) is 2.5"),
    (time_tags, TAGS, {"jitter": -1e-9}, "jitter is -1e-09"),
    (time_tags, TAGS, {"jitter": np.nan}, "jitter is nan"),
    (time_tags, TAGS, {"hot": NEGATIVE}, r"hot at \(2, 0\) is -0\.25"),
    (time_tags, TAGS, {"hot": IMAGE.T}, r"hot has shape \(4, 3\)"),
    (time_tags, TAGS, {"hot": 1e12}, r"call for 6e\+13 photons"),
    (time_tags, TAGS, {"dead": IMAGE}, r"dead has shape \(3, 4\) and type float64"),
    (time_tags, TAGS, {"dead": IMAGE.T > 0}, r"dead has shape \(4, 3\) and type bool"),
    (time_tags, TAGS, {"seed": 1.5}, "seed is 1.5"),
    (frames, FRAMES, {"eta": WITH_NAN}, r"eta at \(1, 2\) is nan"),
    (frames, FRAMES, {"eta": NEGATIVE}, r"eta at \(2, 0\)"),
    (frames, FRAMES, {"eta": 1e300 * IMAGE}, "eta and dose call for"),
    (frames, FRAMES, {"dose": 0.0}, "dose is 0"),
    (frames, FRAMES, {"dose": 1e12}, "eta and dose call for"),
    (frames, FRAMES, {"dose": np.ones(4)}, r"dose has shape \(4,\)"),
    (frames, FRAMES, {"frames": 0}, "frames is 0"),
    (frames, FRAMES, {"frames": 2.5}, "frames is 2.5"),
    (frames, FRAMES, {"frames": 10**12}, r"eta and frames call for 1.2e\+13 pixels"),
    (frames, FRAMES, {"seed": [1]}, r"seed is \[1\]"),
]


@pytest.mark.parametrize(("draw", "good", "bad", "message"), CASES)
def test_one_sentence(draw, good, bad, message):
    draw(**good)
    with pytest.raises(InputError, match=message) as caught:
        draw(**{**good, **bad})
    sentence = str(caught.value)
    assert sentence.endswith(".")
    assert "\n" not in sentence
    assert ";" in sentence
