"""A run whose flow was written in another unit: what the others say must not hold it, nor speak of it."""

from dataclasses import replace

import numpy as np
import pytest

from gradeline.quantities import Measured
from gradeline.reduction import reduce
from gradeline.report import summarise
from tests.reduction.benches import FAST, main, tube, with_runs
from tests.simulate.surveys import Uncertainties

STATED = Uncertainties(reading=1e-3, flow=4e-3, flow_scale=3e-3)
WRONG = "3"


def misread(survey, run=WRONG, times=60.0):
    """The flow of one run sixty times too large: L/min written for L/s."""
    return with_runs(
        survey, flow=np.where(survey.runs["run"] == run, times, 1.0) * survey.runs["flow"].to_numpy(float)
    )


@pytest.fixture(scope="module")
def sound():
    survey, _ = tube((*FAST, 5e-4, 8e-4, 1.1e-3), sigma=2e-4, stated=STATED)
    return survey


@pytest.fixture(scope="module")
def slipped(sound):
    return reduce(misread(sound), monte_carlo=False)


def test_the_run_is_flagged_and_no_subject_of_the_budget(slipped):
    assert slipped.flags["run"].dropna().tolist() == [WRONG]
    subjects = set(slipped.budget["subject"])
    assert not [one for one in subjects if one.startswith(f"run {WRONG},")]
    # the fastest of the others, by the flows as they were made
    fastest = slipped.runs[slipped.runs["run"] != WRONG].sort_values("flow")["run"].iloc[-1]
    assert any(one.startswith(f"run {fastest},") for one in subjects)


def test_the_laws_are_held_against_the_runs_of_the_walls_fit(sound, slipped):
    assert set(slipped.laws["slopes_used"]) == {6.0}
    assert "none" not in set(slipped.laws["verdict"])
    assert not [text for text in summarise(slipped).look if "No law describes" in text]
    without = reduce(
        replace(
            sound,
            runs=sound.runs[sound.runs["run"] != WRONG].reset_index(drop=True),
            readings=sound.readings.drop(index=WRONG),
            repeats=sound.repeats.drop(index=WRONG),
            spreads=sound.spreads.drop(index=WRONG),
        ),
        monte_carlo=False,
    )
    # the same χ² as if the run had never been read
    assert slipped.laws["chi_square"].to_numpy() == pytest.approx(
        without.laws["chi_square"].to_numpy(), rel=0.02
    )


def test_the_best_law_is_named_once_where_none_describes_the_runs(sound):
    """f that rises by a third over the range fits no law."""
    steep = sound.readings.to_numpy(float)
    level = steep.mean(axis=1, keepdims=True)
    rising = 1 + 0.35 * np.linspace(0, 1, len(steep))[np.argsort(np.argsort(sound.runs["flow"].to_numpy()))]
    readings = sound.readings.copy()
    readings[:] = level + (steep - level) * rising[:, None]
    found = reduce(replace(sound, readings=readings), monte_carlo=False)
    (reason,) = set(found.laws["reason"].dropna())
    assert reason.count("the best of them") == 1
    assert "p = 0)" not in reason


def test_lengths_of_straight_pipe_are_those_of_a_run_on_the_law():
    """K D / f of the fastest run that is not off the law; the valve's K here given, the contraction's from the change of bore."""
    survey, _ = main(sigma=1e-3, stated=Uncertainties(reading=5e-3, flow=4e-3))
    fittings = tuple(
        replace(one, loss_coefficient=Measured(4.0, None)) if one.loss_coefficient is None else one
        for one in survey.fittings
    )
    given = replace(survey, fittings=fittings)
    for one in (survey, given):
        found = reduce(misread(one), monte_carlo=False)
        assert WRONG in set(found.flags["run"])
        row = found.fittings[found.fittings["loss_coefficient"] > 1].iloc[0]
        reach = found.runs[
            (found.runs["reach"] == found.reaches["reach"].iloc[1]) & (found.runs["run"] != WRONG)
        ]
        factor = reach.sort_values("flow")["friction_factor"].iloc[-1]
        assert row["equivalent_length"] == pytest.approx(row["loss_coefficient"] * 0.203 / factor, rel=1e-9)


def test_keeping_flagged_readings_is_told_to_concern_no_runs(sound):
    kept = reduce(misread(sound), monte_carlo=False, keep_all=True)
    assert any(
        "Flagged readings were kept in the fits of their runs, as asked; a run off the friction law is left out of the "
        "wall's fit all the same." in text
        for text in kept.assumptions
    )
    (flag,) = kept.flags[kept.flags["kind"] == "run"].to_dict("records")
    assert "left out of the wall's fit" in flag["suggestion"]
    assert kept.walls["runs_used"].tolist() == [6]


def test_scatter_that_is_stated_and_not_seen_is_no_contradiction(sound):
    """Readings that scatter by 0.2 mm where 1 mm was stated: 0.2 mm is found within a quarter."""
    note = reduce(sound, monte_carlo=False).scatter["note"].iloc[0]
    assert note.startswith("as stated; the runs themselves show no more than that (0.")
    found = float(note.split("(")[1].removesuffix(" mm)"))
    assert found == pytest.approx(0.2, rel=0.25)


def test_one_run_is_no_runs(sound):
    """A sixth of the flow of the slowest run: S falls below twice its uncertainty, and one run is left out."""
    flow = sound.runs["flow"].to_numpy(float)
    steep = sound.readings.to_numpy(float)
    slowest = int(flow.argmin())
    readings = sound.readings.copy()
    level = steep[slowest].mean()
    readings.iloc[slowest] = level + 1e-4 * np.resize([1.0, -1.0], steep.shape[1])
    (reason,) = reduce(replace(sound, readings=readings), monte_carlo=False).walls["reason"]
    assert "1 run left out: S does not exceed twice its uncertainty" in reason
