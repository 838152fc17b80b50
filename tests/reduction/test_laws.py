"""A survey read as a hydraulics laboratory would: laws, critical velocities, surfaces, C and n, drift of the zeros."""

from __future__ import annotations

from dataclasses import replace
from unittest.mock import patch

import numpy as np
import pandas as pd
import pytest

from gradeline.hydraulics.friction import colebrook_white
from gradeline.hydraulics.sand_grain import sand_grain
from gradeline.quantities import Measured
from gradeline.reduction import reduce
from gradeline.reduction.surfaces import known_surfaces
from gradeline.reduction.transition import flow_states
from gradeline.survey import WallHistory
from tests.reduction.benches import FAST, KELVIN, TAPS, TUBE, tube
from tests.simulate.surveys import NominalReach, Uncertainties
from tests.simulate.water import kinematic_viscosity

STATED = Uncertainties(reading=4e-4, flow=2e-3)
#: In the tube's bore, ε⁺ from 2 to 30: across the dip of the sand.
ACROSS = tuple(np.geomspace(1.5e-4, 2.5e-3, 9))


def said(reduction, kind="law"):
    return reduction.flags["suggestion"][(reduction.flags["kind"] == kind).to_numpy(bool)].tolist()


def reduced(*arguments, **more):
    survey, _ = tube(*arguments, **more)
    return reduce(survey, monte_carlo=False)


def test_a_commercial_wall_and_one_of_sand_are_told_apart():
    plain = reduced(ACROSS, sigma=4e-4, stated=STATED)
    assert set(plain.laws["verdict"]) == {"Colebrook–White"}
    assert said(plain) == []
    with patch("tests.simulate.line.colebrook_white", sand_grain):
        sand = reduced(ACROSS, sigma=4e-4, stated=STATED)
    assert set(sand.laws["verdict"]) == {"sand-grain"}
    size = sand.laws.set_index("law")["roughness"]
    assert size["sand-grain"] == pytest.approx(TUBE.roughness, rel=0.05)
    (flag,) = said(sand)
    assert flag.startswith(
        "wall 'wall': f follows the transition of a sand-grain wall (ε = 0.1 mm) rather than "
    )
    assert flag.endswith(
        "roughness of one size; predictions by Colebrook–White are off between smooth and rough"
    )


def test_heads_off_in_proportion_to_the_chainage_show_as_an_intercept_and_a_static_run_takes_it_away():
    tilt = -0.004 * TAPS
    leaning = reduced(ACROSS, sigma=4e-4, stated=STATED, offsets=tilt)
    table = leaning.departures.set_index("departure").loc["intercept"]
    assert table["beyond_chance"]
    assert table["value"] == pytest.approx(0.004, abs=4 * table["value_u"])
    (flag,) = said(leaning)
    assert flag.startswith("wall 'wall': S lies above the law by the same (")
    assert "heads whose error grows with the chainage do that" in flag
    level = reduced((0.0, *ACROSS), sigma=4e-4, stated=STATED, offsets=tilt)
    assert said(level) == []
    assert not level.departures["beyond_chance"].any()
    assert any("shows only as an intercept of S against the" in text for text in leaning.assumptions)


def wrong_bore(bore_u, flow_scale):
    """A smooth tube stated 2 % too narrow: f lies a tenth below the smooth law."""
    survey, _ = tube(
        FAST,
        sigma=2e-4,
        reaches=[NominalReach(0.0, 5.5, 0.02664, 0.0)],
        stated=replace(STATED, flow_scale=flow_scale),
    )
    (reach,) = survey.reaches
    reach = replace(reach, diameter=Measured(0.98 * 0.02664, bore_u and bore_u * 0.02664))
    return reduce(replace(survey, reaches=(reach,)), monte_carlo=False)


