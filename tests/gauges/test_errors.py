"""Errors that a gauge's readings share, and readings that were not taken."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import gradeline
from gradeline.hydraulics.fluid import water_density
from gradeline.quantities import Measured
from gradeline.reduction import reduce
from tests.reduction.benches import FAST, TAPS, tube
from tests.simulate.surveys import Uncertainties


def test_errors_stated_alone_are_given_where_the_scatter_is_unknown():
    """Two taps, laminar, a bore ± stated and nothing else: u(f)/f = 5 u(D)/D, and the reason says what is missing."""
    survey, _ = tube((0.8e-5, 1.6e-5))
    ends = (0, len(TAPS) - 1)
    two = replace(
        survey,
        taps=tuple(survey.taps[i] for i in ends),
        observations=tuple(survey.observations[i] for i in ends),
        readings=survey.readings.iloc[:, list(ends)],
        repeats=survey.repeats.iloc[:, list(ends)],
        spreads=survey.spreads.iloc[:, list(ends)],
        reaches=(replace(survey.reaches[0], diameter=Measured(0.02664, 0.02664 * 0.002)),),
    )
    runs = reduce(two).runs
    np.testing.assert_allclose(runs["friction_factor_u"] / runs["friction_factor"], 0.01, rtol=0.02)
    assert runs["slope_u_random"].isna().all()
    assert runs["reason"].str.contains("the uncertainty holds the stated errors alone").all()


def test_one_run_that_rises_is_named():
    survey, _ = tube(FAST, stated=Uncertainties(reading=5e-4))
    readings = survey.readings.copy()
    readings.iloc[1] = readings.iloc[1].to_numpy()[::-1]
    (flag,) = [
        one
        for one in reduce(replace(survey, readings=readings)).flags.to_dict("records")
        if one["kind"] == "law"
    ]
    assert flag["suggestion"].startswith("in run 2 the head rises downstream")
    assert "swapped limbs" in flag["suggestion"]


LEGS = """
[gauge.c1]
kind = "compound manometer"
upstream = "T1"
downstream = "T2"
[[gauge.c1.leg]]
fluid = "water"
from = "T1"
to = "a"
[[gauge.c1.leg]]
fluid = "oil"
density = "1594 kg/m^3{u}"
from = "a"
to = "b"
[[gauge.c1.leg]]
fluid = "water"
from = "b"
to = "T2"
"""


def _chain(folder, u):
    folder.mkdir()
    (folder / "survey.toml").write_text(
        '[survey]\ntitle = "Chain"\n[fluid]\nname = "water"\n[[reach]]\nname = "tube"\nfrom = "0 m"\nto = "2 m"\n'
        'diameter = "20 mm"\nwall = "glass"\n[uncertainty]\nreading = "0.01 mm"\n' + LEGS.format(u=u),
        encoding="utf-8",
    )
    (folder / "taps.csv").write_text("tap,chainage [m]\nT1,0.2\nT2,1.8\n", encoding="utf-8")
    (folder / "readings.csv").write_text(
        "run,flow [L/s],temperature [degC],c1 a [mm],c1 b [mm]\n1,0.3,15,-500,-300\n2,0.4,15,-560,-240\n",
        encoding="utf-8",
    )
    return reduce(gradeline.read_survey(folder)).runs


def test_the_density_of_a_leg_is_an_error_of_all_runs(tmp_path):
    """Δh = (ρ_g/ρ − 1) Δ: one per cent of ρ_g is ρ_g/(ρ_g − ρ) per cent of the difference (JCGM 100, 5.1)."""
    with_u, without = _chain(tmp_path / "with", " +/- 15.94 kg/m^3"), _chain(tmp_path / "without", "")
    water = float(water_density(288.15))
    expected = 0.01 * 1594 / (1594 - water)
    share = np.sqrt(with_u["slope_u"] ** 2 - without["slope_u"] ** 2) / with_u["slope"].abs()
    np.testing.assert_allclose(share, expected, rtol=1e-3)


@pytest.mark.parametrize("missing", [(), (1, 3, 5)])
def test_a_drift_is_corrected_by_the_turns_of_what_was_read(missing):
    """Taps read in order while the flow falls by 2 %: each head is that of its own moment, read or not by the others."""
    from gradeline.flow_methods import FlowSetup  # noqa: PLC0415 - only here

    survey, _ = tube(FAST, sigma=1e-9)
    heads = survey.readings.to_numpy().copy()
    kept = [i for i in range(len(TAPS)) if i not in missing]
    flow = survey.runs["flow"].to_numpy()
    then = np.full(heads.shape, np.nan)
    then[:, kept] = 1.01 - 0.02 * np.linspace(0.0, 1.0, len(kept))
    top = heads[:, :1] + (heads[:, :1] - heads[:, 1:2]) * (TAPS[0] / (TAPS[1] - TAPS[0]))
    moved = top + (heads - top) * then**1.875
    runs = survey.runs.assign(flow_start=1.01 * flow, flow_end=0.99 * flow)
    drifting = replace(
        survey,
        runs=runs,
        readings=survey.readings * 0 + moved,
        flow=FlowSetup("direct", {}, read="in order", constant_head_at=0.0),
    )
    np.testing.assert_allclose(reduce(drifting).runs["slope"], reduce(survey).runs["slope"], rtol=2e-3)
