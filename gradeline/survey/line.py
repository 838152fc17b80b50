"""The line: where it lies, its reaches with their walls, what branches off, its fittings and its taps."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from gradeline.quantities import Measured
from gradeline.survey.stated import Stated

__all__ = [
    "Fitting",
    "Offtake",
    "Reach",
    "Section",
    "SideValve",
    "Site",
    "Tap",
    "WallHistory",
]


@dataclass(frozen=True)
class Site:
    """Where the line lies: gravity (m/s²) as stated, or latitude (rad) and altitude (m)."""

    latitude: float | None = None
    altitude: float | None = None
    gravity: Measured | None = None


@dataclass(frozen=True)
class Section:
    """A cross-section that is not a circle.

    Parameters
    ----------
    shape : {"rectangle", "annulus", "given"}
        What `sides` are: width and height, outer and inner diameter, or area and wetted perimeter.
    sides : tuple of Measured
        Two of them, m (an area in m²).
    laminar_constant : float or None
        f·Re of laminar flow on the hydraulic diameter, dimensionless, where the survey gives it.
    """

    shape: Literal["rectangle", "annulus", "given"]
    sides: tuple[Measured, Measured]
    laminar_constant: float | None = None


@dataclass(frozen=True)
class Offtake:
    """A branch that takes a part of the flow away, at a boundary between two reaches.

    Parameters
    ----------
    name : str
        Its label.
    at : float
        Chainage, m.
    flow_u : Stated or None
        Standard uncertainty of the flow it takes, the same error in all runs. What it takes in each run (m³/s) is
        the column ``offtake NAME`` of `Survey.runs`.
    """

    name: str
    at: float
    flow_u: Stated | None = None

    @property
    def column(self) -> str:
        """Its column in `Survey.runs`."""
        return f"offtake {self.name}"


@dataclass(frozen=True)
class SideValve:
    """A valve on a branch of the line, and whether it was shut during the survey.

    Parameters
    ----------
    name : str
        Its label.
    state : {"shut", "open", "unknown"}
        As stated.
    where : str
        Where flow can leave by it, as a phrase with the taps beside it.
    """

    name: str
    state: Literal["shut", "open", "unknown"]
    where: str = ""


@dataclass(frozen=True)
class Reach:
    """A length of one bore and one wall, from chainage `start` to `end` (m), in flow order.

    `inlet` says that the flow enters here undeveloped, so that the entrance length counts from `start`. Where there
    is a `section`, `diameter` is its hydraulic diameter.
    """

    name: str
    start: float
    end: float
    diameter: Measured
    wall: str
    inlet: bool = False
    section: Section | None = None

    @property
    def length(self) -> float:
        """Length of the reach, m."""
        return self.end - self.start


@dataclass(frozen=True)
class WallHistory:
    """What was known of a wall beforehand.

    Parameters
    ----------
    wall : str
        Its label.
    published : Measured or None
        A published roughness of such a surface, m.
    published_source : str or None
        Where it stands.
    earlier : Measured or None
        What was found of this wall earlier, m.
    earlier_source : str or None
        When or by whom.
    """

    wall: str
    published: Measured | None = None
    published_source: str | None = None
    earlier: Measured | None = None
    earlier_source: str | None = None


@dataclass(frozen=True)
class Fitting:
    """A local loss at one chainage.

    Parameters
    ----------
    name : str
        Its label.
    at : float
        Chainage, m.
    loss_coefficient : Measured or None
        K, or None where it is to be fitted.
    velocity : {"smaller", "upstream", "downstream"}
        The bore whose velocity head K refers to.
    change_of_bore : bool
        Whether it stands for the change of bore at a boundary between reaches.
    approach, recovery : float
        Taps nearer than this many bores upstream and downstream of its ends are disturbed.
    kind : str or None
        What it is, a name of `gradeline.fitting_kinds.fitting_kinds`; None where nobody said.
    length : float
        Between its ends along the axis, m, `at` in the middle. The friction of a straight pipe of this length is part
        of a K that is fitted; with 0, K is what the fitting loses beyond the straight pipe that runs through.
    """

    name: str
    at: float
    loss_coefficient: Measured | None
    velocity: Literal["smaller", "upstream", "downstream"] = "smaller"
    change_of_bore: bool = False
    approach: float = 2.0
    recovery: float = 10.0
    kind: str | None = None
    length: float = 0.0


@dataclass(frozen=True)
class Tap:
    """A pressure tap.

    Parameters
    ----------
    name : str
        Its label.
    chainage : float
        True length along the pipe's axis, m.
    elevation : float
        Of the pipe's axis above datum, m.
    gauge : str or None
        The gauge that reads it; None where only differential gauges do.
    gauge_elevation : float or None
        Elevation of its gauge, m; None: at the pipe's axis.
    reading_u, chainage_u, elevation_u : float or None
        This tap's own standard uncertainties, which go before those of the gauge and the survey.
    """

    name: str
    chainage: float
    elevation: float = 0.0
    gauge: str | None = None
    gauge_elevation: float | None = None
    reading_u: float | None = None
    chainage_u: float | None = None
    elevation_u: float | None = None
