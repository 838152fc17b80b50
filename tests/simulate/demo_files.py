"""What the demo surveys share: random numbers that stay the same for good, and how files are printed."""

from __future__ import annotations

import random
from statistics import NormalDist

import numpy as np

from tests.simulate.line import Floats


class Draws:
    """Normal deviates that one seed fixes for good."""

    def __init__(self, seed: int) -> None:
        self._random = random.Random(seed)

    def one(self, u: float) -> float:
        """Draw a normal deviate of standard deviation `u`."""
        return NormalDist().inv_cdf(self._random.random()) * u

    def sized(self, least: float, most: float, size: int) -> Floats:
        """Draw values whose size is even between `least` and `most`, either sign alike."""
        ends = [(self._random.random(), self._random.random()) for _ in range(size)]
        return np.array([(least + (most - least) * a) * (1 if b < 0.5 else -1) for a, b in ends])

    def many(self, u: float, *shape: int) -> Floats:
        """Draw an array of them."""
        return np.array([self.one(u) for _ in range(int(np.prod(shape)))]).reshape(shape)


def gravity(latitude: float, altitude: float) -> float:
    """Normal gravity of the WGS 84 ellipsoid (Somigliana) with the free-air gradient, m/s²; degrees and m."""
    square = np.sin(np.radians(latitude)) ** 2
    at_sea = 9.7803253359 * (1 + 0.00193185265241 * square) / np.sqrt(1 - 0.00669437999014 * square)
    return float(at_sea - 3.086e-6 * altitude)


def stepped(values: Floats, step: float, decimals: int) -> list[list[str]]:
    """Round readings to the step of their scale and print them."""
    return [[f"{round(value / step) * step:.{decimals}f}" for value in row] for row in values]


def commented(lines: list[str]) -> str:
    """Make the comment block at the head of a survey.toml."""
    return "".join(f"# {line}".rstrip() + "\n" for line in lines)


def listed(values: Floats, form: str) -> str:
    """Print a row of true values."""
    return ", ".join(f"{value:{form}}" for value in values)


def table(rows: list[list[str]]) -> str:
    """Join cells to csv."""
    return "".join(",".join(row) + "\n" for row in rows)
