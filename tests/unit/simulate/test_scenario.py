"""Settings that no recording can have are refused, and the message says which."""

import json
from dataclasses import replace

import pytest

from lfptools.errors import InputError
from lfptools.simulate import Scenario
from lfptools.simulate.scenario import Link, UnitsScenario


@pytest.mark.parametrize(
    ("change", "says"),
    [
        ({"rate_hz": 0.0}, "rate_hz is 0; it must be a number above 0"),
        ({"n_trials": 0}, "n_trials is 0; it must be at least 1"),
        ({"sensor_uv": -1.0}, "sensor_uv is -1; it must be at least 0"),
        ({"shared": 1.5}, "shared is 1.5; it must lie between 0 and 1"),
        ({"artefact_share": -0.1}, "artefact_share is -0.1; it must lie between 0 and 1"),
        ({"interval_s": (1.5, 1.0)}, "interval_s is .1.5, 1.0. s; it must be .first, last."),
        ({"interval_s": (0.1, 1.0)}, "interval_s begins at 0.1 s; responses last up to 0.3 s"),
        ({"dead": ("V1",)}, "an area with a bad contact is 'V1'; it must be one of S1, S2, M1"),
        (
            {"links": (Link("S1", "V1", "early", (0.0, 100.0)),)},
            "the follower of a link is 'V1'; it must be one of S1, S2, M1",
        ),
        (
            {"links": (Link("S1", "M1", "middle", (0.0, 100.0)),)},
            "the window of a link is 'middle'; it must be one of early, late",
        ),
        ({"units": UnitsScenario(locking=2.0)}, "units.locking is 2"),
        ({"units": UnitsScenario(n_units=2)}, "units.n_locked is 3; there are 2 units"),
        ({"lead_s": 0.2}, "area S2 starts 0.5 s late; it must lie between 0 and half of lead_s"),
        ({"windows": Scenario().windows[:1]}, "the window of a link is 'late'"),
        (
            {"windows": Scenario().windows[:1], "links": ()},
            "area S1 has waves for early, late; needed is one for each window, .*: early$",
        ),
    ],
)
def test_impossible_settings_are_refused(change: dict, says: str) -> None:
    with pytest.raises(InputError, match=says):
        replace(Scenario(), **change)


def test_contacts_and_start_follow_from_the_settings() -> None:
    scenario = Scenario(n_contacts=4, pitch_um=50.0, first_sample=5000, rate_hz=2500.0)
    assert scenario.contact_depth_um == (0.0, 50.0, 100.0, 150.0)
    assert scenario.start_s == 2.0


def test_settings_are_plain() -> None:
    plain = json.loads(json.dumps(Scenario().as_plain()))
    assert plain["conductivity_s_m"] == 0.27
    assert [area["name"] for area in plain["areas"]] == ["S1", "S2", "M1"]
    assert plain["areas"][2]["waves"]["late"]["peak_ms"] == 118.0
