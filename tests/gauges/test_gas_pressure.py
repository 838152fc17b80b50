"""A closed multitube manometer whose gas pressure is read in each run."""

from __future__ import annotations

import numpy as np
import pytest

import gradeline
from gradeline.cli.new import write_new
from gradeline.errors import SurveyError
from gradeline.reduction.heads import heads_of
from gradeline.reduction.media import media_of
from tests.gauges.conftest import AIR, FLOWS, GRAVITY, NAMES, RHO, heads

BOARD = '[gauge.board]\nkind = "closed multitube manometer"\nzero = "0 m"\nuncertainty = "1 mm"\n'
HEADS = heads()
#: Of the gas in each run, Pa against the atmosphere.
GAS = np.array([20e3, 22e3, 19e3, -5e3, 25e3, 21e3])


def columns(pressure=GAS):
    """What the board shows: the gas holds the columns lower by its pressure and by its own weight."""
    gas = AIR * (101.325e3 + GAS) / 101.325e3 * 293.15 / 288.0
    shown = (HEADS - (GAS / (RHO * GRAVITY))[:, None]) / (1 - gas / RHO)[:, None]
    found = {f"{name} [m]": shown[:, t] for t, name in enumerate(NAMES)}
    return {"gas_pressure [kPa]": pressure / 1000, **found}


ALL = dict.fromkeys(NAMES, ("board", 0.0))


def problems_of(folder) -> list[str]:
    with pytest.raises(SurveyError) as caught:
        gradeline.read_survey(folder)
    return [str(problem) for problem in caught.value.problems]


def test_the_gas_pressure_of_each_run_gives_its_heads(bench):
    reduction = gradeline.reduce(gradeline.read_survey(bench(BOARD, columns(), ALL)), correct="none")
    assert reduction.heads["head"].to_numpy(float).reshape(HEADS.shape) == pytest.approx(HEADS, abs=1e-5)
    told = " ".join(reduction.cautions)
    assert "no absolute head" not in told
    assert (
        "The uncertainty of the gas pressure of gauge 'board' (u_gas_pressure) is not stated: it contributes nothing to the "
        "results." in reduction.cautions
    )


def test_its_uncertainty_is_one_error_of_all_columns(bench):
    """0.2 kPa is 20.4 mm of water by hand (0.2e3/(999.1 x 9.80665)), less a hundred-thousandth of the gas's weight."""
    survey = gradeline.read_survey(bench(BOARD + 'u_gas_pressure = "0.2 kPa"\n', columns(), ALL))
    found = [one for one in heads_of(survey, media_of(survey)).inputs if one.name == "gauge gas pressure"]
    assert len(found) == 1
    assert found[0].heads == pytest.approx(0.2e3 / (RHO * GRAVITY), rel=1e-3)
    assert not any("u_gas_pressure" in text for text in survey.cautions)


def test_other_units_are_taken(bench):
    other = {
        "gas_pressure [mbar]": GAS / 100,
        **{k: v for k, v in columns().items() if k != "gas_pressure [kPa]"},
    }
    survey = gradeline.read_survey(bench(BOARD, other, ALL))
    assert survey.runs["gas pressure board"].to_numpy(float) == pytest.approx(GAS)


@pytest.mark.parametrize(
    ("board", "change", "told"),
    [
        (
            BOARD + 'gas_pressure = "20 kPa"\n',
            {},
            "survey.toml gauge.board.gas_pressure: readings.csv has the column 'gas_pressure' as well; keep one of the two",
        ),
        (
            BOARD,
            {"gas_pressure [kPa]": np.array([20.0, 21.0, -150.0, 20.0, 20.0, 20.0])},
            "readings.csv row 4, gas_pressure [kPa]: -150.0 lies below a vacuum; give the pressure against the local "
            "atmosphere, or mend the unit",
        ),
        (
            BOARD,
            {"gas_pressure [mm]": GAS},
            "readings.csv row 1, gas_pressure [mm]: the unit 'mm' is a length, not a pressure; give a unit such as kPa, Pa, "
            "bar, psi, mH2O, mmHg",
        ),
        (
            BOARD.replace("closed multitube manometer", "piezometer"),
            {},
            "readings.csv row 1, gas_pressure [kPa]: there is no tap 'gas_pressure' in taps.csv and no such column; known are "
            "T1, T2, T3, T4, T5, T6, direction, flow, flow end, flow start, run, temperature and 2 more",
        ),
    ],
)
def test_a_gas_pressure_that_cannot_be_is_told(bench, board, change, told):
    read = columns()
    if any(name != "gas_pressure [kPa]" for name in change):
        del read["gas_pressure [kPa]"]
    assert problems_of(bench(board, change | read if len(change) == 0 else {**read, **change}, ALL)) == [told]


def test_an_empty_gas_pressure_is_told(bench):
    folder = bench(BOARD, columns(), ALL)
    file = folder / "readings.csv"
    file.write_text(file.read_text(encoding="utf-8").replace(",19.0,", ",,"), encoding="utf-8")
    assert problems_of(folder) == [
        "readings.csv row 4, gas_pressure [kPa]: the cell is empty; give the pressure of the gas over the columns, or take the "
        "column away"
    ]


def test_each_of_two_boards_has_its_own_gas(bench):
    gauges = BOARD + BOARD.replace("board", "second")
    taps = {name: ("board" if place < 3 else "second", 0.0) for place, name in enumerate(NAMES)}
    read = columns()
    kpa = read.pop("gas_pressure [kPa]")
    both = {"gas_pressure board [kPa]": kpa, "gas_pressure second [kPa]": kpa, **read}
    reduction = gradeline.reduce(gradeline.read_survey(bench(gauges, both, taps)), correct="none")
    assert reduction.heads["head"].to_numpy(float).reshape(HEADS.shape) == pytest.approx(HEADS, abs=1e-5)
    assert len(FLOWS) == len(reduction.runs)


def test_a_new_survey_names_the_column(tmp_path):
    write_new(tmp_path / "new")
    text = (tmp_path / "new" / "survey.toml").read_text(encoding="utf-8")
    assert "'gas_pressure [kPa]'" in text
    assert "u_gas_pressure" in text