def test_f_below_the_smooth_law_says_which_error_is_the_likelier():
    below = "would bring it onto the law; "
    (one,) = said(wrong_bore(None, 0.02))
    assert one.endswith(
        " times the standard uncertainty stated of the flow; that of the bore was not stated, so nothing tells which is the "
        "likelier"
    )
    bore, flow = wrong_bore(0.006, 0.004), wrong_bore(0.002, 0.02)
    (of_bore,), (of_flow,) = said(bore), said(flow)
    assert below + "the bore would be off by" in of_bore
    assert ": the bore is the likelier" in of_bore
    assert below + "the flow would be off by" in of_flow
    assert ": the flow is the likelier" in of_flow
    # 2 % of the bore, and what 10 % of f are of the flow: f goes as D⁵/Q², the law as Re^-0.2 or so.
    assert "a bore about 2" in of_bore


def test_neither_error_stated_is_said():
    survey, _ = tube(FAST, sigma=2e-4, reaches=[NominalReach(0.0, 5.5, 0.02664, 0.0)])
    (reach,) = survey.reaches
    narrow = replace(survey, reaches=(replace(reach, diameter=Measured(0.98 * 0.02664)),))
    (flag,) = said(reduce(narrow, monte_carlo=False))
    assert flag.endswith("; neither uncertainty was stated, so nothing tells which is the likelier")


# -- critical velocities -------------------------------------------------------------------------------------------------


def turning(at):
    """f that is laminar up to a Reynolds number and turbulent beyond."""

    def friction_factor(reynolds, relative):
        re = np.asarray(reynolds, float)
        with np.errstate(divide="ignore"):
            laminar = np.where(re > 0, 64 / re, np.nan)
        return np.where(re <= at, laminar, colebrook_white(np.maximum(re, 1.0), relative))

    return friction_factor


def flow_at(reynolds):
    return np.asarray(reynolds) * float(kinematic_viscosity(np.array([KELVIN]))[0]) * np.pi * 0.02664 / 4


RE = np.array([1000, 1500, 1900, 2200, 2500, 2800, 3100, 3600, 4500, 9000, 20000])


def swept(at, direction, prefix):
    with patch("tests.simulate.line.friction_factor", turning(at)):
        survey, _ = tube(tuple(flow_at(RE)), sigma=1e-6, stated=Uncertainties(reading=1e-6))
    names = [f"{prefix}{number}" for number in range(1, len(RE) + 1)]
    tables = {
        name: getattr(survey, name).set_axis(pd.Index(names, name="run"))
        for name in ("readings", "repeats", "spreads")
    }
    return replace(survey, runs=survey.runs.assign(run=names, direction=direction), **tables)


def test_rising_and_falling_flows_turn_at_velocities_of_their_own():
    up, down = swept(2850, "rising", "u"), swept(2300, "falling", "d")
    both = replace(
        up,
        **{
            name: pd.concat([getattr(up, name), getattr(down, name)], ignore_index=name == "runs")
            for name in ("runs", "readings", "repeats", "spreads")
        },
    )
    table = reduce(both, monte_carlo=False).transition.set_index("direction")
    for direction, (low, high) in {"rising": (2800, 3100), "falling": (2200, 2500)}.items():
        row = table.loc[direction]
        for which in ("lower", "upper"):
            assert row[f"{which}_reynolds_from"] == pytest.approx(low, rel=2e-3)
            assert row[f"{which}_reynolds_to"] == pytest.approx(high, rel=2e-3)
        assert row["lower_from"] == pytest.approx(flow_at(low) / (np.pi * 0.02664**2 / 4), rel=2e-3)
        assert row["laminar_runs"] + row["turbulent_runs"] == len(RE)


