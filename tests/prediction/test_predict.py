"""Prediction passes on what the fit knows: at tested flows, with shared errors, from memory and from disk."""

from __future__ import annotations

import json
import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize

import gradeline
from gradeline.errors import ReductionError, UsageError
from gradeline.fitting.posterior import LossErrors, WallPart, joint_posterior
from gradeline.fitting.wall import WallData, fit_wall, law_log_slope
from gradeline.hydraulics.friction import colebrook_white
from gradeline.prediction import predict
from gradeline.prediction.carried import Carried, CarriedWall, carried_from
from gradeline.prediction.interval import profile_interval, sets_of
from gradeline.quantities import Measured
from gradeline.reduction import reduce
from gradeline.report import write
from tests.prediction.made import made_line
from tests.simulate.surveys import NominalFitting, NominalReach, Uncertainties, make_survey

STATED = Uncertainties(reading=1e-3, flow=0.004, flow_scale=0.003, chainage=1e-3, temperature=0.2)
BORE, LENGTH = 0.0266, 5.5


def survey(*, sigma=1e-9, draw=False, seed=1, stated=STATED, rough=2e-3, **more):
    options = {
        "chainage": np.linspace(0.2, 5.3, 10),
        "reaches": [NominalReach(0.0, LENGTH, BORE, rough * BORE, 0.001 * BORE)],
        "flows": np.geomspace(3e-4, 1.5e-3, 8),
        "sigma": sigma,
        "stated": stated,
        "draw": draw,
    } | more
    return make_survey(np.random.default_rng(seed), **options)


@pytest.fixture(scope="module")
def exact():
    found, truth = survey()
    return reduce(found, monte_carlo=False), truth


@pytest.fixture(scope="module")
def noisy():
    found, truth = survey(sigma=1e-3, draw=True, seed=4)
    return reduce(found, monte_carlo=False), truth


def test_at_a_tested_flow_it_returns_the_fit(exact) -> None:
    reduction, _ = exact
    runs = reduction.runs
    found = predict(reduction, flow=runs["flow"].tolist(), temperature=288.15)
    np.testing.assert_allclose(found.reaches["slope"], runs["slope"], rtol=2e-5)
    np.testing.assert_allclose(found.flows["head_loss"], runs["slope"] * LENGTH, rtol=2e-5)
    np.testing.assert_allclose(found.reaches["roughness"], reduction.walls["roughness"].iloc[0], rtol=1e-9)
    assert (found.reaches["beyond"] == 1).all()


def test_with_scatter_it_returns_the_law_at_the_fitted_roughness(noisy) -> None:
    """Shared errors, as the runs show them, move it by less than a fifth of its uncertainty."""
    reduction, _ = noisy
    found = predict(reduction, flow=reduction.runs["flow"].tolist(), temperature=288.15)
    rows = found.reaches
    law = rows["friction_factor"] * rows["velocity"] ** 2 / (2 * reduction.gravity * BORE) * LENGTH
    width = rows["head_loss_high"] - rows["head_loss_low"]
    assert (abs(rows["head_loss"] - law) < 0.2 * width).all()
    rough = reduction.walls["roughness"].iloc[0] / BORE
    np.testing.assert_allclose(rows["friction_factor"], colebrook_white(rows["reynolds"], rough), rtol=1e-12)


def test_an_error_of_the_bore_cancels() -> None:
    """Ten times the uncertainty of the bore makes that of ε many times larger, and that of the head loss hardly."""
    fine, coarse = (
        predict(
            reduce(
                survey(reaches=[NominalReach(0.0, LENGTH, BORE, 2e-3 * BORE, u * BORE)])[0], monte_carlo=False
            ),
            flow="0.8 L/s",
        )
        for u in (0.0005, 0.005)
    )
    widths = [
        float((one.flows["head_loss_high"] - one.flows["head_loss_low"]).iloc[0]) for one in (fine, coarse)
    ]
    assert widths[1] == pytest.approx(widths[0], rel=0.1)


