"""Surveys of every kind of bore, fluid and off-take, from their files to the truth that they were made from."""

import re

import numpy as np
import pytest

import gradeline
from gradeline.hydraulics.friction import colebrook_white, kinetic_energy_coefficient
from gradeline.hydraulics.viscosity import air_viscosity

GRAVITY = 9.80665
X = np.array([0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 3.5, 4.0])
DENSITY, NU = 870.0, 20e-6
DUCT = 'shape = "rectangle"\nwidth = "40 mm +/- 0.1 mm"\nheight = "20 mm +/- 0.1 mm"'
PIPE = 'diameter = "100 mm +/- 0.2 mm"'


def told(folder):
    with pytest.raises(gradeline.GradelineError) as error:
        gradeline.read_survey(folder)
    return str(error.value).splitlines()


def straight(flow, area, diameter, factor, density=DENSITY):
    """Pressures of a level line, Pa, from f of each run."""
    velocity = np.asarray(flow) / area
    slope = factor * velocity**2 / (2 * GRAVITY * diameter)
    return density * GRAVITY * (5.0 - slope[:, None] * X)


def oil(write_line, bore, *, area=np.pi / 4 * 0.1**2, diameter=0.1, constant=64.0, **more):
    """A line of oil at Re 200 to 1600."""
    reynolds = np.array([200.0, 400.0, 800.0, 1600.0])
    flow = reynolds * NU * area / diameter
    pressures = straight(flow, area, diameter, constant / reynolds)
    more.setdefault("columns", {"flow [m^3/s]": [f"{q:.10g}" for q in flow]})
    return write_line([(0, 4.5, bore)], X, pressures, more.pop("columns"), **more)


# --- bore ---------------------------------------------------------------------------------------------------------

BORES = {
    # 114.3 − 2 × 6.3 − 2 × 3 = 95.7 mm; u: √(0.3² + 4 × 0.1² + 4 × 0.2²)
    "wall and lining": (
        'nominal = "114.3 mm +/- 0.3 mm"\nwall_thickness = "6.3 mm +/- 0.1 mm"\nlining = "3 mm +/- 0.2 mm"',
        95.7e-3,
        np.sqrt(0.09 + 0.04 + 0.16) * 1e-3,
        "The bore of reach 'R1' is its nominal outside diameter less twice the wall thickness and twice the lining.",
    ),
    "lining": (
        'nominal = "100 mm +/- 0.3 mm"\nlining = "4 mm +/- 0.5 mm"',
        92e-3,
        np.sqrt(0.09 + 1.0) * 1e-3,
        "The bore of reach 'R1' is its nominal bore before lining less twice the lining.",
    ),
    # 35.3429 L over 4.5 m is 100 mm; u: half the relative ones
    "filled": (
        'fill_volume = "35.342917 L +/- 0.2 %"\nfill_length = "4.5 m +/- 9 mm"',
        0.1,
        0.1 * np.hypot(0.001, 0.001),
        "The bore of reach 'R1' is that of the circle that the volume fills over its length, √(4V/πL): the mean of its area.",
    ),
}


@pytest.mark.parametrize("case", BORES.values(), ids=BORES.keys())
def test_bores_from_what_was_measured(write_line, case):
    keys, value, u, said = case
    survey = gradeline.read_survey(oil(write_line, keys))
    assert survey.reaches[0].diameter.value == pytest.approx(value, rel=1e-7)
    assert survey.reaches[0].diameter.u == pytest.approx(u, rel=1e-6)
    assert said in survey.assumptions


def test_an_unstated_lining_is_a_caution(write_line):
    survey = gradeline.read_survey(oil(write_line, 'nominal = "100 mm +/- 0.3 mm"\nlining = "4 mm"'))
    assert (
        "The uncertainty of the lining of reach 'R1' is not stated: it contributes nothing to that of the bore."
        in survey.cautions
    )