def test_runs_between_the_laws_leave_two_brackets():
    """The simulator's own f runs straight from 64/2000 to the turbulent law at Re 4000."""
    survey, _ = tube(tuple(flow_at(RE)), sigma=1e-6, stated=Uncertainties(reading=1e-6))
    (row,) = reduce(survey, monte_carlo=False).transition.to_dict("records")
    assert row["direction"] == "not stated"
    # Just above Re 2000 f is still within 5 % of 64/Re or not: the last laminar run is that of Re 1900.
    assert row["lower_reynolds_from"] == pytest.approx(1900, rel=2e-3)
    assert row["lower_reynolds_to"] == pytest.approx(2200, rel=2e-3)
    assert row["upper_reynolds_to"] <= 4500 * 1.002
    assert row["upper_reynolds_from"] >= 3000
    assert row["lower_to"] < row["upper_to"]


def test_runs_on_one_side_have_no_critical_velocity():
    assert reduced(FAST).transition.empty


def test_measured_pipe_flow_is_laminar_and_turbulent_where_it_was():
    """McKeon, Swanson, Zagarola, Donnelly and Smits, J. Fluid Mech. 511 (2004) 41: the data as `fluids` carries them."""
    friction = pytest.importorskip("fluids.friction")
    reynolds, factor = np.array(friction.oregon_Res), np.array(friction.oregon_fd_smooth)
    states = flow_states(factor, np.full(len(factor), 0.01), reynolds, 64.0, colebrook_white(reynolds, 0.0))
    assert (states[reynolds >= 3264] == 1).all()  # within 4.6 % of the smooth law from there on
    assert not (states[reynolds > 2500] == -1).any()
    assert not (states[reynolds < 2000] == 1).any()
    slow = (reynolds > 86) & (reynolds < 672)
    assert (states[slow] == -1).mean() > 0.9  # +1 to +5.3 % above 64/Re


# -- surfaces and what was stated of the wall ---------------------------------------------------------------------------


def test_published_values_in_feet_and_in_millimetres_agree():
    """Moody's chart (Trans. ASME 66, 1944, from memory) gives feet: 0.00015 ft of commercial steel, and so on."""
    feet = {
        "drawn tubing": (5e-6, 5e-6),
        "commercial steel": (1.5e-4, 1.5e-4),
        "asphalted cast iron": (4e-4, 4e-4),
        "galvanized iron": (5e-4, 5e-4),
        "cast iron": (8.5e-4, 8.5e-4),
        "wood stave": (6e-4, 3e-3),
        "concrete": (1e-3, 1e-2),
        "riveted steel": (3e-3, 3e-2),
    }
    moody = {one.name: one for one in known_surfaces() if one.source == "Moody 1944"}
    assert len(moody) == len(feet)
    for name, (low, high) in feet.items():
        one = next(surface for full, surface in moody.items() if full.split(" (")[0].startswith(name))
        assert (one.low, one.high) == pytest.approx((0.3048 * low, 0.3048 * high), rel=0.03)


def test_published_ranges_are_those_that_fluids_carries():
    """I. E. Idelchik, Handbook of Hydraulic Resistance, as the library `fluids` transcribed it; in m."""
    table = pytest.importorskip("fluids.friction").HHR_roughness
    listed = {(low, high) for low, high, _ in table.values()}
    idelchik = [one for one in known_surfaces() if one.source == "Idelchik 2007"]
    assert len(idelchik) > 10
    for one in idelchik:
        assert any(
            low and high and (one.low, one.high) == pytest.approx((low, high)) for low, high in listed
        ), one


def test_the_surface_of_the_walls_name_comes_first_and_an_odd_roughness_has_a_nearest_one():
    found = reduced(
        FAST, sigma=4e-4, stated=STATED, reaches=[replace(TUBE, roughness=1.2e-4, wall="cast iron pipe")]
    )
    first = found.surfaces.iloc[0]
    assert "cast iron" in first["surface"]
    assert first["agrees"]
    assert first["low"] <= 1.2e-4 <= first["high"] * 1.3
    smooth = reduced(FAST, sigma=4e-4, stated=STATED, reaches=[replace(TUBE, roughness=0.0)])
    assert smooth.walls["roughness_upper95"].iloc[0] < 1.5e-6  # smoother than the smoothest on the list
    (nearest,) = smooth.surfaces.to_dict("records")
    assert nearest["low"] == 1.5e-6
    assert not nearest["agrees"]


