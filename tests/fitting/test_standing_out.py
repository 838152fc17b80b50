"""Values that stand out: the published example of the method, its rate of false alarms, and its limits."""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.fitting.standing_out import standing_out

#: The example of Rosner (1983), as NIST/SEMATECH's e-Handbook gives it (section 1.3.5.17.3); from memory.
# fmt: off
ROSNER = np.array(
    [
        -0.25, 0.68, 0.94, 1.15, 1.2, 1.26, 1.26, 1.34, 1.38, 1.43, 1.49, 1.49, 1.55, 1.56, 1.58, 1.65,
        1.69, 1.7, 1.76, 1.77, 1.81, 1.91, 1.94, 1.96, 1.99, 2.06, 2.09, 2.1, 2.14, 2.15, 2.23, 2.24, 2.26,
        2.35, 2.37, 2.4, 2.47, 2.54, 2.62, 2.64, 2.9, 2.92, 2.92, 2.93, 3.21, 3.26, 3.3, 3.59, 3.68, 4.3,
        4.64, 5.34, 5.42, 6.01,
    ]
)
# fmt: on


def test_the_published_example_has_three_that_hide_each_other():
    """R = 3.118, 2.942, 3.179 against 3.158, 3.151, 3.143: only the third is beyond its limit, and then all three are."""
    assert ROSNER[standing_out(ROSNER, most=10, false_alarm=0.05)].tolist() == [5.34, 5.42, 6.01]
    assert not standing_out(ROSNER, most=2, false_alarm=0.05).any()


@pytest.mark.parametrize("count", [6, 10, 20])
def test_sound_values_are_rarely_named(count):
    """One in a hundred, as asked: of 2000 at most twice as many, 40, and not none."""
    rng = np.random.default_rng(count)
    named = sum(
        standing_out(rng.standard_normal(count), most=count // 4, false_alarm=0.01).any() for _ in range(2000)
    )
    assert 5 <= named <= 40


def test_too_few_or_equal_values_name_none():
    assert not standing_out([0.0, 0.0, 9.0], most=1, false_alarm=0.01).any()
    assert not standing_out(np.full(8, 2.0), most=2, false_alarm=0.01).any()