BAD_BORES = {
    "nothing left": (
        'nominal = "80 mm"\nwall_thickness = "10 mm"\nlining = "30 mm"',
        "survey.toml reach[1].lining: the bore is 0 mm, which is 80 mm less twice the wall thickness of 10 mm and twice the "
        "lining of 30 mm; it must be above 0: mend the value or the unit",
    ),
    "less than nothing": (
        'nominal = "80 mm"\nlining = "45 mm"',
        "survey.toml reach[1].lining: the bore is -10 mm, which is 80 mm less twice the lining of 45 mm; it must be above 0: "
        "mend the value or the unit",
    ),
    "nominal alone": (
        'nominal = "80 mm"',
        "survey.toml reach[1].nominal: a nominal size alone is no bore; add wall_thickness (then it is the outside diameter) "
        "or lining (then it is the bore before lining), or state the bore as diameter",
    ),
    "none": (
        "",
        'survey.toml reach[1].diameter: the key is missing; add it, such as diameter = "26.64 mm +/- 0.03 mm"',
    ),
    "two ways": (
        'diameter = "80 mm"\nlining = "3 mm"',
        "survey.toml reach[1].lining: diameter is given as well, which tells the bore in another way; keep one of the two",
    ),
    "half a filling": (
        'fill_volume = "3 L"',
        'survey.toml reach[1].fill_length: the key is missing; add it, such as fill_length = "5.5 m +/- 2 mm"',
    ),
    "no shape": (
        'width = "40 mm"\nheight = "20 mm"',
        'survey.toml reach[1].shape: the key is missing; add it, such as shape = "rectangle"',
    ),
    "sides of another shape": (
        'shape = "annulus"\nouter = "40 mm"\ninner = "20 mm"\nwidth = "2 mm"',
        "survey.toml reach[1].width: the key does not go with shape = 'annulus', which takes outer and inner; take it away",
    ),
    "turned annulus": (
        'shape = "annulus"\nouter = "20 mm"\ninner = "40 mm"',
        "survey.toml reach[1].inner: the inner diameter of 40 mm is not below the outer one of 20 mm; mend one of them",
    ),
    "short perimeter": (
        'area = "0.01 m^2"\nperimeter = "0.3 m"',
        "survey.toml reach[1].perimeter: a perimeter of 0.3 m does not enclose 0.01 m²: the shortest, of a circle, is "
        "0.3545 m; mend the value or the unit",
    ),
}


@pytest.mark.parametrize("case", BAD_BORES.values(), ids=BAD_BORES.keys())
def test_bores_at_fault_are_told(write_line, case):
    keys, message = case
    assert message in told(oil(write_line, keys))


def test_the_roughness_against_the_bore_stands_in_the_reduction(write_line):
    flow = np.array([0.01, 0.02, 0.03, 0.04])
    reynolds = flow / (np.pi / 4 * 0.1**2) * 0.1 / 1e-6
    pressures = straight(flow, np.pi / 4 * 0.1**2, 0.1, colebrook_white(reynolds, 2e-3))
    fluid = 'name = "brine"\ndensity = "870 kg/m^3"\nkinematic_viscosity = "1 mm^2/s"'
    # No ± of the bore: a wrong one is then put down to the roughness alone.
    folder = write_line([(0, 4.5, 'diameter = "100 mm"')], X, pressures, {"flow [m^3/s]": flow}, fluid=fluid)
    reduction = gradeline.reduce(gradeline.read_survey(folder))
    table = reduction.bore_sensitivity.set_index("diameter_change")
    assert sorted(table.index) == [-0.05, -0.02, -0.01, 0.0, 0.01, 0.02, 0.05]
    for change, row in table.iterrows():
        # The same pressures and flows through another bore: solved here from Colebrook–White of each run.
        bore = 0.1 * (1 + change)
        factor = colebrook_white(reynolds, 2e-3) * (1 + change) ** 5
        re = reynolds / (1 + change)
        root = 1 / np.sqrt(factor)
        each = 3.7 * bore * (10 ** (-root / 2) - 2.51 * root / re)
        each = np.maximum(each, 0.0)
        assert each.min() * 0.999 - 1e-9 <= row["roughness"] <= each.max() * 1.001 + 1e-9


# --- sections -----------------------------------------------------------------------------------------------------

# f·Re as Shah and London print them (from memory): rectangle 2:1, annulus 1:2; a triangle with equal sides 53.33.
SECTIONS = {
    "rectangle": (DUCT, 8e-4, 8e-2 / 3, 62.1922),
    "annulus": (
        'shape = "annulus"\nouter = "100 mm +/- 0.1 mm"\ninner = "50 mm +/- 0.1 mm"',
        np.pi / 4 * (0.01 - 0.0025),
        0.05,
        95.250,
    ),
    "triangle": (
        'area = "43.30127 cm^2 +/- 0.2 %"\nperimeter = "300 mm +/- 0.5 mm"\nlaminar_constant = 53.333',
        43.30127e-4,
        4 * 43.30127e-4 / 0.3,
        53.333,
    ),
}