def test_the_interval_is_that_of_a_search_by_hand() -> None:
    """The largest and least ln S with χ²(ε, u) <= t², searched for in ε and u without any elimination."""
    velocity = np.linspace(0.8, 3.0, 8)[:, None]
    rng = np.random.default_rng(5)
    data = WallData(
        slope=np.full((8, 1), np.nan),
        slope_covariance=np.full((8, 1, 1), 1e-7),
        velocity=velocity,
        diameter=np.array([0.05]),
        kinematic_viscosity=np.full(8, 1.0e-6),
        gravity=9.81,
        flow_u=np.full(8, 0.004),
        own_slope_effect=np.zeros((8, 1)),
        viscosity_u=np.zeros(8),
        slope_effect=np.zeros((8, 1, 2)),
        diameter_effect=np.array([[0.002, 0.0]]),
        flow_effect=np.array([0.0, 0.003]),
        viscosity_effect=np.zeros((8, 2)),
        gravity_effect=np.zeros(2),
    )
    law = law_log_slope(data, 3e-5)
    data = replace(data, slope=np.exp(law + 0.01 * rng.standard_normal(law.shape)))
    fit = fit_wall(data, np.isfinite(data.slope))
    none = LossErrors(np.zeros((0, 0)), np.zeros((0, 2)), np.zeros((8, 1, 0)), np.zeros((8, 0)))
    kept = joint_posterior(data, [WallPart(np.array([0]), data, fit)], np.array([0]), none)
    wall = CarriedWall(
        "pipe",
        fit.roughness,
        fit.low,
        fit.high,
        True,
        1.0,
        1.0,
        math.nan,
        *(one[0] for one in (kept.roughness, kept.score, kept.mean)),
        None,
    )
    base = carried_from(made_line(diameter=0.05, length=1.0, density=998.0, kinematic_viscosity=1e-6))
    carried: Carried = replace(base, walls=(wall,), covariance=kept.covariance)
    sets = sets_of(carried)

    def law_at(rough, bore_change, flow=0.004):
        bore = 0.05 * (1 + bore_change)
        speed = flow / (np.pi / 4 * bore**2)
        f = colebrook_white(speed * bore / 1e-6, np.maximum(rough, 0.0) / bore)
        return float(np.log(f * speed**2 / (2 * 9.81 * bore)))

    def log_slope(rough):
        return law_at(rough, 0.0)

    heads = np.array([[log_slope(one)] for one in sets.roughness[:, 0]])
    step = 1e-4
    by_bore = np.array(
        [[[0.002 * (law_at(one, step) - law_at(one, -step)) / (2 * step)]] for one in sets.roughness[:, 0]]
    )
    value, low, high = profile_interval(
        heads + np.einsum("cnz,cz->cn", by_bore, sets.mean), by_bore, sets, kept.covariance
    )

    # everything by hand: errors of bore and flow scale act on the law, own flows and scatter are random
    f0 = fit.roughness
    reynolds = velocity[:, 0] * 0.05 / 1e-6

    def misfit(x):
        rough, bore, scale = x[0] * 1e-5, x[1], x[2]
        expected = np.array(
            [law_at(rough, 0.002 * bore, one * np.pi / 4 * 0.05**2) for one in velocity[:, 0]]
        )
        by_flow = 2 + _by_reynolds(reynolds, f0 / 0.05)
        residual = np.log(data.slope[:, 0]) - expected - by_flow * 0.003 * scale
        slopes = np.exp(law_log_slope(data, f0))[:, 0]
        variance = (by_flow * 0.004) ** 2 + 1e-7 / slopes**2
        return float((residual**2 / variance).sum() + bore**2 + scale**2)

    best = minimize(
        misfit, [3.0, 0.0, 0.0], method="Nelder-Mead", options={"xatol": 1e-7, "fatol": 1e-9, "maxiter": 4000}
    )
    for sign, end in ((1, low[0]), (-1, high[0])):
        found = minimize(
            lambda x, sign=sign: sign * law_at(x[0] * 1e-5, 0.002 * x[1]),
            best.x,
            method="SLSQP",
            bounds=[(0, None), (None, None), (None, None)],
            constraints={"type": "ineq", "fun": lambda x: best.fun + 1.959964**2 - misfit(x)},
            options={"maxiter": 400, "ftol": 1e-12},
        )
        width = high[0] - low[0]
        assert sign * found.fun == pytest.approx(end, abs=0.02 * width)
    assert law_at(best.x[0] * 1e-5, 0.002 * best.x[1]) == pytest.approx(value[0], abs=0.02 * width)


