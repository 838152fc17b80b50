"""Which law each wall's runs follow, and how they depart from it, as tables and as flags."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from gradeline.fitting.departures import Departures, measure_departures
from gradeline.fitting.laws import NONE, LawComparison, compare_laws
from gradeline.hydraulics.friction_laws import SAND_GRAIN
from gradeline.quantities.printing import format_change, format_number, rounded
from gradeline.reduction.tables import DRAWING_TABLES
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.walls import Wall

__all__ = [
    "UNSEEN_OFFSETS",
    "WallLaws",
    "departure_flag",
    "departure_table",
    "law_table",
    "laws_of",
    "likelier_error",
]

#: Stands among the assumptions where the diagnosis of the taps does not say so.
UNSEEN_OFFSETS = (
    "An error of the heads that all taps share cannot be seen and does no harm to slopes; one in proportion to the chainage "
    "tilts every line alike and shows only as an intercept of S against the friction law."
)
_TOO_FEW = "fewer than three turbulent runs"


@dataclass(frozen=True)
class WallLaws:
    """A wall with the laws its slopes were held against; None where there were too few of them."""

    wall: Wall
    comparison: LawComparison | None
    departures: Departures | None


def laws_of(walls: tuple[Wall, ...]) -> tuple[WallLaws, ...]:
    """Hold every wall's slopes against the laws; walls whose friction no wall has are left alone."""
    found = []
    for wall in walls:
        if not np.isfinite(wall.fit.roughness) or wall.implausible() is not None:
            found.append(WallLaws(wall, None, None))
            continue
        found.append(
            WallLaws(wall, compare_laws(wall.data, wall.fit), measure_departures(wall.data, wall.fit))
        )
    return tuple(found)