@pytest.mark.parametrize("case", SECTIONS.values(), ids=SECTIONS.keys())
def test_laminar_flow_is_held_against_its_own_shape(write_line, case):
    bore, area, diameter, constant = case
    folder = oil(write_line, bore, area=area, diameter=diameter, constant=constant)
    reduction = gradeline.reduce(gradeline.read_survey(folder))
    assert reduction.reaches["diameter"][0] == pytest.approx(diameter)
    np.testing.assert_allclose(reduction.runs["reynolds"], [200, 400, 800, 1600], rtol=1e-6)
    np.testing.assert_allclose(reduction.laminar["ratio"], 1.0, rtol=1e-4)
    np.testing.assert_allclose(reduction.laminar["constant"], constant, rtol=1e-4)
    assert not len(reduction.flags)
    assert any("is no circle" in text for text in reduction.assumptions)


@pytest.mark.parametrize("side", ["width", "height"])
def test_a_side_moves_the_friction_factor_by_its_uncertainty(write_line, side):
    def reduced(keys):
        folder = oil(write_line, keys, area=8e-4, diameter=8e-2 / 3, constant=62.1922)
        return gradeline.reduce(gradeline.read_survey(folder))

    only = re.sub(r" \+/- [\d.]+ mm", "", DUCT)
    size = {"width": "40", "height": "20"}[side]
    exact = reduced(only)
    uncertain = reduced(only.replace(f'"{size} mm"', f'"{size} mm +/- 0.1 mm"'))
    moved = reduced(only.replace(f'"{size} mm"', f'"{int(size) + 0.1} mm"'))
    for table, column in (("runs", "friction_factor"), ("laminar", "ratio")):
        value = getattr(exact, table)[column].to_numpy(float)
        by = np.abs(getattr(moved, table)[column].to_numpy(float) - value)
        added = np.sqrt(
            getattr(uncertain, table)[f"{column}_u"].to_numpy(float) ** 2
            - getattr(exact, table)[f"{column}_u"].to_numpy(float) ** 2
        )
        np.testing.assert_allclose(added, by, rtol=0.02)


def test_a_section_of_unknown_shape_checks_no_laminar_run(write_line):
    folder = oil(write_line, 'area = "40 cm^2"\nperimeter = "300 mm"', area=4e-3, diameter=4 * 4e-3 / 0.3)
    reduction = gradeline.reduce(gradeline.read_survey(folder))
    assert not len(reduction.laminar)
    assert any("f·Re of laminar flow is not known for its shape" in text for text in reduction.assumptions)


# --- temperatures -------------------------------------------------------------------------------------------------

COLD_HOT = (
    "temperature [degC],density [kg/m^3],kinematic viscosity [mm^2/s]\n10,880,40\n20,870,20\n40,856,8\n"
)
TABLED = 'name = "oil"\nproperties = "oil.csv"'


def tabled(write_line, start, end, **more):
    area = np.pi / 4 * 0.1**2
    flow = np.array([200.0, 400.0, 800.0, 1600.0]) * NU * area / 0.1
    columns = {"flow [m^3/s]": flow, "temperature start [degC]": start, "temperature end [degC]": end}
    return oil(write_line, PIPE, columns=columns, fluid=TABLED, files={"oil.csv": COLD_HOT}, **more)


