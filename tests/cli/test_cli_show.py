"""How estimates and predictions look on a screen."""

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.cli.show import (
    comparable_truth,
    decimals_for,
    fit_as_dict,
    fit_lines,
    prediction_lines,
    value_text,
)
from rigctl.polarimetry import Estimate, Fit, Prediction
from rigctl.polarimetry.results import ChiSquaredSplit, Coupling, Refusal

RATIO = Estimate("part.extinction ratio", "ratio", 1.02e-3, 5.4e-6, is_unknown=True)
OFFSET = Estimate("part.dial offset", "angle", -89.99123, 0.00054, is_unknown=True)
POWER = Estimate("source.power", "power", 2.000134e-3, 1.2e-7, is_unknown=False)
REFUSAL = Refusal(
    ("part.extinction ratio",),
    "without a dark it cannot be told from stray light",
    "ten readings with the beam blocked",
    {"part.extinction ratio": 5.43e-6},
)


def fit_of(*estimates: Estimate, refusals: Sequence[Refusal] = ()) -> Fit:
    return Fit(
        estimates=estimates,
        covariance=np.diag([estimate.u**2 for estimate in estimates]),
        chi2=75.31,
        dof=77,
        split=None,
        equivalents=(),
        refusals=tuple(refusals),
        notes=(),
        fitted_w={},
        u_w={},
    )


def line_of(name: str, lines: Sequence[str]) -> str:
    (found,) = (line for line in lines if line.strip().startswith(name))
    return found


@pytest.mark.parametrize(
    ("kind", "value", "u", "text"),
    [
        ("angle", 12.345678, 0.00123, "12.3457 +- 0.0012 deg"),
        ("angle", 12.345678, 0.0996, "12.35 +- 0.10 deg"),
        ("angle", 12.345678, 0.00996, "12.346 +- 0.010 deg"),
        ("angle", 123.4, 27.3, "123 +- 27 deg"),
        ("angle", -0.00001, 0.5, "-0.00 +- 0.50 deg"),
        ("retardance", 0.2473081, 0.000123, "0.24731 +- 0.00012 waves"),
        ("ratio", 0.001017, 0.0000054, "0.0010170 +- 0.0000054"),
        ("drift", 0.00237, 0.0054, "0.24 +- 0.54 %/h"),
        ("power", 2.0001e-3, 1.2e-7, "2.00010 +- 0.00012 mW"),
    ],
)
def test_an_uncertainty_has_two_digits_and_its_value_ends_at_the_same_place(
    kind: str, value: float, u: float, text: str
) -> None:
    assert value_text(kind, value, u) == text


@pytest.mark.parametrize(
    ("value_w", "text"),
    [
        (3.0, "3.00 +- 0.30 W"),
        (2e-3, "2.00 +- 0.20 mW"),
        (5e-6, "5.00 +- 0.50 uW"),
        (7e-9, "7.00 +- 0.70 nW"),
        (4e-12, "4.00 +- 0.40 pW"),
        (4e-13, "0.400 +- 0.040 pW"),
        (-7e-9, "-7.00 +- 0.70 nW"),
    ],
)
def test_a_power_gets_the_prefix_of_its_size(value_w: float, text: str) -> None:
    assert value_text("power", value_w, abs(value_w) / 10) == text


def test_a_power_that_is_lost_in_its_uncertainty_gets_the_prefix_of_that() -> None:
    assert value_text("power", 3e-12, 2e-9) == "0.0 +- 2.0 nW"


@pytest.mark.parametrize("u", [0.0, math.nan, math.inf])
def test_without_an_uncertainty_six_decimals_are_shown(u: float) -> None:
    assert decimals_for(u) == 6


@given(st.floats(1e-9, 9.9))
def test_two_significant_digits_of_an_uncertainty_are_shown(u: float) -> None:
    shown = f"{u:.{decimals_for(u)}f}"

    assert len(shown.replace(".", "").lstrip("0")) == 2
    assert float(shown) == pytest.approx(u, rel=0.06)


def test_a_ratio_is_also_told_as_the_trade_writes_it() -> None:
    assert line_of("part.extinction ratio", fit_lines(fit_of(RATIO), {})).endswith("that is 980.4:1")


@pytest.mark.parametrize(("value", "u"), [(1e-5, 5e-6), (-1e-5, 1e-6), (0.0, 1e-6)])
def test_a_ratio_within_three_uncertainties_of_nothing_is_not_turned_over(value: float, u: float) -> None:
    (line,) = (line for line in fit_lines(fit_of(replace(RATIO, value=value, u=u)), {}) if "ratio" in line)

    assert ":1" not in line


def test_what_was_asked_for_stands_apart_from_what_was_fitted_along() -> None:
    lines = fit_lines(fit_of(POWER, RATIO, OFFSET), {})

    along = lines.index("fitted along:")
    assert [line.split("  ")[1] for line in lines[1:along]] == ["part.extinction ratio", "part.dial offset"]
    assert lines[along + 1].startswith("  source.power")
    assert lines[along + 2] == "chi-squared 75.3 for 77 degrees of freedom"