def law_table(laws: tuple[WallLaws, ...]) -> pd.DataFrame:
    """Return the laws, a row a wall and law; a single row with the reason where there is nothing to compare."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["laws"]}

    def add(**values: Any) -> None:
        for name, column in rows.items():
            column.append(values.get(name, np.nan if DRAWING_TABLES["laws"][name].kind == "number" else None))

    for one in laws:
        compared = one.comparison
        if compared is None:
            add(wall=one.wall.name, reason=_TOO_FEW)
            continue
        least = min(fit.chi_square for fit in compared.fits)
        for fit in compared.fits:
            add(
                wall=one.wall.name,
                law=fit.law,
                roughness=fit.roughness,
                chi_square=fit.chi_square,
                chi_square_above=fit.chi_square - least,
                needed=compared.needed,
                slopes_used=int(compared.used.sum()),
                verdict=compared.verdict,
                fit_p=compared.fit_p,
                reason=_why_none(compared, one.departures) if compared.verdict == NONE else None,
            )
    return frame("laws", rows)


def _why_none(compared: LawComparison, departures: Departures | None) -> str:
    """Why no law describes the slopes."""
    said = []
    if np.isfinite(compared.fit_p) and compared.fit_p < 0.01:
        chance = "p < 0.001" if compared.fit_p < 1e-3 else f"p = {format_number(compared.fit_p, 1)}"
        said.append(f"the slopes scatter more than is stated or shown by the readings ({chance})")
    if (
        np.isfinite(compared.trend)
        and compared.trend_u > 0
        and (abs(compared.trend) > 2.5 * compared.trend_u)
    ):
        said.append(
            f"f {'falls' if compared.trend < 0 else 'rises'} by "
            f"({rounded(100 * abs(compared.trend), 100 * compared.trend_u)}) % per decade of Re"
        )
    why = f"about the best of them, {compared.best}, {' and '.join(said)}"
    if departures is not None and departures.by_intercept:
        why += "; an intercept of S, the same in all runs, would account for it"
    return why


def departure_table(laws: tuple[WallLaws, ...]) -> pd.DataFrame:
    """Return trend and intercept of every wall that has runs enough."""
    rows: dict[str, list[Any]] = {name: [] for name in DRAWING_TABLES["departures"]}
    for one in laws:
        if one.departures is None or not np.isfinite(one.departures.intercept.value):
            continue
        for kind in ("trend", "intercept"):
            found = getattr(one.departures, kind)
            other = _other_account(one, kind) if found.beyond_chance else None
            values = (one.wall.name, kind, found.value, found.u, found.rise, found.beyond_chance, other)
            for name, entry in zip(rows, values, strict=True):
                rows[name].append(entry)
    return frame("departures", rows)


def _other_account(laws: WallLaws, kind: str) -> str | None:
    """What accounts for the slopes better than a departure that is beyond chance; None where nothing does."""
    found, compared = laws.departures, laws.comparison
    if found is None:
        return None
    if compared is not None and compared.verdict == SAND_GRAIN.name:
        return "the sand-grain law accounts for it"
    rises = {"trend": found.trend.rise, "intercept": found.intercept.rise, "offset": found.offset.rise}
    best = max(rises, key=lambda name: rises[name])
    words = {
        "trend": "a trend of f over Re accounts better for the slopes",
        "intercept": "an intercept of S accounts better for the slopes",
        "offset": "an error of the bore or of all flows accounts better for the slopes",
    }
    return None if best == kind else words[best]


def departure_flag(laws: WallLaws) -> tuple[float, str] | None:
    """Return (score, suggestion) where something else than a trend of f over Re explains the slopes better.

    Parameters
    ----------
    laws : WallLaws
        Of one wall.

    Returns
    -------
    tuple or None
        The sand-grain law, where it is told from Colebrook–White and leaves nothing over; or an intercept of S beyond
        chance that does more than a trend. None: a trend is the better account, or there is nothing to account for.
    """
    found, compared = laws.departures, laws.comparison
    if found is None:
        return None
    trend, intercept = found.trend, found.intercept
    if not (trend.beyond_chance or intercept.beyond_chance):
        return None
    name = laws.wall.name
    if compared is not None and compared.verdict == SAND_GRAIN.name:
        plain, sand = compared.fits[0], compared.fits[1]
        return trend.value / trend.u, (
            f"wall {name!r}: f follows the transition of a sand-grain wall (ε = {1000 * sand.roughness:.2g} mm) rather than "
            f"Colebrook–White (χ² larger by {plain.chi_square - sand.chi_square:.2g}): roughness of one size; predictions by "
            "Colebrook–White are off between smooth and rough"
        )
    if not found.by_intercept:
        return None
    return intercept.value / intercept.u, (
        f"wall {name!r}: S lies {'above' if intercept.value > 0 else 'below'} the law by the same "
        f"({rounded(1000 * abs(intercept.value), 1000 * intercept.u)}) mm/m in all runs: heads whose error grows with the "
        "chainage do that; look at the levels of taps and gauges and take a static run"
    )


def likelier_error(wall: Wall, bore: float, flow: float) -> str:
    """Say which of two errors is the likelier cause, by how many stated standard uncertainties each would take.

    Parameters
    ----------
    wall : Wall
        Its shared inputs hold what was stated.
    bore, flow : float
        Relative error of the bores, and of all flows, either of which would bring f onto the law.

    Returns
    -------
    str
        A clause that ends a sentence.
    """
    data, used = wall.data, wall.fit.used
    bores = np.sqrt((data.diameter_effect**2).sum(axis=1))[used.any(axis=0)]
    shared = np.broadcast_to(data.flow_effect, (*used.shape, data.diameter_effect.shape[1]))[used]
    own = np.broadcast_to(data.flow_u.reshape(len(used), -1), used.shape)[used]
    # The runs' own flow errors average out.
    flow_u = float(np.sqrt((shared.mean(axis=0) ** 2).sum() + (own**2).sum() / max(len(own), 1) ** 2))
    bore_u = float(bores.mean()) if len(bores) else 0.0
    if bore_u <= 0 and flow_u <= 0:
        return "neither uncertainty was stated, so nothing tells which is the likelier"
    sizes = {"bore": (bore, bore_u), "flow": (flow, flow_u)}
    told = {name: abs(size) / u for name, (size, u) in sizes.items() if u > 0}
    if len(told) == 1:
        name = next(iter(told))
        other = "flow" if name == "bore" else "bore"
        return (
            f"that is {format_number(told[name], 2)} times the standard uncertainty stated of the {name}; that of the {other} "
            "was not stated, so nothing tells which is the likelier"
        )
    near, far = sorted(told, key=lambda name: told[name])
    words = (
        f"the {near} would be off by {format_number(told[near], 2)} of its stated standard uncertainties, the {far} by "
        f"{format_number(told[far], 2)}"
    )
    if told[far] < 1.5 * told[near]:
        return f"{words}: neither is much the likelier"
    return f"{words}: the {near} is the likelier" + (
        f", though {format_change(sizes[near][0])} is a lot" if told[near] > 3 else ""
    )
