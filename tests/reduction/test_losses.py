"""Fitted loss coefficients: what K holds, how many taps it takes, published values, the trend over Re."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gradeline.fitting_kinds import fitting_kinds
from gradeline.quantities import Measured
from gradeline.reduction import reduce
from gradeline.survey import Fitting
from tests.reduction.benches import FAST, FLOWS, TAPS, main, tube, with_runs
from tests.simulate.surveys import NominalFitting, NominalReach, Uncertainties, make_survey

VALVE = 1.5
AT = 2.75


PLAIN = Fitting("valve", AT, None)


def valved(flows=FAST, *, fitting=PLAIN, **more):
    survey, truth = tube(flows, fittings=[NominalFitting(AT, VALVE)], **more)
    return replace(survey, fittings=(fitting,)), truth


def left_out(survey, *labels):
    """Return the survey with the readings of some taps not taken."""
    readings = survey.readings.copy()
    readings[list(labels)] = np.nan
    return replace(survey, readings=readings)


def test_k_holds_nothing_of_the_straight_pipe_unless_a_length_is_given():
    """Gross loss less straight pipe: with 0.4 m of its own the fitting keeps f L/D of it, f of the simulator's law."""
    survey, truth = valved()
    plain = reduce(survey).loss_runs
    assert plain["loss_coefficient"].to_numpy() == pytest.approx(VALVE, rel=1e-5)
    long = replace(survey, fittings=(Fitting("valve", AT, None, length=0.4),))
    found = reduce(long).loss_runs
    by_hand = VALVE + truth.friction_factor[:, 0] * 0.4 / 0.02664
    assert found["loss_coefficient"].to_numpy() == pytest.approx(by_hand, rel=1e-5)
    assert found["used"].all()


def test_the_recovery_counts_from_the_ends_of_the_fitting():
    """T6 is 283 mm = 10.6 bores from the middle of the valve, and 3.1 bores from the end of one of 0.4 m."""
    survey, _ = valved(fitting=Fitting("valve", AT, None, length=0.4))
    heads = reduce(survey).heads
    row = heads[(heads["run"] == "1") & (heads["tap"] == "T6")].iloc[0]
    assert row["flag"] == "disturbed"
    assert row["reason"] == "3.1 bores downstream of 'valve'"
    inside = Fitting("valve", AT, None, length=0.6, approach=0.0, recovery=0.0)
    heads = reduce(replace(survey, fittings=(inside,))).heads
    assert set(heads["reason"][heads["flag"] == "disturbed"]) == {"between the ends of 'valve'"}


@pytest.mark.parametrize(
    ("gone", "words"),
    [
        (TAPS[5:9], "1 usable tap downstream"),
        (TAPS[1:5], "1 usable tap upstream"),
    ],
)
def test_a_single_tap_on_a_side_gives_no_k(gone, words):
    survey, _ = valved()
    names = [tap.name for tap in survey.taps if tap.chainage in gone]
    found = reduce(left_out(survey, *names)).fittings.iloc[0]
    assert np.isnan(found["loss_coefficient"])
    assert found["reason"].startswith(f"{words}: K needs 2 on each side")


def test_two_taps_on_each_side_give_k_and_runs_with_fewer_do_not_enter():
    survey, _ = valved()
    few = left_out(survey, "T2", "T3", "T4", "T7", "T8", "T9")
    readings = few.readings.copy()
    readings.loc["2", "T10"] = np.nan
    found = reduce(replace(few, readings=readings))
    assert found.fittings["loss_coefficient"].item() == pytest.approx(VALVE, rel=1e-5)
    runs = found.loss_runs.set_index("run")
    assert runs["used"].tolist() == [True, False, True, True]
    assert runs.loc["2", "reason"].startswith("2 usable taps upstream and 1 downstream")
    assert (found.losses["taps_upstream"].item(), found.losses["taps_downstream"].item()) == (2, 2)


def test_one_tap_between_two_fitted_losses_gives_neither():
    survey, _ = tube(FAST, fittings=[NominalFitting(2.1, 1.0), NominalFitting(2.75, VALVE)])
    near = tuple(replace(one, recovery=3.0) for one in survey.fittings)
    found = reduce(replace(survey, fittings=near)).fittings
    assert found["loss_coefficient"].isna().all()
    assert found["reason"][0].startswith("1 usable tap downstream before the next fitted loss")
    assert found["reason"][1].startswith("1 usable tap upstream before the next fitted loss")


def test_laminar_and_critical_runs_do_not_enter_beside_turbulent_ones():
    survey, _ = valved(FLOWS)
    found = reduce(survey)
    assert found.loss_runs["used"].tolist() == [False, False, True, True, True, True]
    assert found.loss_runs["reason"][0] == "not turbulent"
    assert found.losses["note"].item() == "2 runs in laminar or critical flow left out"
    slow, _ = valved(FLOWS[:2])
    alone = reduce(slow)
    assert alone.losses["runs_used"].item() == 2
    assert "no run is turbulent" in alone.losses["note"].item()


