"""Grade lines against worked examples and the energy balance."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gradeline.hydraulics import friction, gradelines, local_losses


def test_pressures_along_a_line_with_elbows_a_valve_and_a_faucet():
    """Munson, Young & Okiishi, Fundamentals of Fluid Mechanics, Ex 8.8 p 451, values on its figure (ft, s, slug).

    3/4 in copper pipe, 0.0267 ft3/s, f 0.0215; four elbows of K 1.5, a valve of K 10, a faucet of K 2 to a free
    jet of 1/2 in at an elevation of 20 ft. The figure is in psi; the book takes alpha = 1.
    """
    printed = [30.5, 27.8, 27.1, 21.0, 20.2, 19.3, 18.5, 12.4, 11.7, 9.93, 4.84, 3.09]
    bore, flow, rho, f, g = 0.0625, 0.0267, 1.94, 0.0215, 32.2
    velocity = flow / (np.pi / 4 * bore**2)
    assert rho * velocity * bore / 2.34e-5 == pytest.approx(45000, rel=0.005)
    head = float(friction.velocity_head(velocity, g))
    jet = head * (bore / (0.5 / 12)) ** 4
    slope = f / bore * head
    assert slope == pytest.approx(0.40457, abs=5e-4)
    fittings = [15.0, 25.0, 30.0, 40.0, 50.0, 60.0]
    losses = np.array([1.5, 1.5, 1.5, 1.5, 10.0, 2.0]) * head
    start = 20.0 + jet + slope * 60.0 + losses.sum()
    assert start == pytest.approx(71.40, abs=0.05)

    chainage, side = gradelines.stations([0.0, 60.0], fittings)
    line = gradelines.grade_lines(
        chainage,
        side,
        start_energy=start,
        reach_bounds=[0.0, 60.0],
        slopes=[slope],
        velocity_heads=[head],
        loss_chainages=fittings,
        loss_heads=losses,
    )
    axis = np.interp(chainage, [0, 15, 25, 30, 40, 60], [0, 0, 10, 10, 20, 20])
    psi = rho * g * (line.piezometric_head - axis) / 144
    # the last station lies past the faucet, in the jet
    assert len(psi) == len(printed) + 1
    assert psi[:-1] == pytest.approx(printed, abs=0.1)
    # the energy line at the same points: the hydraulic one a velocity head below it, the jet's energy at the end
    energy_psi = rho * g * (line.energy_head - axis) / 144
    assert energy_psi[:-1] == pytest.approx(np.array(printed) + rho * velocity**2 / 288, abs=0.1)
    assert line.energy_head[-1] == pytest.approx(20.0 + jet, rel=1e-12)


def _pressures_at_step(bores, velocity, pressure, *, rho, alpha, coefficient):
    g = 9.81
    velocities = velocity * np.array([1.0, (bores[0] / bores[1]) ** 2])
    heads = alpha * friction.velocity_head(velocities, g)
    line = gradelines.grade_lines(
        [1.0, 1.0],
        [-1, 1],
        start_energy=pressure / (rho * g) + heads[0],
        reach_bounds=[0.0, 1.0, 2.0],
        slopes=[0.0, 0.0],
        velocity_heads=heads,
        loss_chainages=[1.0],
        loss_heads=[coefficient * friction.velocity_head(velocity, g)],
    )
    return rho * g * line.piezometric_head


def test_pressure_rises_over_a_gradual_expansion():
    # Cengel & Cimbala Ex 8-6 p 370: 60 -> 90 mm, K 0.133, alpha 1.06: 150 -> 168 kPa
    before, after = _pressures_at_step((0.06, 0.09), 7.0, 150e3, rho=1000.0, alpha=1.06, coefficient=0.133)
    assert before == pytest.approx(150e3, rel=1e-12)
    assert after == pytest.approx(168e3, abs=500)


def test_pressure_rises_over_a_sudden_expansion():
    # Subramanya Ex 11.1 p 238: 6 -> 9 cm, 450 L/min, 20 kPa, 9.79 kN/m3: 21.73 kPa
    velocity = 0.45 / 60 / (np.pi / 4 * 0.06**2)
    k = local_losses.change_of_bore_loss_coefficient(0.06, 0.09)
    _, after = _pressures_at_step((0.06, 0.09), velocity, 20e3, rho=9790 / 9.81, alpha=1.0, coefficient=k)
    assert after == pytest.approx(21.73e3, abs=10)


def test_batch_of_runs_is_each_run():
    bounds, losses = [0.0, 2.0, 5.0, 9.0], [2.0, 5.0, 7.5]
    x, side = gradelines.stations(bounds, losses, [0.5, 8.0])
    rng = np.random.default_rng(3)
    start, slopes = rng.uniform(5, 9, 4), rng.uniform(0, 0.2, (4, 3))
    heads, drops = rng.uniform(0, 0.5, (4, 3)), rng.uniform(0, 0.3, (4, 3))

    def lines(run):
        return gradelines.grade_lines(
            x,
            side,
            start_energy=start[run],
            reach_bounds=bounds,
            slopes=slopes[run],
            velocity_heads=heads[run],
            loss_chainages=losses,
            loss_heads=drops[run],
        )

    together = lines(slice(None))
    assert together.energy_head.shape == (4, len(x))
    for run in range(4):
        alone = lines(run)
        assert np.array_equal(together.energy_head[run], alone.energy_head)
        assert np.array_equal(together.piezometric_head[run], alone.piezometric_head)
        # the whole way down, added up by hand
        total = slopes[run] @ [2.0, 3.0, 4.0] + drops[run].sum()
        assert alone.energy_head[-1] == pytest.approx(start[run] - total, rel=1e-13)
        assert alone.velocity_head[[0, -1]].tolist() == heads[run, [0, -1]].tolist()


def test_without_losses_one_station_of_many_runs():
    line = gradelines.grade_lines(
        [1.0],
        [1],
        start_energy=[3.0, 4.0],
        reach_bounds=[0.0, 2.0],
        slopes=[[0.5], [1.0]],
        velocity_heads=[0.1],
    )
    assert line.energy_head.tolist() == [[2.5], [3.0]]
    assert line.velocity_head.shape == (2, 1)


def test_what_is_unknown_downstream_leaves_the_line_upstream_known():
    line = gradelines.grade_lines(
        [1.0, 2.0, 2.0, 3.0],
        [1, -1, 1, 1],
        start_energy=1.0,
        reach_bounds=[0.0, 2.0, 4.0],
        slopes=[0.1, np.nan],
        velocity_heads=[0.0, 0.0],
        loss_chainages=[2.0],
        loss_heads=[0.2],
    )
    assert line.energy_head[:3] == pytest.approx([0.9, 0.8, 0.6])
    assert np.isnan(line.energy_head[3])


@given(
    st.lists(st.floats(0.01, 10.0), min_size=1, max_size=5),
    st.lists(st.floats(0.0, 1.0), max_size=4),
    st.randoms(use_true_random=False),
)
def test_energy_never_rises_and_the_lengths_add_up(lengths, places, random):
    bounds = np.concatenate([[3.0], 3.0 + np.cumsum(lengths)])
    losses = 3.0 + np.array(places) * (bounds[-1] - 3.0)
    x, side = gradelines.stations(bounds, losses)
    line = gradelines.grade_lines(
        x,
        side,
        start_energy=50.0,
        reach_bounds=bounds,
        slopes=[random.uniform(0, 0.1) for _ in lengths],
        velocity_heads=[random.uniform(0, 1) for _ in lengths],
        loss_chainages=losses,
        loss_heads=[random.uniform(0, 1) for _ in places],
    )
    assert (np.diff(line.energy_head) <= 1e-12).all()
    assert (np.diff(x) >= 0).all()
    assert gradelines.path_lengths(x, bounds).sum(axis=1) == pytest.approx(x - 3.0, abs=1e-12)
    assert (line.energy_head - line.piezometric_head) == pytest.approx(line.velocity_head, abs=1e-12)


def test_a_loss_at_either_end_of_the_line_is_a_step():
    x, side = gradelines.stations([0.0, 1.0], [0.0, 1.0])
    assert x.tolist() == [0.0, 0.0, 1.0, 1.0]
    assert side.tolist() == [-1, 1, -1, 1]


def test_a_tap_at_a_loss_counts_as_upstream_of_it():
    assert gradelines.passed([2.0, 2.0 + 1e-9], [2.0]).ravel().tolist() == [0.0, 1.0]


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: gradelines.path_lengths([1.0, 7.5], [0.0, 7.0]), r"outside the line, 0.0 to 7.0 m: 7.5"),
        (lambda: gradelines.path_lengths([1.0], [0.0, 7.0, 7.0]), "increasing chainages"),
        (lambda: gradelines.stations([0.0, 7.0], [8.0]), "outside the line"),
        (
            lambda: gradelines.grade_lines(
                [1.0], [0], start_energy=1.0, reach_bounds=[0.0, 2.0], slopes=[0.0], velocity_heads=[0.0]
            ),
            "side must be -1 or 1",
        ),
    ],
)
def test_wrong_places_are_refused(call, words):
    with pytest.raises(ValueError, match=words):
        call()