def _by_reynolds(reynolds, relative):
    step = 1e-5
    up, down = (np.log(colebrook_white(reynolds * (1 + s), relative)) for s in (step, -step))
    return (up - down) / (2 * step)


def test_the_same_from_disk(noisy, tmp_path) -> None:
    reduction, _ = noisy
    write(reduction, tmp_path / "out", formats=("json",))
    text = (tmp_path / "out" / "carried.json").read_text()
    assert "NaN" not in text
    assert "Infinity" not in text
    assert list(json.loads(text)) == sorted(json.loads(text))
    here = predict(reduction, flow="0.3 to 2 L/s", available_head="2 m")
    for source in (tmp_path / "out", tmp_path / "out" / "reduction.json", str(tmp_path / "out")):
        there = predict(source, flow="0.3 to 2 L/s", available_head="2 m")
        for name in ("flows", "reaches", "grade_lines", "capacity"):
            assert getattr(there, name).equals(getattr(here, name))


def test_the_capacity_loses_the_head(noisy) -> None:
    reduction, _ = noisy
    row = predict(reduction, available_head="3 m", static_head="1.2 m").capacity.iloc[0]
    at = predict(reduction, flow=[row["flow"], row["flow_low"], row["flow_high"]], static_head="1.2 m").flows
    assert at["pump_head"].iloc[0] == pytest.approx(3.0, rel=1e-6)
    assert at["pump_head_high"].iloc[1] == pytest.approx(3.0, rel=1e-6)
    assert at["pump_head_low"].iloc[2] == pytest.approx(3.0, rel=1e-6)


@pytest.mark.parametrize("share", [1.001, 1.05, 1.2, 1.5, 1.9])
def test_a_head_in_the_jump_at_the_end_of_laminar_flow_has_no_capacity(share: float) -> None:
    bore, viscosity, length = 0.04, 1e-6, 10.0
    line = made_line(diameter=bore, length=length, density=998.0, kinematic_viscosity=viscosity)
    # Hagen and Poiseuille at Re 2000, by hand: h = 32 ν L V / (g D²).
    last = 32 * viscosity * length * (2000 * viscosity / bore) / (9.81 * bore**2)
    row = predict(line, available_head=share * last, roughness="0.1 mm").capacity.iloc[0]
    assert math.isnan(row["flow"])
    assert "critical zone" in row["reason"]
    below = predict(line, available_head=0.999 * last, roughness="0.1 mm").capacity.iloc[0]
    assert below["flow"] == pytest.approx(0.999 * 2000 * viscosity / bore * math.pi / 4 * bore**2, rel=1e-9)


def test_a_capacity_beyond_what_was_tested_is_said_beside_tested_flows(exact) -> None:
    found = predict(exact[0], flow="1 L/s", available_head="200 m")
    assert found.capacity["flow"].iloc[0] > exact[0].runs["flow"].max()
    assert not found.flows["extrapolated"].any()
    (caution,) = (text for text in found.cautions if "the highest tested" in text)
    assert caution.startswith("Reach 'reach 1': Re ")


def test_the_friction_law_widens_it(exact) -> None:
    found, _ = survey()
    plain = predict(exact[0], flow="0.8 L/s").flows.iloc[0]
    stated = replace(found, stated=replace(found.stated, friction_law=0.02))
    wide = predict(reduce(stated, monte_carlo=False), flow="0.8 L/s")
    row = wide.flows.iloc[0]
    widths = [(one["head_loss_high"] - one["head_loss_low"]) / one["head_loss"] / 2 for one in (plain, row)]
    assert math.sqrt(widths[1] ** 2 - widths[0] ** 2) == pytest.approx(1.96 * 0.02, rel=0.02)
    assert any("the friction law (2 % of f, as the survey states it)" in text for text in wide.assumptions)
    said = predict(exact[0], flow="0.8 L/s").assumptions
    assert any(
        "The friction law is taken as exact, since the survey states no friction_law" in text for text in said
    )