def test_start_and_end_temperature_are_their_mean_and_a_rectangle(write_line):
    survey = gradeline.read_survey(tabled(write_line, [19, 19.5, 18, 20], [21, 20.5, 22, 20]))
    np.testing.assert_allclose(survey.runs["temperature"], 293.15)
    # JCGM 100, 4.3.7: a half-width a has the standard uncertainty a/√3.
    np.testing.assert_allclose(survey.runs["temperature_u"], np.array([1.0, 0.5, 2.0, 0.0]) / np.sqrt(3))
    assert any("(at most 2 K, in run 3) over √3" in text for text in survey.assumptions)
    reduction = gradeline.reduce(survey)
    np.testing.assert_allclose(reduction.laminar["ratio"], 1.0, rtol=1e-4)
    # ν falls by ∂ ln ν/∂T a kelvin, by a monotone cubic through the table: taken here over ±0.1 K about 20 °C.
    from scipy.interpolate import PchipInterpolator  # noqa: PLC0415 (loaded when asked for: start-up time)

    log = PchipInterpolator([10, 20, 40], np.log([40, 20, 8]))
    rate = abs(float(log(20.1) - log(19.9)) / 0.2)
    own = np.sqrt(reduction.laminar["ratio_u"][[0, 1, 2]].to_numpy(float) ** 2 - _steady(write_line)[:3] ** 2)
    np.testing.assert_allclose(own, rate * np.array([1.0, 0.5, 2.0]) / np.sqrt(3), rtol=0.03)


def _steady(write_line):
    reduction = gradeline.reduce(gradeline.read_survey(tabled(write_line, [20] * 4, [20] * 4)))
    return reduction.laminar["ratio_u"].to_numpy(float)


def test_temperatures_at_fault_are_told(write_line):
    found = told(tabled(write_line, [20, 20, 20, 20], [20, "", 41, 20]))
    assert found == [
        "readings.csv row 3, temperature end [degC]: the cell is empty; oil has its properties from it",
        "readings.csv row 4, temperature end [degC]: 41 degC does not lie in the range of oil.csv, from 10 to 40 degC; "
        "extend the table or mend the value",
    ]
    columns = {"flow [m^3/s]": [1e-3] * 4, "temperature start [degC]": [20] * 4}
    assert told(oil(write_line, PIPE, columns=columns)) == [
        "readings.csv row 1: the column 'temperature end [degC]' is missing beside 'temperature start'; add it, or head "
        "that column 'temperature'"
    ]


BAD_TABLES = {
    "falls": (
        "temperature [degC],density [kg/m^3],viscosity [mPa s]\n20,870,20\n10,880,40\n",
        "row 3, temperature [degC]: 10",
    ),
    "no viscosity": (
        "temperature [degC],density [kg/m^3]\n10,880\n20,870\n",
        "row 1: the column 'viscosity [mPa s]' or",
    ),
    "zero": (
        "temperature [degC],density [kg/m^3],viscosity [mPa s]\n10,880,0\n20,870,20\n",
        "row 2, viscosity [mPa s]: 0 is not above zero; mend the value or the unit",
    ),
    "one row": (
        "temperature [degC],density [kg/m^3],viscosity [mPa s]\n10,880,40\n",
        ": there is one row; properties against temperature take two at least",
    ),
}


@pytest.mark.parametrize("case", BAD_TABLES.values(), ids=BAD_TABLES.keys())
def test_tables_of_a_fluid_at_fault_are_told(write_line, case):
    text, message = case
    found = told(oil(write_line, PIPE, fluid=TABLED, files={"oil.csv": text}))
    assert any(line.startswith("oil.csv") and message in line for line in found), found


BAD_FLUIDS = {
    "a path": (
        'name = "oil"\nproperties = "../oil.csv"',
        "survey.toml fluid.properties: '../oil.csv' is no name of a file in the survey's folder; put the file there and give "
        "its name",
    ),
    "air without pressure": (
        'name = "air"',
        "survey.toml fluid.line_pressure: the key is missing; air needs the absolute pressure in the line, such as "
        'line_pressure = "105 kPa abs"',
    ),
    "gauge pressure": (
        'name = "air"\nline_pressure = "5 kPa"',
        "survey.toml fluid.line_pressure: '5 kPa' must be an absolute pressure and say so; write it as '105 kPa abs' (the "
        "gauge's reading plus the pressure of the atmosphere)",
    ),
    "water under pressure": (
        'name = "water"\nline_pressure = "105 kPa abs"',
        "survey.toml fluid.line_pressure: water has its properties from the temperature; leave the key out, or give the "
        "fluid another name",
    ),
    "thicker when warm": (
        'name = "oil"\ndensity = "870 kg/m^3"\nviscosity_at = {"40 degC" = "6.8 mm^2/s", "100 degC" = "46 mm^2/s"}',
        "survey.toml fluid.viscosity_at: 6.8 mm^2/s at 40 degC is not above 46 mm^2/s at 100 degC; a liquid is the thinner "
        "the warmer it is: mend one of them",
    ),
    "expansion from nowhere": (
        'name = "oil"\ndensity = "870 kg/m^3"\nviscosity = "20 mPa s"\nexpansion = "0.0007 1/K"',
        'survey.toml fluid.density_temperature: the key is missing; add it, such as density_temperature = "15 degC"',
    ),
}