@pytest.mark.parametrize(
    ("stated", "verdict"),
    [
        (Measured(0.5e-4), "worse"),
        (Measured(2e-4), "better"),
        (Measured(1e-4), "not distinguishable"),
        (Measured(2e-4, 1e-6), "better"),
        (Measured(2e-4, 1e-4), "not distinguishable"),
    ],
)
def test_against_an_earlier_roughness(stated, verdict):
    """The tube has 0.1 mm, known to a few percent; the earlier one counts with its uncertainty."""
    survey, _ = tube(FAST, sigma=2e-4, stated=STATED)
    reduction = reduce(
        replace(survey, wall_histories=(WallHistory("wall", earlier=stated),)), monte_carlo=False
    )
    (row,) = reduction.roughness_checks.to_dict("records")
    assert (row["against"], row["verdict"]) == ("earlier", verdict)
    assert row["needed"] == pytest.approx(3.84, abs=0.01) or row["needed"] > 3.84


def test_a_wall_that_the_runs_do_not_tell_is_held_against_nothing():
    survey, _ = tube((1e-5, 2e-5), sigma=1e-6, stated=STATED)
    history = WallHistory("wall", published=Measured(1e-4), published_source="a handbook")
    (row,) = reduce(replace(survey, wall_histories=(history,)), monte_carlo=False).roughness_checks.to_dict(
        "records"
    )
    assert row["verdict"] is None
    assert row["reason"] == "the runs do not tell the wall's roughness"


# -- Hazen–Williams and Manning ------------------------------------------------------------------------------------------


def test_c_and_n_of_every_run_follow_their_formulas():
    survey, truth = tube(FAST)
    reduction = reduce(survey, monte_carlo=False)
    velocity = np.array(FAST) / (np.pi * 0.02664**2 / 4)
    radius = 0.02664 / 4
    slope = truth.slope[:, 0]
    found = reduction.conveyance
    # V = 0.8492 C R^0.63 S^0.54 (1.318 in feet: Vennard, Ex. 9.10), V = R^(2/3) √S / n
    assert found["hazen_williams_c"].tolist() == pytest.approx(
        (velocity / (0.8492 * radius**0.63 * slope**0.54)).tolist(), rel=1e-5
    )
    assert found["manning_n"].tolist() == pytest.approx(
        (radius ** (2 / 3) * slope**0.5 / velocity).tolist(), rel=1e-5
    )
    wall = reduction.walls.iloc[0]
    assert wall["hazen_williams_c"] == found["hazen_williams_c"].iloc[-1]
    assert wall["manning_n"] == found["manning_n"].iloc[-1]
    assert "not for a bore of 26.6 mm" in wall["reason"]
    assert "Manning's formula is meant for fully rough walls" in wall["reason"]


@pytest.mark.parametrize(
    ("stated", "bore_u", "of_c", "of_n"),
    [
        (Uncertainties(flow_scale=0.01), None, 0.01, 0.01),
        (Uncertainties(flow=0.01), None, 0.01, 0.01),
        # at a given flow V goes as D⁻²: C as D^-2.63, n as D^(8/3)
        (Uncertainties(), 0.01 * 0.02664, 0.0263, 0.02667),
    ],
)
def test_what_is_stated_of_flow_and_bore_reaches_c_and_n(stated, bore_u, of_c, of_n):
    found = reduced(FAST, stated=stated, reaches=[replace(TUBE, diameter_u=bore_u)]).conveyance
    np.testing.assert_allclose(found["hazen_williams_c_u"] / found["hazen_williams_c"], of_c, rtol=2e-3)
    np.testing.assert_allclose(found["manning_n_u"] / found["manning_n"], of_n, rtol=2e-3)