def test_beyond_the_tested_reynolds_numbers_it_says_by_how_much(exact) -> None:
    reduction, _ = exact
    highest = reduction.runs["reynolds"].max()
    found = predict(reduction, flow=[3.0e-3], temperature=288.15)
    row = found.reaches.iloc[0]
    assert row["beyond"] == pytest.approx(row["reynolds"] / highest)
    assert bool(found.flows["extrapolated"].iloc[0])
    (caution,) = (text for text in found.cautions if "tested" in text)
    assert caution.startswith(
        "Reach 'reach 1': Re 126\u202f000 at 3 L/s is 2 times the highest tested (63\u202f100)"
    )


def test_what_if_takes_the_roughness_given(exact) -> None:
    reduction, _ = exact
    given = predict(
        reduction, flow=[1e-3], temperature=288.15, walls={"wall": "0.4 mm +/- 0.1 mm"}
    ).reaches.iloc[0]
    f = colebrook_white(given["reynolds"], 0.4e-3 / BORE)
    assert given["friction_factor"] == pytest.approx(float(f), rel=1e-12)
    assert math.isnan(given["beyond"])
    bare = predict(reduction, flow=[1e-3], temperature=288.15, roughness="0.4 mm").reaches.iloc[0]
    higher = colebrook_white(given["reynolds"], 0.41e-3 / BORE)
    u = (higher / f - 1) * 10 * given["head_loss"]
    half = [(one["head_loss_high"] - one["head_loss_low"]) / 2 for one in (given, bare)]
    assert math.sqrt(half[0] ** 2 - half[1] ** 2) == pytest.approx(1.96 * u, rel=0.05)


def test_a_slope_that_follows_another_bore_than_the_stated_one_is_told(exact) -> None:
    main = reduce(gradeline.read_survey("data_demo/cast_main"), monte_carlo=False)
    found = predict(main, flow="65 L/s")
    bores = np.array([0.254, 0.203])
    stated = found.reaches["friction_factor"] * found.reaches["velocity"] ** 2 / (2 * main.gravity * bores)
    most = float((found.reaches["slope"] / stated - 1).abs().max())
    assert most > 0.005
    (said,) = (text for text in found.assumptions if "f V²/2gD" in text)
    assert f"differs from S by up to {100 * most:.2g} %" in said
    # As the runs have it: the measured slopes are met within their uncertainties.
    run = main.runs[main.runs["run"] == "5"]
    off = (found.reaches["slope"].to_numpy() - run["slope"].to_numpy()) / run["slope_u"].to_numpy()
    assert np.abs(off).max() < 2
    assert not any("f V²/2gD" in text for text in predict(exact[0], flow="1 L/s").assumptions)


def test_against_a_new_pipe(exact) -> None:
    reduction, _ = exact
    asked = {"flow": [1e-3], "temperature": 288.15}
    found = predict(reduction, **asked, new_pipe="0.0015 mm", hours=4000, efficiency="70 %")
    row = found.new_pipe.iloc[0]
    smooth = predict(reduction, **asked, roughness="0.0015 mm").flows["head_loss"].iloc[0]
    rough = found.flows["head_loss"].iloc[0]
    assert row["head_loss_new"] == pytest.approx(smooth, rel=1e-9)
    assert row["extra_head"] == pytest.approx(rough - smooth, rel=1e-9)
    # water of 15 °C: 999.1 kg/m³ (IAPWS-95)
    energy = 999.1 * reduction.gravity * 1e-3 * (rough - smooth) / 0.7 * 4000 * 3600
    assert row["extra_energy"] == pytest.approx(energy, rel=1e-4)
    assert row["extra_head_low"] < row["extra_head"] < row["extra_head_high"]
    by_name = predict(reduction, **asked, new_pipe="drawn tubing")
    assert by_name.new_pipe["head_loss_new"].iloc[0] == pytest.approx(row["head_loss_new"], rel=1e-9)


