"""Two readings of one run that changed places: both are found, and neither the line nor another tap gets the blame."""

import numpy as np
import pandas as pd
import pytest

from gradeline.reduction import reduce
from tests.simulate.surveys import NominalFitting, NominalReach, Uncertainties, make_survey

ELBOW = 0.85


def bench(seed, *, taps, runs, floor):
    """A pipe with an elbow whose K is to be found, from simulation: the truth is known."""
    chainage = np.concatenate([0.6 * np.arange(1, taps // 2 + 1), 3.6 + 0.6 * np.arange(taps - taps // 2)])
    survey, _ = make_survey(
        np.random.default_rng(seed),
        chainage=chainage,
        reaches=[NominalReach(0.0, 6.0, 0.0216, 1.5e-4, 5e-5)],
        flows=np.linspace(1e-4, 3.8e-4, runs),
        sigma=7e-4,
        stated=Uncertainties(reading=7e-4 if floor else None, flow=0.003, flow_scale=0.003, chainage=1e-3),
        fittings=[NominalFitting(3.0, ELBOW)],
    )
    return survey


def with_swap(survey, run, tap):
    values = survey.readings.to_numpy(float).copy()
    values[run, [tap, tap + 1]] = values[run, [tap + 1, tap]]
    table = pd.DataFrame(values, index=survey.readings.index, columns=survey.readings.columns)
    return type(survey)(**{**vars(survey), "readings": table})


@pytest.mark.parametrize("tap", range(7))
@pytest.mark.parametrize("run", [4, 7])
def test_neighbours_that_changed_places_in_one_run(run, tap):
    survey = bench(run, taps=8, runs=8, floor=True)
    found = reduce(with_swap(survey, run, tap), monte_carlo=False)
    names = list(survey.readings.columns)
    assert {(flag.run, flag.tap) for flag in found.flags.itertuples()} == {
        (str(run + 1), names[tap]),
        (str(run + 1), names[tap + 1]),
    }
    assert found.flags["suggestion"].str.contains("swapped").all()
    assert not len(found.ailments)
    fitting = found.fittings.iloc[0]
    assert fitting.loss_coefficient_low < ELBOW < fitting.loss_coefficient_high


@pytest.mark.parametrize("tap", range(1, 5))
def test_few_taps_and_runs(tap):
    # Six readings and three unknowns a run: other pairs would do as well, but only two neighbours are off by one amount.
    survey = bench(3, taps=6, runs=5, floor=True)
    found = reduce(with_swap(survey, 2, tap), monte_carlo=False)
    names = list(survey.readings.columns)
    assert {(flag.run, flag.tap) for flag in found.flags.itertuples() if flag.kind == "reading"} == {
        ("3", names[tap]),
        ("3", names[tap + 1]),
    }
    # One run of five does not set the scatter of all.
    assert found.scatter["base"].iloc[0] < 2e-3