@pytest.mark.parametrize("case", BAD_FLUIDS.values(), ids=BAD_FLUIDS.keys())
def test_fluids_at_fault_are_told(write_line, case):
    fluid, message = case
    assert message in told(oil(write_line, PIPE, fluid=fluid))


def test_an_oil_by_two_viscosities(write_line):
    """At a given temperature the viscosity is the given one, so that laminar flow has f·Re = 64."""
    fluid = 'name = "oil"\ndensity = "870 kg/m^3"\nviscosity_at = {"40 degC" = "20 mm^2/s", "100 degC" = "5 mm^2/s"}'
    flow = np.array([200.0, 400.0, 800.0, 1600.0]) * NU * (np.pi / 4 * 0.1**2) / 0.1
    columns = {"flow [m^3/s]": flow, "temperature [degC]": [40] * 4}
    reduction = gradeline.reduce(gradeline.read_survey(oil(write_line, PIPE, columns=columns, fluid=fluid)))
    np.testing.assert_allclose(reduction.laminar["ratio"], 1.0, rtol=1e-4)
    columns["temperature [degC]"] = [35] * 4
    survey = gradeline.read_survey(oil(write_line, PIPE, columns=columns, fluid=fluid))
    assert any("is carried beyond 40 to 100 °C" in text for text in survey.cautions)
    columns["temperature [degC]"] = [-5] * 4
    assert (
        "more than 40 K beyond the temperatures of viscosity_at"
        in told(oil(write_line, PIPE, columns=columns, fluid=fluid))[0]
    )


# --- air ----------------------------------------------------------------------------------------------------------


def air(write_line, flow):
    # Dry air by pV = nRT with M = 28.965 g/mol: within 4e-4 of the real gas at 1 bar (CIPM-2007's Z).
    density = 105e3 * 28.965e-3 / (8.314463 * 293.15)
    nu = float(air_viscosity(293.15)) / density
    area = np.pi / 4 * 0.1**2
    factor = colebrook_white(flow / area * 0.1 / nu, 1e-3)
    pressures = straight(flow, area, 0.1, factor, density)
    fluid = 'name = "air"\nline_pressure = "105 kPa abs"\nrelative_humidity = "0 %"'
    columns = {"flow [m^3/s]": flow, "temperature [degC]": [20] * len(flow)}
    folder = write_line(
        [(0, 4.5, PIPE)], X, pressures, columns, fluid=fluid, uncertainty='reading = "0.01 Pa"'
    )
    return gradeline.reduce(gradeline.read_survey(folder)), factor


def test_air_in_a_pipe(write_line):
    reduction, factor = air(write_line, np.array([0.05, 0.1, 0.2, 0.3]))
    np.testing.assert_allclose(reduction.runs["friction_factor"], factor, rtol=1e-3)
    assert not any("pressure of the air falls" in text for text in reduction.cautions)
    assert any("taken as incompressible" in text for text in reduction.assumptions)


def test_air_that_loses_much_of_its_pressure_is_a_caution(write_line):
    reduction, _ = air(write_line, np.array([0.1, 0.2, 0.3, 0.9]))
    said = [text for text in reduction.cautions if "pressure of the air falls by more than 2 %" in text]
    assert len(said) == 1
    assert "in run 4 (" in said[0]


# --- off-takes ----------------------------------------------------------------------------------------------------

BRANCH = '[[offtake]]\nname = "hydrant"\nat = "225 m"\n'
# So long that the velocity heads, whose α the reduction takes in two passes, hardly count.
LONG = 100 * X
TAKEN = 0.008