def test_a_run_off_the_friction_law_does_not_enter():
    """A flow written 30 % too large makes S and K of its run too small alike."""
    flows = np.geomspace(3e-4, 1.5e-3, 10)
    stated = Uncertainties(reading=5e-4, flow=0.004)
    survey, _ = valved(flows, sigma=5e-4, stated=stated)
    flow = survey.runs["flow"].to_numpy().copy()
    flow[4] *= 1.3
    found = reduce(with_runs(survey, flow=flow))
    assert found.loss_runs["reason"].tolist().count("off the friction law") == 1
    assert not found.loss_runs["used"][4]
    row = found.fittings.iloc[0]
    assert row["loss_coefficient_low"] <= VALVE <= row["loss_coefficient_high"]


def test_a_sudden_expansion_against_borda_and_carnot():
    """40 mm to 50 mm at 7.2 m³/h loses 16.7 mm of water.

    Coulson and Richardson, Chemical Engineering, vol. 1, ex. 3.6, p. 88, as a public companion notebook transcribes it
    (not seen in print).
    """
    velocity = 7.2 / 3600 / (np.pi * 0.04**2 / 4)
    measured = 16.7e-3 / (velocity**2 / (2 * 9.80665))
    survey, _ = make_survey(
        np.random.default_rng(3),
        chainage=[0.3, 1.2, 2.1, 2.9, 3.6, 4.4, 5.2, 5.8],
        reaches=[NominalReach(0, 3, 0.04, 1e-5), NominalReach(3, 6, 0.05, 1e-5)],
        flows=np.array([0.8, 1.0, 1.2]) * 7.2 / 3600,
        temperature=288.0,
        sigma=2e-4,
        stated=Uncertainties(reading=2e-4),
        fittings=[NominalFitting(3.0, measured, change_of_bore=True)],
        draw=False,
    )
    known = replace(survey, fittings=(replace(survey.fittings[0], kind="sudden expansion"),))
    found = reduce(known)
    beside, row = found.losses.iloc[0], found.fittings.iloc[0]
    assert beside["published"] == pytest.approx((1 - 0.8**2) ** 2, rel=1e-12)
    assert beside["published"] == pytest.approx(measured, abs=0.05 / 16.7 * measured)
    assert row["loss_coefficient_low"] <= measured <= row["loss_coefficient_high"]
    assert beside["verdict"] == "not distinguishable"
    # referred to the wider bore, both are larger by the square of the areas' ratio
    other = reduce(replace(known, fittings=(replace(known.fittings[0], velocity="downstream"),)))
    assert other.losses["published"].item() / beside["published"] == pytest.approx(
        (0.05 / 0.04) ** 4, rel=1e-12
    )
    assert other.fittings["loss_coefficient"].item() == pytest.approx(
        row["loss_coefficient"] * (0.05 / 0.04) ** 4, rel=1e-2
    )


@pytest.mark.parametrize(
    ("kind", "published", "source"),
    [
        # Munson, Young and Okiishi, ex. 8.8, p. 451, by a public companion notebook (not seen in print)
        ("threaded elbow", 1.5, "Munson"),
        ("globe valve", 10.0, "Munson"),
        # Fox and McDonald, p. 357: K = 0.50 from a measured step, by a public companion notebook; Crane TP-410
        ("sharp entrance", 0.5, "Crane"),
    ],
)
def test_published_values(kind, published, source):
    survey, _ = valved(fitting=Fitting("piece", AT, None, kind=kind))
    found = reduce(survey).losses.iloc[0]
    assert found["published"] == published
    assert found["source"].startswith(source)


def test_a_valve_far_above_what_was_published_is_said_to_be_above():
    """8 f_T in a bore of 26.64 mm is 0.18 (`fluids.fittings.K_gate_valve_Crane`: 0.178): a K of 1.5 is no open gate."""
    fluids = pytest.importorskip("fluids.fittings")
    survey, _ = valved(
        sigma=5e-4, stated=Uncertainties(reading=5e-4), fitting=Fitting("gate", AT, None, kind="gate valve")
    )
    found = reduce(survey)
    beside = found.losses.iloc[0]
    assert beside["published"] == pytest.approx(fluids.K_gate_valve_Crane(0.02664, 0.02664, 0.0), rel=0.015)
    assert beside["verdict"] == "above"
    assert any("Crane Technical Paper 410" in text for text in found.assumptions)


def test_a_kind_without_a_published_value_says_so():
    survey, _ = valved(fitting=Fitting("bend", AT, None, kind="bend"))
    found = reduce(survey)
    assert found.losses["verdict"].item() is None
    assert any(text.startswith("No published K of a bend is held") for text in found.assumptions)


