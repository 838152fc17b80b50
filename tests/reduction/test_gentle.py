"""Tests that were too gentle, and the flow that would do: by hand."""

import math
from dataclasses import replace

import numpy as np
import pytest

from gradeline.reduction import reduce
from gradeline.reduction.gentle import flow_needed
from tests.reduction.benches import main, tube
from tests.simulate.surveys import Uncertainties

TWO = np.array([0.5, 5.0])


def gentle(reduction):
    return [text for text in reduction.cautions if "too gentle" in text]


def two_taps(flows, reading):
    """Two columns 4.5 m apart whose readings have a stated uncertainty, m: u(S) = √2 u/4.5."""
    return tube(flows, chainage=TWO, stated=Uncertainties(reading=reading))[0]


@pytest.mark.parametrize(
    ("exponent", "expected"),
    [
        (2.0, 2e-3 * math.sqrt(2.5)),  # rough turbulent: 3.16 L/s
        (1.75, 3.376e-3),  # 2.5^(4/7) = e^(0.91629 · 0.571429) = e^0.52360 = 1.6881
        (1.0, 5e-3),  # laminar: two and a half times the flow
    ],
)
def test_the_flow_by_hand(exponent, expected):
    """5 u/S = 5 · 0.002/0.004 = 2.5, to the power 1/n."""
    assert flow_needed(2e-3, 0.004, 0.002, exponent) == pytest.approx(expected, rel=2e-4)


def test_a_head_loss_of_five_uncertainties_stays_at_its_flow():
    assert flow_needed(0.012, 0.05, 0.01, 1.9) == pytest.approx(0.012, rel=1e-12)


def test_two_gauges_that_differ_by_little_are_told_with_the_flow_that_would_do():
    """A reduction at the flow that is named has a head loss of five uncertainties, within the two digits told."""
    reduction = reduce(two_taps([3e-4], 0.02), monte_carlo=False)
    run = reduction.runs.iloc[0]
    ratio = run["slope"] / run["slope_u"]
    # u(S) = √2 · 20 mm / 4.5 m = 0.00629, less 0.12 % for the air beside the columns
    assert run["slope_u"] == pytest.approx(math.sqrt(2) * 0.02 / 4.5, rel=2e-3)
    assert 2 < ratio < 5
    (text,) = gentle(reduction)
    assert text.startswith(
        f"In run 1 the measured head loss is only {ratio:.1f} times its uncertainty: too gentle a test for the friction "
        "of the pipe, which wants at least 5 times. From about "
    )
    assert text.endswith(" L/s on it would not be, if the uncertainty stays what it is.")
    named = 1e-3 * float(text.split("From about ")[1].split()[0])
    there = reduce(two_taps([named], 0.02), monte_carlo=False).runs.iloc[0]
    assert there["slope"] / there["slope_u"] == pytest.approx(5, rel=0.06)
    assert not gentle(reduce(two_taps([1.1 * named], 0.02), monte_carlo=False))


def test_a_head_loss_lost_in_its_uncertainty_is_held_against_a_smooth_pipe():
    """Blasius (1913), f = 0.3164/Re^(1/4), from memory: within 2 % of the smooth law at Re 5e4 to 1e5."""
    survey = two_taps([3e-4], 0.2)
    reduction = reduce(survey, monte_carlo=False)
    run = reduction.runs.iloc[0]
    assert run["slope"] < 2 * run["slope_u"]
    (text,) = gentle(reduction)
    assert " Even a smooth pipe would reach that at about " in text
    named = 1e-3 * float(text.split("at about ")[1].split()[0])
    speed, reynolds = run["velocity"], run["reynolds"]
    slope = 0.3164 / reynolds**0.25 * speed**2 / (2 * 9.80665 * 0.02664)
    # Blasius' S grows as Q^1.75
    assert named == pytest.approx(3e-4 * (5 * run["slope_u"] / slope) ** (1 / 1.75), rel=0.12)


def test_the_flow_is_told_in_the_unit_of_the_survey():
    survey = two_taps([3e-4], 0.02)
    (text,) = gentle(reduce(survey, monte_carlo=False))
    litres = float(text.split("From about ")[1].split()[0])
    (hourly,) = gentle(reduce(replace(survey, units={**survey.units, "flow": "m^3/h"}), monte_carlo=False))
    assert "m^3/h" in hourly
    assert float(hourly.split("From about ")[1].split()[0]) == pytest.approx(3.6 * litres, rel=0.06)


def test_several_runs_and_reaches_are_named_apart():
    reduction = reduce(main(stated=Uncertainties(reading=1.0))[0], monte_carlo=False)
    texts = gentle(reduction)
    assert len(texts) == 2
    for text, reach in zip(texts, reduction.reaches["reach"], strict=True):
        mine = reduction.runs[reduction.runs["reach"] == reach]
        low = (mine["slope"] < 5 * mine["slope_u"]).sum()
        named = f"all {len(mine)} flowing runs" if low == len(mine) else f"and {mine['run'].iloc[low - 1]}"
        assert f"{named} in reach {reach!r} the measured head loss is only " in text


def test_a_strong_test_is_not_called_gentle():
    assert not gentle(reduce(two_taps([1.4e-3], 0.5e-3), monte_carlo=False))


def test_where_no_uncertainty_is_known_nothing_is_said():
    assert not gentle(reduce(tube([3e-4], chainage=TWO)[0], monte_carlo=False))


def test_a_run_that_does_sets_an_upper_end():
    """A laminar run grows with n = 1 to its 5 u only beyond the critical zone, where the next run does already."""
    reduction = reduce(two_taps([2.5e-5, 6e-5], 0.4e-3), monte_carlo=False)
    first, second = (row for _, row in reduction.runs.iterrows())
    assert first["slope"] < 5 * first["slope_u"]
    assert second["slope"] > 5 * second["slope_u"]
    assert 2.5e-5 * 5 * first["slope_u"] / first["slope"] > 6e-5
    (text,) = gentle(reduction)
    assert "From about 0.06 L/s on" in text