def branched(write_line, flow, *, more=BRANCH + f'flow = "{TAKEN} m^3/s +/- 0.0002 m^3/s"\n', extra=None):
    """Two reaches of one pipe with 8 L/s taken between them; ε/D = 2e-3."""
    area, nu = np.pi / 4 * 0.1**2, 1e-6
    energy, heads = np.full(len(flow), 200.0), []
    for x0, x1, part in ((0.0, 225.0, flow), (225.0, 450.0, flow - TAKEN)):
        velocity = part / area
        factor = colebrook_white(velocity * 0.1 / nu, 2e-3)
        head = (
            np.asarray(kinetic_energy_coefficient(velocity * 0.1 / nu, factor)) * velocity**2 / (2 * GRAVITY)
        )
        slope = factor * velocity**2 / (2 * GRAVITY * 0.1)
        mine = LONG[(x0 < LONG) & (x1 >= LONG)]
        heads.append(energy[:, None] - slope[:, None] * (mine - x0) - head[:, None])
        energy = energy - slope * (x1 - x0)
    pressures = DENSITY * GRAVITY * np.concatenate(heads, axis=1)
    fluid = 'name = "brine"\ndensity = "870 kg/m^3"\nkinematic_viscosity = "1 mm^2/s"'
    columns = {"flow [m^3/s]": flow, **(extra or {})}
    reaches = [(0, 225, PIPE), (225, 450, PIPE)]
    return write_line(reaches, LONG, pressures, columns, fluid=fluid, more=more)


FLOWS = np.array([0.02, 0.03, 0.04, 0.05])
# Taps next to the branch are disturbed as by any fitting, unless a fitting there says otherwise.
CALM = '[[fitting]]\nname = "branch"\nat = "225 m"\nloss_coefficient = 0\napproach = 0\nrecovery = 0\n'


def test_an_offtake_leaves_less_downstream(write_line):
    folder = branched(write_line, FLOWS, more=CALM + BRANCH + f'flow = "{TAKEN} m^3/s"\n')
    reduction = gradeline.reduce(gradeline.read_survey(folder))
    velocity = reduction.runs.pivot_table(index="run", columns="reach", values="velocity")
    np.testing.assert_allclose(velocity["R1"], FLOWS / (np.pi / 4 * 0.01))
    np.testing.assert_allclose(velocity["R2"], (FLOWS - TAKEN) / (np.pi / 4 * 0.01))
    assert reduction.walls["roughness"][0] == pytest.approx(2e-4, rel=2e-3)
    assert not len(reduction.flags)


def test_a_column_tells_what_an_offtake_takes(write_line):
    column = {"hydrant [L/s]": [1000 * TAKEN] * 4}
    folder = branched(write_line, FLOWS, more=CALM + BRANCH + 'u_flow = "2 %"\n', extra=column)
    survey = gradeline.read_survey(folder)
    np.testing.assert_allclose(survey.runs["offtake hydrant"], TAKEN)
    assert gradeline.reduce(survey).walls["roughness"][0] == pytest.approx(2e-4, rel=2e-3)


def test_the_flow_taken_moves_the_friction_downstream_by_its_uncertainty(write_line):
    def factors(flow):
        folder = branched(write_line, FLOWS, more=CALM + BRANCH + f'flow = "{flow}"\n')
        runs = gradeline.reduce(gradeline.read_survey(folder)).runs
        return runs.loc[runs["reach"] == "R2", ["friction_factor", "friction_factor_u"]].to_numpy(float)

    exact, uncertain = factors("8 L/s"), factors("8 L/s +/- 0.05 L/s")
    moved = factors("8.05 L/s")
    added = np.sqrt(uncertain[:, 1] ** 2 - exact[:, 1] ** 2)
    np.testing.assert_allclose(added, np.abs(moved[:, 0] - exact[:, 0]), rtol=0.02)


def test_taps_next_to_an_offtake_are_disturbed(write_line):
    folder = branched(write_line, FLOWS)
    taps = folder / "taps.csv"
    # 1.9 bores upstream and 9 downstream; a fitting disturbs 2 and 10 unless it says otherwise (DESIGN §6).
    taps.write_text(taps.read_text().replace("T4,200.0", "T4,224.81").replace("T5,250.0", "T5,225.9"))
    heads = gradeline.reduce(gradeline.read_survey(folder)).heads
    assert set(heads.loc[heads["flag"] == "disturbed", "tap"]) == {"T4", "T5"}
    reduction = gradeline.reduce(gradeline.read_survey(branched(write_line, FLOWS)))
    assert "off-take hydrant" in set(reduction.fittings["fitting"])
    assert any("loses nothing there (K = 0)" in text for text in reduction.assumptions)