def test_slow_and_laminar_runs_have_neither():
    found = reduced().conveyance.set_index("run")["manning_n"]
    assert found[["1", "2"]].isna().all()
    assert found[["3", "6"]].notna().all()


# -- several static runs -------------------------------------------------------------------------------------------------


def between_static_runs(change, *, sigma=4e-4, seed=1):
    """Two static runs about the flowing ones; in the second the columns read `change` more, m."""
    survey, _ = tube((0.0, *FAST, 0.0), sigma=sigma, seed=seed, stated=Uncertainties(reading=sigma))
    readings = survey.readings.copy()
    readings.iloc[-1] += change
    return reduce(replace(survey, readings=readings), monte_carlo=False)


def test_a_zero_that_drifts_is_flagged_with_its_size():
    change = np.zeros(10)
    change[3] = 5e-3
    found = between_static_runs(change)
    row = found.zero_drift.set_index("tap").loc["T4"]
    assert (row["run"], row["run_2"]) == ("1", "6")
    assert row["drift"] == pytest.approx(5e-3, abs=4 * row["drift_u"])
    assert row["beyond_chance"]
    # two readings of 0.4 mm, and the median of ten taps' differences
    assert row["drift_u"] == pytest.approx(4e-4 * np.sqrt(2) * np.sqrt(1 + np.pi / 20), rel=0.25)
    (flag,) = [text for text in said(found, "tap") if "zero drifted" in text]
    assert flag.startswith("its zero drifted: in static run 6 it reads (")
    assert " more than in static run 1, against the other taps" in flag
    assert not found.zero_drift.set_index("tap")["beyond_chance"].drop("T4").any()


def test_another_level_is_no_drift():
    found = between_static_runs(0.03)
    assert not found.zero_drift["beyond_chance"].any()
    assert len(found.zero_drift) == 10


def test_sound_static_runs_are_seldom_called_drifting():
    surveys = 40
    wrong = sum(
        bool(between_static_runs(0.0, seed=seed).zero_drift["beyond_chance"].any()) for seed in range(surveys)
    )
    assert wrong <= 3  # 1 % of surveys, three standard errors above


def test_static_runs_that_agree_to_the_last_digit_tell_no_scatter():
    survey, _ = tube((0.0, 0.0), sigma=0.0)
    found = reduce(survey, monte_carlo=False)
    assert found.zero_drift["drift_u"].isna().all()
    assert found.zero_drift["beyond_chance"].isna().all()
    assert found.flags.empty


def test_one_static_run_has_no_drift():
    assert reduced((0.0, *FAST)).zero_drift.empty


# -- exponents, and the uncertainty of the law itself -------------------------------------------------------------------


def test_a_tank_that_warms_leaves_the_exponent_as_it_is():
    """Hagen–Poiseuille: S ∝ ν V, so that n = 1 at one viscosity, however the runs' temperatures go with the flow."""
    flows = tuple(flow_at([300, 600, 900, 1200]))
    found = reduced(flows, temperature=np.array([283.15, 288.15, 293.15, 298.15]), sigma=1e-9)
    (row,) = found.exponents[found.exponents["regime"] == "laminar"].to_dict("records")
    assert row["exponent"] == pytest.approx(1.0, abs=2e-3)


def test_what_is_stated_of_the_law_itself_excuses_f_below_it():
    survey, _ = tube(FAST, sigma=2e-4, reaches=[NominalReach(0.0, 5.5, 0.02664, 0.0)], stated=STATED)
    (reach,) = survey.reaches
    narrow = replace(survey, reaches=(replace(reach, diameter=Measured(0.98 * 0.02664, 1e-5)),))
    assert any("below that of a smooth wall" in text for text in said(reduce(narrow, monte_carlo=False)))
    doubted = replace(narrow, stated=replace(narrow.stated, friction_law=0.1))
    assert not any("below that of a smooth wall" in text for text in said(reduce(doubted, monte_carlo=False)))
