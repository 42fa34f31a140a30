"""Settings made from plain mappings: the same as those of the network file, and every fault at once."""

from datetime import date

import pytest

from massfit.errors import InputError
from massfit.settings import Corrections, Frame, PosteriorSettings, Settings, make_settings


def test_mappings_make_the_settings_of_the_classes() -> None:
    made = make_settings(
        network={"name": "Invented", "reference_year": 2016, "start": date(2014, 1, 1), "end": "2016-12-31"},
        corrections={"ocean_mean_atmosphere": "already-removed", "ocean_mean_phasor_hpa": [0.1, -0.6]},
        posterior={"seed": 3},
    )
    assert made == Settings(
        Frame("Invented", 2016, date(2014, 1, 1), date(2016, 12, 31)),
        Corrections("already-removed", ocean_mean_phasor_hpa=(0.1, -0.6)),
        posterior=PosteriorSettings(seed=3),
    )


def test_every_fault_is_told() -> None:
    with pytest.raises(InputError) as caught:
        make_settings(
            network={"reference_yaer": 2016, "name": "Invented"},
            corrections={"tides": "no"},
            fingerprint={"max_degree": 5},
        )
    assert {str(fault) for fault in caught.value.faults} == {
        "settings: network.reference_year: the key is missing. Add it.",
        "settings: network.reference_yaer: unknown key. Known keys are name, reference_year, start, end, references. "
        "Correct or remove it.",
        "settings: corrections.tides: the value is 'no'. Must be 'remove' or 'already-removed'.",
        "settings: fingerprint.max_degree: the value is 5. Must be greater than or equal to 20.",
    }
