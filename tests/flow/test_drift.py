"""A flow that changes during a run, and flows that rise and fall."""

import numpy as np
import pytest

import gradeline
from gradeline.reduction.flow import metered_flow

from .conftest import FLOWS, PLACES, columns_of, friction_slope

DRIFT = 0.02


def drifting(at: float) -> tuple[dict[str, list[float]], list[np.ndarray]]:
    """Start, end, and columns read one after another while the head at chainage `at` stays."""
    start = [q * (1 - DRIFT / 2) for q in FLOWS]
    end = [q * (1 + DRIFT / 2) for q in FLOWS]
    heads = []
    for q in FLOWS:
        then = q * (1 + DRIFT * (np.linspace(0, 1, len(PLACES)) - 0.5))
        noise = columns_of(q) - (9.0 - friction_slope(q) * PLACES)
        heads.append(9.0 - friction_slope(q) * at - friction_slope(then) * (PLACES - at) + noise)
    return {"flow start [m^3/s]": start, "flow end [m^3/s]": end}, heads


def slopes(folder):
    return gradeline.reduce(gradeline.read_survey(folder)).runs["slope"].to_numpy()


@pytest.mark.parametrize("at", [0.0, 2.8, 5.5])
def test_taps_read_in_order_are_brought_to_one_flow(write_flow, at):
    columns, heads = drifting(at)
    true = slopes(write_flow("", {"flow [m^3/s]": FLOWS}))
    told = f'[flow]\nread = "in order"\nconstant_head_at = "{at} m"\n'
    corrected = slopes(write_flow(told, columns, heads=heads))
    bent = slopes(write_flow('[flow]\nread = "together"\n', columns, heads=heads))
    assert corrected == pytest.approx(true, rel=0.002)
    if at != 2.8:
        assert np.abs(bent / true - 1).min() > 0.01  # n/2 times the drift


def test_the_bend_of_an_uncorrected_line():
    # The issue's own figure: a drift of 0.5 % over taps read in order at S = 1 bends the line by 7 mm (5.5 m, S ~ Q²)
    x = np.linspace(0, 5.5, 12)
    heads = -x * (1 + 0.005 * (x / 5.5 - 0.5)) ** 2
    straight = np.polynomial.Polynomial.fit(x, heads, 1)(x)
    assert np.abs(heads - straight).max() == pytest.approx(0.007, abs=0.003)


def test_where_the_head_was_held_is_an_uncertainty_when_not_said(write_flow):
    columns, heads = drifting(0.0)
    survey = gradeline.read_survey(write_flow('[flow]\nread = "in order"\n', columns, heads=heads))
    found = gradeline.reduce(survey)
    true = slopes(write_flow("", {"flow [m^3/s]": FLOWS}))
    off = np.abs(found.runs["slope"].to_numpy() - true)
    assert (off < 2 * found.runs["slope_u"].to_numpy()).all()
    assert (off > 0.005 * true).all()
    assert any("constant_head_at says where it was" in text for text in found.assumptions)
    assert any("changed by up to 2 %" in text for text in found.assumptions)


def test_taps_read_together_carry_the_drift_as_uncertainty(write_flow):
    columns, _ = drifting(0.0)
    survey = gradeline.read_survey(write_flow('[flow]\nread = "together"\n', columns))
    assert survey.runs["flow"].to_numpy() == pytest.approx(FLOWS)
    # a rectangular distribution of full width a: a/√12 (JCGM 100, 4.3.7)
    assert metered_flow(survey).survey.runs["flow_drift_u"].to_numpy() == pytest.approx(DRIFT / np.sqrt(12))
    runs = gradeline.reduce(survey).runs
    relative = (runs["friction_factor_u"] / runs["friction_factor"]).to_numpy()
    assert (relative > 2 * DRIFT / np.sqrt(12)).all()
    assert (relative < 3 * DRIFT / np.sqrt(12)).all()


def test_a_drift_without_a_word_on_the_taps_is_a_caution(write_flow):
    columns, _ = drifting(0.0)
    cautions = gradeline.reduce(gradeline.read_survey(write_flow("", columns))).cautions
    assert any('write read = "in order" in [flow]' in text for text in cautions)


@pytest.mark.parametrize("read", ["in order", "together"])
def test_one_value_a_run_says_that_no_drift_could_be_looked_for(write_flow, read):
    weir = f"""[flow]
method = "v-notch weir"
notch_angle = "90 deg"
read = "{read}"
"""
    given = f'[flow]\nread = "{read}"\n'
    for toml, columns in (
        (given, {"flow [m^3/s]": FLOWS}),
        (weir, {"weir head [m]": [0.038 + 0.003 * n for n in range(5)]}),
    ):
        metered = metered_flow(gradeline.read_survey(write_flow(toml, columns)))
        told = [text for text in metered.survey.assumptions if "could not be looked for" in text]
        assert len(told) == (read == "in order")


def with_directions(write_flow, excess):
    flows = [*FLOWS, *(q * 1.01 for q in FLOWS[::-1])]
    heads = [9.0 - (9.0 - columns_of(q)) * (1 + excess * (place < 5)) for place, q in enumerate(flows)]
    columns = {"flow [m^3/s]": flows, "direction": ["rising"] * 5 + ["falling"] * 5}
    survey = gradeline.read_survey(write_flow("", columns, flows=flows, heads=heads))
    assert survey.runs["direction"].tolist() == columns["direction"]
    return gradeline.reduce(survey)


def test_rising_and_falling_flows_that_differ_are_a_caution(write_flow):
    reduction = with_directions(write_flow, 0.04)
    told = [text for text in reduction.cautions if "rising" in text]
    assert len(told) == 1
    assert "f of the 5 rising runs lies 3.9 %" in told[0]
    assert "above that of the 5 falling runs at like Re" in told[0]


def test_rising_and_falling_flows_that_agree_are_said_to(write_flow):
    reduction = with_directions(write_flow, 0.0)
    assert not any("rising" in text for text in reduction.cautions)
    assert any("no difference beyond their scatter" in text for text in reduction.assumptions)