def test_a_fitting_and_two_bores_add_up_and_bend_the_lines() -> None:
    found, truth = survey(
        reaches=[
            NominalReach(0.0, 2.7, BORE, 2e-3 * BORE, 0.001 * BORE),
            NominalReach(2.7, LENGTH, 0.0350, 2e-3 * BORE, 0.001 * BORE),
        ],
        chainage=[0.2, 0.5, 0.8, 1.1, 1.4, 1.85, 2.1, 2.35, 2.6, 3.2, 3.7, 4.2, 4.7, 5.2],
        fittings=[
            NominalFitting(1.5, 2.0),
            NominalFitting(2.7, 0.1786, Measured(0.1786, 0.01), change_of_bore=True),
        ],
    )
    flow = 1.1e-3
    prediction = predict(reduce(found, monte_carlo=False), flow=[flow], temperature=288.15, end_head=0.0)
    row = prediction.flows.iloc[0]
    parts = prediction.reaches["head_loss"].sum() + prediction.fittings["head_loss"].sum()
    assert row["head_loss"] == pytest.approx(parts, rel=1e-12)
    lines = prediction.grade_lines
    at = lines["chainage"].to_numpy()
    # the heads of the simulated line, with no reading in between
    true = truth.line.heads(np.clip(at, 0, LENGTH), np.array([flow]), truth.viscosity[:1])[0]
    twice = np.append(at[1:] == at[:-1], False)
    alone = ~twice & ~np.append(False, twice[:-1])
    np.testing.assert_allclose(
        (lines["piezometric_head"] - lines["piezometric_head"].iloc[-1])[alone],
        (true - true[-1])[alone],
        atol=2e-4,
    )
    assert lines["energy_head"].is_monotonic_decreasing
    valve = prediction.fittings.iloc[0]
    speed = flow / (np.pi / 4 * BORE**2)
    assert valve["head_loss"] == pytest.approx(2.0 * speed**2 / (2 * 9.80665), rel=2e-3)


def test_laminar_flow_needs_no_wall() -> None:
    line = made_line(diameter=0.04, length=10.0, density=900.0, kinematic_viscosity=1e-4)
    assert predict(line, flow="0.1 L/s").reaches["friction_factor"].iloc[0] > 0
    with pytest.raises(
        UsageError, match=r"wall 'pipe' has no roughness \(made by hand\); state one with --wall pipe=0.1mm"
    ):
        predict(line, flow="20 L/s")


def test_no_law_in_the_critical_zone() -> None:
    line = made_line(diameter=0.04, length=10.0, density=998.0, kinematic_viscosity=1e-6)
    flow = 3000 * 1e-6 * np.pi / 4 * 0.04
    found = predict(line, flow=[flow], roughness="0.1 mm")
    assert math.isnan(found.flows["head_loss"].iloc[0])
    assert "critical zone" in found.flows["reason"].iloc[0]
    (caution,) = (text for text in found.cautions if "between 2000 and 4000" in text)
    # Laminar f = 64/3000; turbulent by substituting f again and again into Colebrook's implicit law
    # (J. Inst. Civ. Eng. 11 (1939) 133), 1/√f = −2 log₁₀(ε/(3.7 D) + 2.51/(Re √f)).
    swift = 0.04
    for _ in range(100):
        swift = (-2 * math.log10(0.0025 / 3.7 + 2.51 / (3000 * math.sqrt(swift)))) ** -2
    assert f"f from 0.0213 to {swift:.3g}" in caution
    row = found.reaches.iloc[0]
    assert row["reason"].endswith("the interval runs from laminar to turbulent flow")
    # Hagen and Poiseuille by hand: h = 32 ν L V/(g D²), V = Re ν/D; and Darcy with the turbulent f.
    speed = 3000 * 1e-6 / 0.04
    assert row["head_loss_low"] == pytest.approx(32 * 1e-6 * 10 * speed / (9.81 * 0.04**2), rel=1e-9)
    assert row["head_loss_high"] == pytest.approx(swift * 10 / 0.04 * speed**2 / (2 * 9.81), rel=1e-9)
    assert found.flows["head_loss_high"].iloc[0] == pytest.approx(row["head_loss_high"])
    assert math.isnan(row["head_loss"])
    assert math.isnan(row["friction_factor"])


