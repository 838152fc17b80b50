"""Flows not told from zero, and flows that no liquid has."""

import math

import numpy as np
import pytest

import gradeline
from gradeline.reduction.swift_flows import swift_cautions
from gradeline.report import summarise

from .conftest import BORE, FLOWS, PLACES, columns_of

#: 52.5 mm pipe, 30 mm throat, coefficient 0.6 and density 998 kg/m³: Δp of the plate by Bernoulli.
PLATE = '[flow]\nmethod = "nozzle"\npipe_bore = "52.5 mm"\nthroat_bore = "30 mm"\ndischarge_coefficient = "0.98"\n'


def pressure(flow):
    return 998.0 / 2 * (flow / (0.98 * math.pi / 4 * 0.03**2)) ** 2 * (1 - (30 / 52.5) ** 4)


def plate(write_flow, first, *, u=12.0, zero=9.0):
    """Five flowing runs and a first one whose differential reads `first` Pa; u and u_zero in Pa."""
    reads = [first, *(pressure(flow) for flow in FLOWS)]
    heads = [9.0 + 3e-4 * np.sin(37.0 * PLACES), *(columns_of(flow) for flow in FLOWS)]
    folder = write_flow(
        PLATE + f'u_differential = "{u} Pa"\nu_zero = "{zero} Pa"\n',
        {"differential [Pa]": [repr(float(one)) for one in reads]},
        flows=(0.0, *FLOWS),
        heads=heads,
        runs=["rest", "1", "2", "3", "4", "5"],
    )
    return gradeline.reduce(gradeline.read_survey(folder), monte_carlo=False)


def faint(reduction):
    return [text for text in reduction.cautions if "is not told from zero" in text]


def test_a_meter_at_rest_that_reads_less_than_twice_its_uncertainty(write_flow):
    """u of the reading: √(12² + 9²) = 15 Pa; Q ∝ √Δp, so 18 Pa is known to 0.833 of itself and Q to half of that, 0.417."""
    found = plate(write_flow, 18.0)
    (text,) = faint(found)
    flow = 1000 * math.sqrt(18.0 / pressure(1e-3)) * 1e-3  # L/s
    assert text.startswith(
        f"The flow of run rest, ({flow:.3f} ± {flow * 0.5 * math.hypot(12, 9) / 18:.3f}) L/s, is not told"
    )
    assert "enter 0 for the reading of the flow: the run is then a static one" in text
    (wall,) = found.walls.to_dict("records")
    assert wall["runs_used"] == 5
    assert "1 run left out: the flow is not told from zero" in wall["reason"]
    assert found.runs["reason"].iloc[0] == "the flow is not told from zero"
    assert not [one for one in found.cautions if "too gentle" in one]


def test_beyond_twice_its_uncertainty_it_flows(write_flow):
    """Of √Δp the bound is at 2 u = 30 Pa, where the flow itself is still four times its own uncertainty."""
    assert faint(plate(write_flow, 29.8))
    assert not faint(plate(write_flow, 30.2))


def test_zero_makes_it_a_static_run(write_flow):
    found = plate(write_flow, 0.0)
    assert not faint(found)
    assert found.runs["regime"].iloc[0] == "static"


@pytest.mark.parametrize(("stated", "told"), [("0.3 L/s", True), ("0.15 L/s", False)])
def test_a_flow_that_was_given(write_flow, stated, told):
    """0.4 L/s ± 0.3 is 1.3 of its uncertainties, ± 0.15 is 2.7."""
    folder = write_flow(
        "", {"flow [L/s]": [1000 * flow for flow in FLOWS]}, uncertainty=f'flow = "{stated}"\n'
    )
    found = faint(gradeline.reduce(gradeline.read_survey(folder), monte_carlo=False))
    assert bool(found) is told
    if told:
        assert found[0].startswith("The flow of run 1, (0.40 ± 0.30) L/s")


def test_a_velocity_that_no_liquid_has(write_flow):
    """60 times the flow: 1.2 L/s in 26.64 mm is 2.153 m/s, so 129 m/s; a sixtieth of it is none of a concern."""
    columns = {"flow [L/s]": [60_000 * flow for flow in FLOWS]}
    (text,) = swift_cautions(gradeline.read_survey(write_flow("", columns)))
    fastest = 60 * FLOWS[-1] / (math.pi * BORE**2 / 4)
    assert f"{fastest:.0f}" == "129"
    assert text == (
        "In 5 of 5 flowing runs the velocity in reach 'tube' is above 20 m/s, up to 129 m/s in run 5, which no liquid has "
        "in a pipe (common practice): look at the unit of the flow (is it L/min, not L/s?) and at that of the bore."
    )
    assert not swift_cautions(
        gradeline.read_survey(write_flow("", {"flow [L/s]": [1000 * q for q in FLOWS]}))
    )


def test_no_unit_is_guessed_that_would_not_do(write_flow):
    columns = {"flow [m^3/h]": [3.6e5 * q for q in FLOWS]}
    (text,) = swift_cautions(gradeline.read_survey(write_flow("", columns)))
    assert "look at the unit of the flow (is it L/min, not m^3/h?)" in text
    columns = {"flow [m^3/h]": [3.6e6 * q for q in FLOWS]}  # 2153 m/s, and still 36 by the other unit
    (text,) = swift_cautions(gradeline.read_survey(write_flow("", columns)))
    assert "look at the unit of the flow and at that of the bore" in text


def test_units_are_all_that_is_said_of_a_bore_ten_times_too_large(write_flow):
    """f Re goes as D⁴: 10⁴ times too large, and no bore that is off by a few per cent mends it."""
    slow = [2e-5, 3e-5, 4e-5, 5e-5, 6e-5]
    heads = [
        9.0 - 128 * 1e-6 * flow / (math.pi * 9.80665 * BORE**4) * np.arange(0.4, 5.3, 0.8) for flow in slow
    ]
    folder = write_flow("", {"flow [m^3/s]": slow}, heads=heads)
    toml = folder / "survey.toml"
    toml.write_text(
        toml.read_text(encoding="utf-8").replace("26.64 mm +/- 0.02 mm", "266.4 mm +/- 0.2 mm"),
        encoding="utf-8",
    )
    found = gradeline.reduce(gradeline.read_survey(folder), monte_carlo=False)
    assert found.laminar["ratio"].to_numpy() == pytest.approx(1e4, rel=5e-3)
    (flag,) = [text for text in found.flags["suggestion"] if "laminar runs" in text]
    assert flag.endswith(": look at the units of bore, flow and chainage")
    text = " ".join((*summarise(found).found, *summarise(found).look))
    assert "that is far from 1: look at the units of bore, flow and chainage" in text
    assert "check the bore" not in text
