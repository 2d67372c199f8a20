"""The law of a reading: what is kept and what is refused."""

import dataclasses

import numpy as np
import pytest

import recon
from recon.acquisition import MarkLaw
from recon.errors import InputError

GOOD = {"gain": 30.0, "variance": 80.0, "offset": 10.0, "noise": 4.0, "ceiling": 4095.0}


def test_settings_are_kept_and_cannot_be_changed():
    law = recon.MarkLaw(**GOOD)
    assert dataclasses.asdict(law) == GOOD
    assert law == MarkLaw(**GOOD)
    with pytest.raises(dataclasses.FrozenInstanceError):
        law.gain = 2.0


def test_the_ceiling_is_a_reading():
    """0.7 has no float32: the readings at the ceiling and the ceiling itself must be the same number."""
    assert np.float64(MarkLaw(gain=0.1, noise=0.01, ceiling=0.7).ceiling) == np.float32(0.7)
    assert MarkLaw(noise=1.0).ceiling == np.inf
    assert MarkLaw(noise=1.0, ceiling=1e300).ceiling == np.inf


@pytest.mark.parametrize(
    ("bad", "message"),
    [
        ({"gain": 0.0}, r"gain is 0\.0; give the mean reading of one electron"),
        ({"gain": -1}, r"gain is -1\.0"),
        ({"gain": [1.0, 2.0]}, r"gain has shape \(2,\)"),
        ({"gain": np.inf}, "gain is inf"),
        ({"variance": -1e-9}, "variance is -1e-09"),
        ({"variance": np.nan}, "variance is nan"),
        ({"offset": np.inf}, "offset is inf"),
        ({"offset": "ten"}, "offset holds"),
        ({"noise": 0.0}, r"noise is 0\.0; give the rms of a reading without electrons"),
        ({"noise": None}, "noise holds"),
        ({"noise": 1e-200}, "noise is 1e-200"),
        ({"ceiling": np.nan}, "ceiling is nan"),
        ({"ceiling": 40.0}, r"ceiling is 40, not above offset \+ gain = 40"),
        ({"ceiling": -np.inf}, "ceiling is -inf"),
        ({"ceiling": None}, "ceiling holds"),
    ],
)
def test_impossible_settings_are_refused(bad, message):
    with pytest.raises(InputError, match=message):
        MarkLaw(**GOOD | bad)


def test_an_analog_chain_has_noise():
    with pytest.raises(InputError, match=r"noise is 0\.0"):
        MarkLaw()