def test_a_critical_reach_leaves_the_loss_of_the_others(exact) -> None:
    found = predict(exact[0], flow=[1e-5 * n for n in range(1, 30)])
    regimes = found.reaches["regime"].to_numpy(str)
    assert {"laminar", "critical", "turbulent"} <= set(regimes)
    told = found.reaches["head_loss"].notna().to_numpy(bool)
    np.testing.assert_array_equal(told, regimes != "critical")
    flows = found.flows.set_index("flow")
    assert (flows["head_loss"].notna() | flows["reason"].notna()).all()
    assert (flows["head_loss_low"] < flows["head_loss_high"]).all()


def test_nothing_stated_is_no_interval() -> None:
    line = made_line(diameter=0.04, length=10.0, density=998.0, kinematic_viscosity=1e-6)
    row = predict(line, flow="2 L/s", roughness="0.1 mm").flows.iloc[0]
    assert math.isnan(row["head_loss_low"])
    assert row["reason"] == "nothing is stated that would make it uncertain"


def test_a_measured_head_loss_widens_it(noisy) -> None:
    reduction, _ = noisy
    bare = predict(reduction, flow=[8e-4]).flows.iloc[0]
    wide = predict(reduction, flow=[8e-4], head_loss_u="20 mm").flows.iloc[0]
    half = (wide["head_loss_high"] - wide["head_loss_low"]) / 2
    assert half == pytest.approx(
        math.hypot((bare["head_loss_high"] - bare["head_loss_low"]) / 2, 1.96 * 0.02), rel=0.01
    )


def test_it_shows_itself_in_a_notebook(noisy) -> None:
    found = predict(noisy[0], flow="0.8 L/s", new_pipe="0.0015 mm")
    shown = found._repr_html_()
    assert shown.startswith("<p><strong>Simulated bench: prediction</strong><br>1 flow")
    assert "<th>new pipe (m)</th>" in shown
    assert repr(found) == "Prediction('Simulated bench', 1 flow)"
    assert gradeline.predict is predict


