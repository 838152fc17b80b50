"""Pages and command line of surveys without a level, and of gauges that read two taps."""

from __future__ import annotations

import json

import numpy as np
import pytest
from typer.testing import CliRunner

from gradeline.cli.app import app
from tests.gauges.conftest import AIR, NAMES, RHO, heads
from tests.gauges.test_reduction import ENDS, FALL, LEGS, MERCURY, UTUBE

HEADS = heads()
DEFLECTION = FALL * RHO / (MERCURY - RHO)


def run(*arguments):
    return CliRunner().invoke(app, [str(each) for each in arguments])


def surveys(bench, which):
    if which == "u-tube":
        return bench(UTUBE, {"m1 [mm]": 1000 * DEFLECTION}, ENDS)
    if which == "compound":
        return bench(LEGS, {"c1 a [m]": -1.0 - DEFLECTION / 2, "c1 b [m]": -1.0 + DEFLECTION / 2}, ENDS)
    columns = {f"{name} [m]": HEADS[:, t] / (1 - AIR / RHO) for t, name in enumerate(NAMES)}
    if which == "floating":
        board = '[gauge.board]\nkind = "closed multitube manometer"\nzero = "0 m"\n'
        return bench(board, columns, dict.fromkeys(NAMES, ("board", 0.3)))
    board = UTUBE + '[gauge.board]\nkind = "piezometer"\nzero = "0 m"\nuncertainty = "1 mm"\n'
    columns["m1 [mm]"] = 1000 * DEFLECTION
    return bench(board, columns, dict.fromkeys(NAMES, ("board", 0.0)))


@pytest.mark.parametrize("which", ["u-tube", "compound", "floating", "beside a board"])
def test_a_report_is_written(bench, which):
    folder = surveys(bench, which)
    result = run("reduce", folder)
    assert result.exit_code == 0, result.output
    table = json.loads((folder / "reduction" / "reduction.json").read_text("utf-8"))
    assert len(table["heads"]) == 6 * {"u-tube": 1, "compound": 1, "floating": 6, "beside a board": 7}[which]
    level = any("no absolute head can be had" in text for text in table["cautions"])
    assert level == (which != "beside a board")
    assert any("Mercury is poisonous" in text for text in table["cautions"]) == (which != "floating")
    assert run("check", folder).exit_code == 0


def test_gauges_tells_range_resolution_and_fluid(bench):
    gauge = UTUBE + 'range = "0 to 0.6 m"\nresolution = "1 mm"\n'
    result = run("gauges", bench(gauge, {"m1 [mm]": 1000 * DEFLECTION}, ENDS))
    assert result.exit_code == 0, result.output
    # 0.6 m of mercury under water is 7.5 m of water (13.56 - 1), 1 mm is 12.6 mm
    factor = MERCURY / RHO - 1
    assert f"shows        {-0.6 * factor:.4g} m to {0.6 * factor:.4g} m" in result.output
    assert f"resolution   {factor:.3g} mm" in result.output
    least, most = np.sort(FALL[1:])[[0, -1]]
    assert f"differences  {1000 * least:.3g} mm to {1000 * most:.3g} mm" in result.output
    # 0.66 m of water is beyond 0.6 m of board with air above, and 52 mm of mercury
    assert "suits        mercury below, on a board of 0.6 m" in result.output


def test_gauges_of_a_bad_survey_are_its_problems(tmp_path):
    result = run("gauges", tmp_path / "nowhere")
    assert result.exit_code == 3
    assert "there is no such folder" in result.output
