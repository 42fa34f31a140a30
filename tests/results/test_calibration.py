"""Counts of truths held, beside what chance allows."""

import numpy as np
import pytest

from massfit.results.calibration import QUANTITIES, calibration_dataset, calibration_summary, truth_among

DRAWS = 400


def answers(count: int, *, claimed: float = 1.0, bias: float = 0.0) -> list[dict]:
    """Answers whose error is one standard deviation of `claimed` times the one they claim, and a bias."""
    rng = np.random.default_rng(4)
    found = []
    for _ in range(count):
        truth = np.array([10.0, 85.0]) + 30.0 * rng.standard_normal(2)
        centre = truth + [bias, 0.0] + 5.0 * rng.standard_normal(2)
        draws = centre + 5.0 * claimed * rng.standard_normal((DRAWS, 2))
        squares = rng.chisquare(2, 3) / 2 / claimed**2
        found.append({**truth_among(draws, truth), "truth": truth, "site_square": squares, "converged": True})
    return found


def summary(found: list[dict]) -> dict:
    return calibration_summary(calibration_dataset(found, ["A", "B", "C"]))


def test_right_regions_hold_and_say_so() -> None:
    said = summary(answers(200))
    assert said["holds"]
    assert said["surrogates"] == 200
    # one count in twenty of right regions lies outside; ten are counted
    outside = [row for row in said["coverage"] if not row["expected"][0] <= row["inside"] <= row["expected"][1]]
    assert len(outside) <= 2
    assert {(row["quantity"], row["level"]) for row in said["coverage"]} == {
        (name, level) for name in QUANTITIES for level in (0.5, 0.95)
    }
    assert all(row["limits"][0] <= row["share"] <= row["limits"][1] for row in said["coverage"])
    assert said["site_square"] == pytest.approx(1.0, abs=4 / np.sqrt(600))
    assert max(map(abs, said["bias_sd"])) < 4 * max(said["bias_error_sd"])
    assert said["sentence"].startswith("Of 200 surrogates of this network with a known cycle the 95 % region held 1")
    assert "do not quote" not in said["sentence"]


@pytest.mark.parametrize("claimed", [0.5, 2.0])
def test_regions_of_another_size_are_called_out(claimed: float) -> None:
    said = summary(answers(60, claimed=claimed))
    assert not said["holds"]
    assert "do not quote" in said["sentence"]


def test_a_bias_is_seen_as_a_bias() -> None:
    said = summary(answers(60, bias=5.0))
    assert said["bias_sd"][0] == pytest.approx(1.0, abs=4 * said["bias_error_sd"][0])
    assert abs(said["bias_sd"][1]) < 4 * said["bias_error_sd"][1]


def test_limits_of_a_share_are_those_of_the_tables() -> None:
    # Clopper & Pearson 1934: 19 of 20 has 95 % limits .751 and .999
    found = answers(20)
    for number, each in enumerate(found):
        each["region"] = 0.99 if number == 0 else 0.2
    rows = {(row["quantity"], row["level"]): row for row in summary(found)["coverage"]}
    assert np.round(rows["region", 0.95]["limits"], 3).tolist() == [0.751, 0.999]


def test_one_surrogate_gives_no_standard_error() -> None:
    assert summary(answers(1))["bias_error_sd"] == [None, None]