BAD_BRANCHES = {
    "inside a reach": (
        '[[offtake]]\nname = "hydrant"\nat = "300 m"\nflow = "8 L/s"\n',
        None,
        "survey.toml offtake[1].at: no reach ends at 300 m, and the flow may change only between two reaches (boundaries: 225 "
        "m); split the reach there into two with the same bore and wall",
    ),
    "takes all": (
        BRANCH + 'flow = "20 L/s"\n',
        None,
        "readings.csv row 2: the off-takes take 20 L/s of a flow of 20 L/s; some must be left downstream: mend a flow or its "
        "unit, or end the line at the off-take",
    ),
    "no column": (
        BRANCH,
        None,
        "readings.csv row 1: the column 'hydrant [L/s]' is missing; add it",
    ),
    "empty": (
        BRANCH,
        {"hydrant [L/s]": [8, "", -1, 8]},
        "readings.csv row 3, hydrant [L/s]: the cell is empty; give what the off-take takes, 0 for nothing",
    ),
    "negative": (
        BRANCH,
        {"hydrant [L/s]": [8, "", -1, 8]},
        "readings.csv row 4, hydrant [L/s]: -1 is negative; an off-take takes flow away, so give it as a positive number",
    ),
    "two uncertainties": (
        BRANCH + 'flow = "8 L/s"\nu_flow = "2 %"\n',
        None,
        "survey.toml offtake[1].u_flow: the flow is given in survey.toml; state its uncertainty there, such as flow = "
        '"2 L/s +/- 0.1 L/s"',
    ),
}


@pytest.mark.parametrize("case", BAD_BRANCHES.values(), ids=BAD_BRANCHES.keys())
def test_offtakes_at_fault_are_told(write_line, case):
    more, extra, message = case
    assert message in told(branched(write_line, FLOWS, more=more, extra=extra))


# --- what is told -------------------------------------------------------------------------------------------------


def test_check_tells_sections_offtakes_and_fluids(write_line):
    from gradeline.cli.understood import understood  # noqa: PLC0415 (loaded when asked for: start-up time)

    said = understood(gradeline.read_survey(branched(write_line, FLOWS)))
    assert re.search(r"hydrant +225 +8\b", said)
    said = understood(
        gradeline.read_survey(oil(write_line, DUCT, area=8e-4, diameter=8e-2 / 3, constant=62.1922))
    )
    assert "(hydraulic; rectangle 40 × 20)" in said
    fluid = (
        'name = "oil"\ndensity = "870 kg/m^3"\ndensity_temperature = "15 degC"\nexpansion = "0.0007 1/K"\n'
        'viscosity_at = {"40 degC" = "20 mm^2/s", "100 degC" = "5 mm^2/s"}'
    )
    columns = {"flow [m^3/s]": [1e-3] * 4, "temperature [degC]": [40] * 4}
    said = understood(gradeline.read_survey(oil(write_line, PIPE, columns=columns, fluid=fluid)))
    assert "density 870 kg/m³ at 15 °C, expansion 0.0007 1/K, kinematic viscosity 20 mm²/s at 40 °C" in said


def test_offtakes_stay_where_reaches_meet_when_chainages_are_on_the_plan(write_line):
    folder = branched(write_line, FLOWS)
    toml, taps = folder / "survey.toml", folder / "taps.csv"
    toml.write_text(toml.read_text().replace('title = "Line"', 'title = "Line"\nchainage_is = "plan"'))
    taps.write_text(taps.read_text().replace("T2,100.0,0", "T2,100.0,30"))
    survey = gradeline.read_survey(folder)
    # Two slopes of 50 m on the plan and 30 m up: 2 × (58.31 − 50) m longer.
    assert survey.offtakes[0].at == pytest.approx(225 + 2 * (np.hypot(50, 30) - 50))
    assert survey.offtakes[0].at == survey.reaches[1].start


def test_the_report_names_the_constant_of_the_shape(write_line, tmp_path):
    from gradeline.report.output import write  # noqa: PLC0415 (loaded when asked for: start-up time)

    folder = oil(write_line, DUCT, area=8e-4, diameter=8e-2 / 3, constant=62.1922)
    write(gradeline.reduce(gradeline.read_survey(folder)), tmp_path / "out")
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "In laminar flow f·Re/62.19, which is 1 for the true bore and flow" in page
    assert "f·Re/64" not in page
