"""Uncertainties that the flow shares with the fluid, the channel or [uncertainty]."""

import pytest

import gradeline

from .test_methods import CASES, cells, flow_inputs

DENSITY = 'density = "998.0 kg/m^3"\nkinematic_viscosity = "1.0 mm^2/s"\n'


def with_text(folder, *changes):
    file = folder / "survey.toml"
    text = file.read_text(encoding="utf-8")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    file.write_text(text, encoding="utf-8")
    return folder


def share(folder):
    runs = gradeline.reduce(gradeline.read_survey(folder)).runs
    return (runs["friction_factor_u"] / runs["friction_factor"]).to_numpy()


def test_a_density_by_table_does_what_the_same_density_alone_does(write_flow):
    toml, columns = CASES["weighing tank"]
    alone = with_text(
        write_flow(toml, cells(columns)),
        (DENSITY, DENSITY.replace('998.0 kg/m^3"', '998 kg/m^3 +/- 9.98 kg/m^3"')),
    )
    table = "temperature [degC],density [kg/m^3],kinematic viscosity [mm^2/s]\n10,998,1\n20,998,1\n30,998,1\n"
    columns = {**cells(columns), "temperature [degC]": ["20"] * 5}
    tabled = with_text(
        write_flow(toml, columns, brine_csv=table), (DENSITY, 'properties = "brine.csv"\nu_density = "1 %"\n')
    )
    found = share(tabled)
    assert found == pytest.approx(share(alone), rel=1e-3)
    # f goes as 1/Q² and Q as 1/ρ at a given mass: 2 % from the density (JCGM 100), beside what else is stated.
    assert (found > 0.02).all()


def test_the_pressure_of_air_goes_to_an_orifice_as_its_density_does(write_flow):
    toml, columns = CASES["nozzle"]
    columns = {**cells(columns), "temperature [degC]": ["20"] * 5}
    folder = with_text(
        write_flow(toml, columns),
        ('name = "brine"\n' + DENSITY, 'name = "air"\nline_pressure = "120 kPa abs +/- 5 %"\n'),
    )
    _, inputs = flow_inputs(folder)
    # Q = C ε A √(2 Δp/ρ), ρ as p: −5 %/2, ISO 5167-1; ε stays near 1 at these small differences.
    assert inputs[("line pressure", "")] == pytest.approx(-0.025, rel=0.02)


def test_the_density_of_air_cancels_between_an_orifice_and_pressure_gauges(write_flow):
    toml, columns = CASES["nozzle"]
    columns = {**cells(columns), "temperature [degC]": ["20"] * 5}
    found = []
    for pressure in ("120 kPa abs", "120 kPa abs +/- 5 %"):
        folder = with_text(
            write_flow(toml, columns),
            ('name = "brine"\n' + DENSITY, f'name = "air"\nline_pressure = "{pressure}"\n'),
            (
                'kind = "piezometer"\nzero = "0 m"\nuncertainty = "0.5 mm"',
                'kind = "pressure gauge"\nuncertainty = "0.01 Pa"',
            ),
        )
        readings = folder / "readings.csv"
        text = readings.read_text(encoding="utf-8")
        for place in range(1, 8):
            text = text.replace(f"T{place} [m]", f"T{place} [kPa]")
        readings.write_text(text, encoding="utf-8")
        found.append(share(folder))
    # f = 2 D Δp A²/(ρ L Q²) and Q² as 1/ρ: the density has no part in f.
    assert found[1] == pytest.approx(found[0], abs=2e-3)


def test_a_notch_that_fills_its_channel_is_one_width(write_flow):
    toml, columns = CASES["rectangular weir"]
    toml = toml.replace('"0.1 m"', '"0.60 m +/- 6 mm"').replace('channel_width = "0.4 m"\n', "")
    columns = {"weir head [m]": [0.03, 0.035, 0.04, 0.045, 0.05]}
    _, alone = flow_inputs(write_flow(toml, cells(columns)))
    _, beside = flow_inputs(write_flow(toml + 'channel_width = "0.60 m"\n', cells(columns)))
    assert beside[("flow notch width", "")] == pytest.approx(alone[("flow notch width", "")], rel=1e-9)
    # Q as b + k_b, k_b = −0.9 mm over the full width (Kindsvater and Carter 1959, from memory): 6/599.1
    assert beside[("flow notch width", "")] == pytest.approx(6 / 599.1, rel=1e-4)


def test_what_is_stated_twice_is_told(write_flow):
    toml, columns = CASES["weighing tank"]
    toml += 'u_time = "0.2 s"\nu_mass = "0.05 kg"\nu_scale = "0.1 %"\n'
    folder = write_flow(toml, cells(columns), uncertainty='flow = "1 %"\nflow_scale = "0.3 %"\n')
    said = gradeline.reduce(gradeline.read_survey(folder)).assumptions
    assert (
        "The flow's random uncertainty is the one stated in [uncertainty]; [flow] u_mass and u_time are not used."
    ) in said
    assert (
        "[uncertainty] flow_scale is counted beside the uncertainty of [flow] u_scale: keep one if both describe the same "
        "calibration."
    ) in said
