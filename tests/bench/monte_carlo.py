"""Draws of f against plain normal numbers: what ``python -m tests.bench.ratios`` measures of Monte Carlo."""

from __future__ import annotations

from dataclasses import replace
from unittest import mock

import numpy as np

from gradeline.quantities import Measured
from gradeline.reduction import estimates
from gradeline.reduction.monte_carlo import RunDraws
from tests.simulate.surveys import NominalReach, Uncertainties, make_survey

DRAWN_RUNS, BLOCK, CHUNK = 100, 10_000, 16


def run_draws() -> list[RunDraws]:
    """The draws of 100 turbulent runs with all that a bench may state, in the groups in which they are made."""
    survey, _ = make_survey(
        np.random.default_rng(4),
        chainage=np.linspace(0.2, 5.3, 10),
        reaches=[NominalReach(0.0, 5.5, 0.02664, 2e-5)],
        flows=np.linspace(2e-4, 1.5e-3, DRAWN_RUNS),
        sigma=4e-4,
        stated=Uncertainties(
            flow=4e-3, flow_scale=3e-3, chainage=1e-3, zero=1e-3, scale=5e-4, temperature=0.2
        ),
    )
    reach = replace(survey.reaches[0], diameter=Measured(0.02664, 3e-5))
    with mock.patch.object(estimates, "checked_friction", wraps=estimates.checked_friction) as checked:
        estimates.estimates_of(replace(survey, reaches=(reach,)))
    flowing, friction = checked.call_args.args
    places = np.arange(DRAWN_RUNS)
    return [
        RunDraws(flowing, friction, mine, np.zeros(len(mine), dtype=np.intp))
        for mine in np.split(places, range(CHUNK, DRAWN_RUNS, CHUNK))
    ]


def draw_factors(draws: list[RunDraws], count: int) -> list[np.ndarray]:
    """`count` draws of f of every run, block by block; the limits of each block, as they are used."""
    generator = np.random.default_rng(1)
    limits = []
    for group in draws:
        outputs = np.arange(group.pairs, 2 * group.pairs)
        for _ in range(count // BLOCK):
            values, _ = group(generator, BLOCK, outputs)
            limits.append(np.partition(values, (249, 9749), axis=1)[:, (249, 9749)])
    return limits


def draw_normal(count: int) -> None:
    """The same number of standard normal numbers, in the same blocks."""
    generator = np.random.default_rng(1)
    for _ in range(count // BLOCK):
        generator.standard_normal((DRAWN_RUNS, BLOCK))