def test_columns_of_a_table_stand_below_each_other() -> None:
    lines = fit_lines(fit_of(POWER, RATIO, OFFSET), {estimate.name: estimate.value for estimate in (RATIO, OFFSET)})

    asked = [line_of(estimate.name, lines) for estimate in (RATIO, OFFSET)]
    assert len({line.index("truth") for line in asked}) == 1


def test_the_truth_stands_beside_its_estimate_to_the_same_place() -> None:
    lines = fit_lines(fit_of(POWER, RATIO), {"source.power": 2.00029876e-3, "part.extinction ratio": 1.0234567e-3})

    assert "truth 2.00030 mW" in line_of("source.power", lines)
    assert "truth 0.0010235" in line_of("part.extinction ratio", lines)


def test_without_a_truth_there_is_no_word_of_one() -> None:
    assert not any("truth" in line for line in fit_lines(fit_of(POWER, RATIO, OFFSET), {}))


@pytest.mark.parametrize("half_turns", [-3, -1, 0, 1, 2])
def test_the_truth_of_an_angle_is_told_half_turns_away_where_that_is_nearer(half_turns: int) -> None:
    """An axis has no direction: -90 deg and 90 deg are the same."""
    truth = {"part.dial offset": -89.9907 + 180.0 * half_turns}

    assert "truth -89.99070 deg" in line_of("part.dial offset", fit_lines(fit_of(OFFSET), truth))


@given(st.floats(-1e4, 1e4), st.floats(-1e4, 1e4))
def test_an_angle_s_truth_moves_by_whole_half_turns_and_ends_within_a_quarter_turn(value: float, truth: float) -> None:
    shown = comparable_truth("angle", value, truth)

    assert abs(shown - value) <= 90.0 + 1e-9
    assert abs(math.remainder(shown - truth, 180.0)) < 1e-8


@pytest.mark.parametrize("kind", ["retardance", "ratio", "power", "drift"])
def test_other_truths_are_told_as_they_are(kind: str) -> None:
    assert comparable_truth(kind, 0.25, 500.0) == 500.0


def test_json_has_the_comparable_truth_beside_each_estimate_that_has_one() -> None:
    values = fit_as_dict(fit_of(POWER, OFFSET), {"part.dial offset": 90.0093})

    power, offset = values["estimates"]
    assert "truth" not in power
    assert offset["truth"] == pytest.approx(-89.9907)
    assert (offset["value"], offset["standard_uncertainty"], offset["unknown"]) == (-89.99123, 0.00054, True)


def test_what_is_refused_is_told_with_its_reason_and_what_its_cure_would_give() -> None:
    lines = fit_lines(fit_of(OFFSET, refusals=[REFUSAL]), {})

    at = lines.index("  part.extinction ratio: not given: without a dark it cannot be told from stray light")
    assert at < lines.index("fitted along:")
    assert lines[at + 1] == "    cure: ten readings with the beam blocked (part.extinction ratio to 5.4e-06)"


def test_a_refusal_without_a_cure_offers_none() -> None:
    refusal = replace(REFUSAL, remedy="", u_with_remedy={})

    assert not any("cure" in line for line in fit_lines(fit_of(refusals=[refusal]), {}))


def test_an_interval_is_told_in_the_unit_of_its_row() -> None:
    """The row is in nW because its uncertainty is; the value alone would be in pW."""
    stray = Estimate("signal.stray light", "power", 3e-10, 2e-9, True, interval=(0.0, 4.2e-9))

    line = line_of("signal.stray light", fit_lines(fit_of(stray), {}))

    assert "0.3 +- 2.0 nW" in line
    assert "95 %: 0 to 4.2" in line


def test_notes_equivalents_and_the_split_of_chi_squared_are_told() -> None:
    fit = replace(
        fit_of(OFFSET),
        split=ChiSquaredSplit(60.04, 63, 15.27, 14),
        equivalents=("part.dial offset + 90", "part.retardance -> 1 - it"),
        notes=("few readings",),
    )

    lines = fit_lines(fit, {})

    assert "60.0 for 63 is not harmonics, 15.3 for 14 is harmonics" in lines[-3]
    assert lines[-2].endswith("part.dial offset + 90; part.retardance -> 1 - it")
    assert lines[-1] == "note: few readings"


def test_a_note_of_an_estimate_stands_in_its_row() -> None:
    lines = fit_lines(fit_of(replace(RATIO, note="at its edge")), {})

    assert line_of("part.extinction ratio", lines).endswith("that is 980.4:1; at its edge")


def test_a_prediction_tells_the_unknowns_only_and_what_blurs_them() -> None:
    coupling = Coupling("part.dial offset", 0.0054, 0.0012, "entry polarizer.axis")

    lines = prediction_lines(Prediction((POWER, RATIO, OFFSET), (coupling,), (), (REFUSAL,)))

    told = "\n".join(lines)
    assert "part.extinction ratio  0.0010200 +- 0.0000054" in told
    assert "source.power" not in told
    assert "part.dial offset would be known to 0.0012 if entry polarizer.axis were known" in told
    assert "not given: without a dark" in told


def test_a_recipe_without_unknowns_predicts_nothing() -> None:
    assert prediction_lines(Prediction((POWER,), (), (), ())) == []