@pytest.mark.parametrize(
    ("asked", "said"),
    [
        ({}, "nothing to predict: give a flow, such as '12 L/s', or an available head, such as '14 m'"),
        ({"flow": "12 m"}, "flow: the unit 'm' is a length, not a flow; give a unit such as L/s"),
        ({"flow": "-1 L/s"}, "flow: has to be above 0; found '-1 L/s'"),
        (
            {"flow": "1 L/s +/- 0.1 L/s"},
            "flow: give the value alone, without an uncertainty; found '1 L/s +/- 0.1 L/s'",
        ),
        (
            {"flow": "1 L/s", "static_head": "2.0(1) m"},
            "static head: give the value alone, without an uncertainty",
        ),
        ({"flow": "5 to 2 L/s"}, "flow: a range rises from its first value to its last; found '5 to 2 L/s'"),
        ({"flow": "5 L/s", "steps": 3}, "steps: they divide a range of flows"),
        ({"flow": "1 to 2 L/s", "steps": 1}, "steps: a range takes from 2 to 100000 flows; found 1"),
        ({"flow": [0.001, float("nan")]}, "flow: every flow has to be a number above 0, in m³/s"),
        (
            {"flow": "1 L/s", "temperature": "150 degC"},
            "temperature: the properties of water are known from 0 to 100 °C",
        ),
        ({"flow": "1 L/s", "roughness": "5 mm"}, "roughness: lies from 0 to a tenth of the bore (2.66 mm)"),
        ({"flow": "1 L/s", "walls": {"wal": "1 mm"}}, "wall: there is no wall 'wal'; did you mean 'wall'?"),
        (
            {"flow": "1 L/s", "new_pipe": "marble"},
            "new roughness: no listed surface has 'marble' in its name",
        ),
        (
            {"flow": "1 L/s", "new_pipe": "cast iron,"},
            "new roughness: several surfaces have 'cast iron,' in its name",
        ),
        (
            {"flow": "1 L/s", "new_pipe": "published"},
            "the survey states no published roughness of wall 'wall'",
        ),
        (
            {"flow": "1 L/s", "hours": 100.0},
            "hours: they count for the energy that is lost beyond a new pipe",
        ),
        (
            {"flow": "1 L/s", "hours": 9000.0, "new_pipe": 1e-5},
            "hours: a year has up to 8784 of them; found 9000",
        ),
        (
            {"flow": "1 L/s", "efficiency": "170 %"},
            "efficiency: lies above 0 and up to 1 (or 100 %); found '170 %'",
        ),
        (
            {"available_head": "1 m", "static_head": "2 m"},
            "available head: has to exceed the static head of 2 m; found 1 m",
        ),
        (
            {"flow": "1 L/s", "static_head": "-40 m"},
            "static head: is what the pump lifts, 0 or above; found '-40 m'",
        ),
        (
            {"flow": "1 L/s", "offtakes": {"x": "1 L/s"}},
            "off-take: there is no off-take 'x'; the survey has none; leave it out",
        ),
    ],
)
def test_what_cannot_be_asked(exact, asked, said) -> None:
    with pytest.raises(UsageError) as told:
        predict(exact[0], **asked)
    assert said in str(told.value)


@pytest.mark.parametrize("asked", ["galvanized steel, ordinary", "Galvanised steel, ordinary"])
def test_a_surface_in_british_or_american_spelling(exact, asked) -> None:
    """Idelchik 2007: 0.1 to 0.15 mm, of which the geometric mean is taken."""
    found = predict(exact[0], flow="1 L/s", new_pipe=asked)
    (said,) = (text for text in found.assumptions if text.startswith("New pipe: galvanized steel, ordinary"))
    assert f"ε = {math.sqrt(0.1 * 0.15):.3g} mm" in said


def test_a_refused_surface_names_the_nearest_and_where_the_list_is(exact) -> None:
    with pytest.raises(UsageError) as told:
        predict(exact[0], flow="1 L/s", new_pipe="shiny steel")
    assert len(str(told.value)) < 330
    assert "commercial steel or wrought iron" in str(told.value)
    assert "README.md" in str(told.value)


def test_tested_reynolds_numbers_are_those_of_each_reach() -> None:
    """Re = 4 Q/(π D ν): of one flow it goes as 1/D."""
    reaches = [
        NominalReach(0.0, 10.0, 0.06, 1e-4, wall="iron"),
        NominalReach(10.0, 20.0, 0.04, 1e-4, wall="iron"),
    ]
    found, _ = survey(
        chainage=np.array([0.5, 3.0, 6.0, 9.0, 11.0, 14.0, 17.0, 19.5]),
        reaches=reaches,
        flows=np.geomspace(1e-3, 4e-3, 5),
    )
    reduction = reduce(found, monte_carlo=False)
    rows = predict(reduction, flow="2 L/s").reaches
    for end, function in (("low", min), ("high", max)):
        for row in rows.to_dict("records"):
            own = reduction.runs[reduction.runs["reach"] == row["reach"]]
            assert row[f"tested_reynolds_{end}"] == pytest.approx(function(own["reynolds"]), rel=1e-9)
    wide, narrow = rows["tested_reynolds_high"]
    assert narrow / wide == pytest.approx(0.06 / 0.04)