def test_every_published_value_has_a_source_and_a_range():
    kinds = fitting_kinds()
    for kind in kinds.values():
        if kind.coefficient is not None or (kind.rule and kind.name != "change of bore"):
            assert kind.source, kind
            assert kind.described, kind
            assert 0 < kind.variation < 1, kind
    assert kinds["sharp entrance"].coefficient == 0.5


def with_falling_k(per_decade, *, sigma=3e-4, seed=4):
    """K = 2 at Re 30 000 and a change per decade: run by run from surveys of their own."""
    flows = np.geomspace(3e-4, 1.5e-3, 10)
    stated = Uncertainties(reading=sigma, flow=0.003, chainage=1e-3)
    rng = np.random.default_rng(seed)
    more = {
        "chainage": TAPS,
        "reaches": [NominalReach(0.0, 5.5, 0.0266, 2e-5, 2.66e-5)],
        "sigma": sigma,
        "stated": stated,
    }
    survey, truth = make_survey(rng, flows=flows, fittings=[NominalFitting(AT, 2.0)], **more)
    readings = survey.readings.copy()
    for run, reynolds in enumerate(truth.reynolds[:, 0]):
        coefficient = 2.0 + per_decade * np.log10(reynolds / 3e4)
        one, _ = make_survey(
            np.random.default_rng(seed), flows=flows, fittings=[NominalFitting(AT, coefficient)], **more
        )
        readings.iloc[run] = one.readings.iloc[run]
    return replace(survey, readings=readings)


def test_a_k_that_falls_with_reynolds_is_told():
    found = reduce(with_falling_k(-0.5))
    beside = found.losses.iloc[0]
    assert beside["depends_on_reynolds"]
    assert abs(beside["trend"] + 0.5) < 3 * beside["trend_u"] < 0.5
    (said,) = [text for text in found.cautions if text.startswith("K of 'fitting 1' falls with Re, by ")]
    assert "per decade: the value given is that of the fast runs" in said


def test_a_head_that_rises_at_a_loss_is_said():
    """A loss takes head: a K of −0.6 in every run, as a tap label the wrong way round would give, is none."""
    made, _ = make_survey(
        np.random.default_rng(2),
        chainage=TAPS,
        reaches=[NominalReach(0.0, 6.0, 0.05, 1e-4)],
        flows=FAST,
        fittings=[NominalFitting(3.0, -0.6)],
        sigma=1e-4,
    )
    (said,) = (
        text for text in reduce(made, monte_carlo=False).cautions if text.startswith("The head rises at")
    )
    assert "in run 1 (K = −0." in said
    assert "which no loss can do" in said


def test_a_constant_k_has_no_trend():
    found = reduce(with_falling_k(0.0))
    assert not found.losses["depends_on_reynolds"].item()
    assert not any(text.startswith("K of 'fitting 1'") for text in found.cautions)


def test_the_equivalent_length_is_k_d_over_f_with_an_uncertainty_that_its_scatter_bears_out():
    """The standard deviation over simulated surveys, every input drawn, against the mean of what is stated."""
    stated = Uncertainties(
        reading=1e-3, flow=0.01, flow_scale=0.02, chainage=2e-3, temperature=0.2, temperature_run=0.05
    )
    rng = np.random.default_rng(8)
    lengths, us = [], []
    for _ in range(50):
        survey, _ = make_survey(
            rng,
            chainage=TAPS,
            reaches=[NominalReach(0.0, 5.5, 0.0266, 2e-5, 0.005 * 0.0266)],
            flows=np.geomspace(3e-4, 1.5e-3, 6),
            sigma=1e-3,
            stated=stated,
            fittings=[NominalFitting(AT, 2.0)],
        )
        found = reduce(survey, monte_carlo=False)
        row = found.fittings.iloc[0]
        # Of the runs on the law: now and then one of a hundred is called off it by chance.
        fastest = found.runs[~found.runs["run"].isin(found.flags["run"].dropna())].iloc[-1]
        assert row["equivalent_length"] == pytest.approx(
            row["loss_coefficient"] * 0.0266 / fastest["friction_factor"], rel=1e-12
        )
        lengths.append(row["equivalent_length"])
        us.append(found.losses["equivalent_length_u"].item())
    # three standard errors of a standard deviation of 50 values; K and f as if independent would give 0.3
    assert np.std(lengths) / np.mean(us) == pytest.approx(1.0, abs=0.3)


def test_a_given_k_has_no_row_beside():
    survey, _ = valved(fitting=Fitting("valve", AT, Measured(1.5)))
    found = reduce(survey)
    assert found.losses.empty
    assert found.loss_runs.empty


def test_a_valve_of_two_bores_has_a_row_for_each_run():
    survey, _ = main()
    found = reduce(survey)
    assert len(found.loss_runs) == len(survey.runs)
    assert found.losses["taps_upstream"].item() == 7
    assert found.losses["taps_downstream"].item() == 3