def test_an_interval_of_flows_that_ends_in_the_critical_zone_is_said(exact) -> None:
    reduction, _ = exact
    # Just above Re 4000 at the middle, an uncertain roughness of the wall lets the lower end fall below.
    viscosity = reduction.runs["kinematic_viscosity"].iloc[0]
    flow = 4010 * np.pi * BORE * viscosity / 4
    head = predict(reduction, flow=flow, temperature=288.15).flows["head_loss"].iloc[0]
    row = predict(
        reduction, available_head=float(head), temperature=288.15, head_loss_u=0.02 * head
    ).capacity.iloc[0]
    assert 4 * row["flow_low"] / (np.pi * BORE * viscosity) < 4000
    assert row["reason"] == (
        "the lower end, that of turbulent flow, lies in the critical zone (Re 2000 to 4000), where no law of friction holds"
    )


def test_what_is_no_reduction(tmp_path) -> None:
    for make, said in (
        (
            lambda: tmp_path / "none",
            "does not exist; give the folder that gradeline reduce wrote, or its reduction.json",
        ),
        (lambda: tmp_path, "carried.json is missing; give the folder that gradeline reduce wrote"),
    ):
        with pytest.raises(ReductionError) as told:
            predict(make(), flow="1 L/s")
        assert said in str(told.value)
    (tmp_path / "survey.toml").write_text("")
    with pytest.raises(ReductionError, match="reduce the survey first: gradeline reduce"):
        predict(tmp_path, flow="1 L/s")
    (tmp_path / "carried.json").write_text("[1")
    with pytest.raises(ReductionError, match=r"cannot be read .*; reduce the survey again"):
        predict(tmp_path, flow="1 L/s")
    (tmp_path / "carried.json").write_text('{"version": 99}')
    with pytest.raises(ReductionError, match="is of a newer form"):
        predict(tmp_path, flow="1 L/s")
    (tmp_path / "carried.json").write_text('{"version": 1}')
    with pytest.raises(ReductionError, match=r"is not what gradeline reduce writes \(KeyError: 'reaches'\)"):
        predict(tmp_path, flow="1 L/s")


def test_an_offtake_leaves_less_flow_downstream() -> None:
    """Laminar, so that the loss goes as the flow: half of it gone at mid-line leaves three quarters of the loss."""
    line = made_line(diameter=0.04, length=10.0, density=900.0, kinematic_viscosity=1e-4)
    first = line["reaches"][0]
    line["reaches"] = [first | {"end": 5.0}, first | {"reach": "beyond", "start": 5.0}]
    line["offtakes"] = [{"offtake": "north", "at": 5.0}]
    shut = predict(line, flow="0.1 L/s")
    half = predict(line, flow="0.1 L/s", offtakes={"north": "0.05 L/s"})
    assert half.flows["head_loss"].iloc[0] == pytest.approx(0.75 * shut.flows["head_loss"].iloc[0], rel=1e-12)
    assert "Off-take 'north' is shut; --offtake north=Q takes a flow there." in shut.assumptions
    with pytest.raises(UsageError, match=r"has to exceed what the off-takes take \(0.2 L/s\); found 0.1 L/s"):
        predict(line, flow="0.1 L/s", offtakes={"north": "0.2 L/s"})


def test_the_friction_within_a_fitting_counts_once() -> None:
    """K of a fitting with a length holds the friction of that length, so the straight pipe is shorter by it."""
    line = made_line(
        diameter=0.05, length=10.0, density=998.0, kinematic_viscosity=1e-6, fittings=(("bend", 5.0, 2.0),)
    )
    line["fittings"][0]["taken_off"] = [0.4]
    found = predict(line, flow="4 L/s", roughness="0.1 mm")
    row, speed = found.reaches.iloc[0], 4e-3 / (math.pi / 4 * 0.05**2)
    slope = row["friction_factor"] * speed**2 / (2 * 9.81 * 0.05)
    assert row["head_loss"] == pytest.approx(9.6 * slope, rel=1e-12)
    assert found.flows["head_loss"].iloc[0] == pytest.approx(
        9.6 * slope + 2.0 * speed**2 / (2 * 9.81), rel=1e-12
    )
    assert found.grade_lines["energy_head"].iloc[0] - found.grade_lines["energy_head"].iloc[
        -1
    ] == pytest.approx(found.flows["head_loss"].iloc[0], rel=1e-12)
