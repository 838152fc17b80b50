"""What a reduction carries for predictions, from memory or from ``carried.json``, as arrays."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gradeline.errors import ReductionError
from gradeline.quantities import Measured
from gradeline.reduction.carried import VERSION
from gradeline.reduction.tables import Reduction
from gradeline.survey import Fluid, PropertyTable

__all__ = ["FILE", "Carried", "CarriedWall", "carried_from"]

Array = NDArray[np.float64]

#: The file's name beside ``reduction.json``.
FILE = "carried.json"


@dataclass(frozen=True)
class CarriedWall:
    """What the runs say of a wall.

    Parameters
    ----------
    name : str
        Its label.
    roughness, low, high : float
        ε and its interval, m; NaN where it was not determined.
    interval : bool
        Whether anything tells how sure it is.
    reynolds_low, reynolds_high : float
        Least and largest Re of the runs behind it, dimensionless; NaN where there are none.
    published : float
        Published roughness that the survey stated, m; NaN where none.
    grid, score, mean : (G,), (G, d), (G, z) array
        See `gradeline.fitting.posterior.Posterior`.
    reason : str or None
        Why there is no roughness.
    """

    name: str
    roughness: float
    low: float
    high: float
    interval: bool
    reynolds_low: float
    reynolds_high: float
    published: float
    grid: Array
    score: Array
    mean: Array
    reason: str | None


@dataclass(frozen=True)
class Carried:
    """A line of K reaches and M fittings with what its runs say, SI units.

    Parameters
    ----------
    title : str
        Of the survey.
    level, dof : float
        Coverage of the intervals; degrees of freedom of the scatter, infinite where it is known.
    friction_law_u : float
        Relative standard uncertainty of f by the friction law; NaN where nobody stated one.
    gravity : float
        m/s².
    temperature : float
        Mean of the flowing runs, K; NaN where it is not known.
    fluid : Fluid
        What flows.
    flow_low, flow_high : float
        Of the flowing runs, m³/s.
    reaches : tuple of str
        Labels.
    wall_of : (K,) int array
        Wall of each reach.
    start, end, diameter, area, laminar_constant : (K,) array
        m, m, m, m², dimensionless.
    tested_low, tested_high : (K,) array
        Least and largest Re of the runs behind the roughness, in each reach, dimensionless; NaN where there are none.
    fittings : tuple of str
        Labels.
    at, reference, loss_coefficient : (M,) array
        Chainage, m; reach whose velocity head counts; K, NaN where it is not known.
    taken_off : (M, K) array
        Straight pipe whose friction is part of K, m.
    reasons : tuple of str or None
        Why there is no K.
    offtakes : tuple of (str, float)
        Label and chainage, m.
    tap_names, tap_chainage, tap_elevation : tuple of str, (T,) array
        m.
    by_diameter, by_flow, by_laminar : (z, K) array
        Relative change of the bores, of the velocity beyond that, and of f·Re of laminar flow, with each error.
    by_viscosity, by_gravity : (z,) array
        Relative changes.
    by_loss : (z, M) array
        Change of K.
    covariance : (z, z) array
        Of the errors for given roughnesses.
    walls : tuple of CarriedWall
        In order.
    notes : tuple of str
        What a prediction cannot hold.
    """

    title: str
    level: float
    dof: float
    friction_law_u: float
    gravity: float
    temperature: float
    fluid: Fluid
    flow_low: float
    flow_high: float
    reaches: tuple[str, ...]
    wall_of: NDArray[np.intp]
    start: Array
    end: Array
    diameter: Array
    area: Array
    laminar_constant: Array
    tested_low: Array
    tested_high: Array
    fittings: tuple[str, ...]
    at: Array
    reference: NDArray[np.intp]
    loss_coefficient: Array
    taken_off: Array
    reasons: tuple[str | None, ...]
    offtakes: tuple[tuple[str, float], ...]
    tap_names: tuple[str, ...]
    tap_chainage: Array
    tap_elevation: Array
    by_diameter: Array
    by_flow: Array
    by_laminar: Array
    by_viscosity: Array
    by_gravity: Array
    by_loss: Array
    covariance: Array
    walls: tuple[CarriedWall, ...]
    notes: tuple[str, ...]


def carried_from(source: Reduction | Mapping[str, Any] | str | Path) -> Carried:
    """Return what a reduction carries.

    Parameters
    ----------
    source : Reduction, mapping or path
        A reduction in memory, what its `carried` holds, the folder that `gradeline reduce` wrote, or a file in it.

    Raises
    ------
    ReductionError
        Where there is no such file, or where it is not what `gradeline reduce` writes.
    """
    held = _held(source)
    try:
        version = held["version"]
        if version > VERSION:
            raise ReductionError(
                f"{FILE} is of a newer form ({version}) than this program reads ({VERSION}); reduce the survey again, or "
                "use the program that wrote it"
            )
        return _carried(held)
    except (KeyError, TypeError, ValueError, IndexError, AttributeError) as error:
        if isinstance(error, ReductionError):
            raise
        raise ReductionError(
            f"{FILE} is not what gradeline reduce writes ({type(error).__name__}: {error}); reduce the survey again"
        ) from error


def _held(source: Reduction | Mapping[str, Any] | str | Path) -> Mapping[str, Any]:
    if isinstance(source, Reduction):
        return source.carried
    if isinstance(source, Mapping):
        return source
    path = Path(source)
    if path.is_dir():
        folder = (
            path
            if (path / FILE).is_file() or not (path / "reduction" / FILE).is_file()
            else path / "reduction"
        )
    elif path.is_file():
        folder = path.parent
    else:
        raise ReductionError(
            f"{path} does not exist; give the folder that gradeline reduce wrote, or its reduction.json"
        )
    file = folder / FILE
    if not file.is_file():
        what = (
            "reduce the survey again, since an older program wrote no such file"
            if (folder / "reduction.json").is_file()
            else f"reduce the survey first: gradeline reduce {folder}"
            if (folder / "survey.toml").is_file()
            else "give the folder that gradeline reduce wrote, with json among its formats"
        )
        raise ReductionError(f"{file} is missing; {what}")
    try:
        found = json.loads(file.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise ReductionError(f"{file} cannot be read ({error}); reduce the survey again") from error
    if not isinstance(found, dict):
        raise ReductionError(f"{file} is not what gradeline reduce writes; reduce the survey again")
    return found


def _number(value: float | None) -> float:
    return float("nan") if value is None else float(value)


def _table(rows: Any, *shape: int) -> Array:
    """Numbers as an array of a shape that nothing tells where there are no rows."""
    return np.array([[_number(one) for one in row] for row in rows], dtype=float).reshape(shape)


def _column(rows: list[Mapping[str, Any]], key: str) -> Array:
    return np.array([_number(row[key]) for row in rows], dtype=float)


def _carried(held: Mapping[str, Any]) -> Carried:
    reaches, fittings, inputs, walls = (held[key] for key in ("reaches", "fittings", "inputs", "walls"))
    k, m, p = len(reaches), len(fittings), len(inputs)
    losses = [int(one) for one in held["losses"]]
    z = p + len(losses)

    def errors(key: str, width: int) -> Array:
        found = np.zeros((z, width))
        found[:p] = _table([one[key] for one in inputs], p, width)
        return np.nan_to_num(found)

    by_loss = errors("loss_coefficient", m)
    for n, place in enumerate(losses):
        by_loss[p + n, place] = 1.0
    zeros = np.zeros(z - p)
    names = [str(one["wall"]) for one in walls]
    taps = held["taps"]
    dof = held["dof"]
    return Carried(
        title=str(held["title"]),
        level=float(held["level"]),
        dof=math.inf if dof is None else float(dof),
        friction_law_u=_number(held["friction_law_u"]),
        gravity=float(held["gravity"]),
        temperature=_number(held["temperature"]),
        fluid=_fluid(held["fluid"]),
        flow_low=_number(held["flow_low"]),
        flow_high=_number(held["flow_high"]),
        reaches=tuple(str(one["reach"]) for one in reaches),
        wall_of=np.array([names.index(str(one["wall"])) for one in reaches], dtype=np.intp),
        start=_column(reaches, "start"),
        end=_column(reaches, "end"),
        diameter=_column(reaches, "diameter"),
        area=_column(reaches, "area"),
        laminar_constant=_column(reaches, "laminar_constant"),
        tested_low=_tested(reaches, walls, "reynolds_low"),
        tested_high=_tested(reaches, walls, "reynolds_high"),
        fittings=tuple(str(one["fitting"]) for one in fittings),
        at=_column(fittings, "at"),
        reference=np.array([int(one["reach"]) for one in fittings], dtype=np.intp),
        loss_coefficient=_column(fittings, "loss_coefficient"),
        taken_off=_table([one["taken_off"] for one in fittings], m, k),
        reasons=tuple(one["reason"] for one in fittings),
        offtakes=tuple((str(one["offtake"]), float(one["at"])) for one in held["offtakes"]),
        tap_names=tuple(str(one["tap"]) for one in taps),
        tap_chainage=_column(taps, "chainage"),
        tap_elevation=_column(taps, "elevation"),
        by_diameter=errors("diameter", k),
        by_flow=errors("flow", k),
        by_laminar=errors("laminar_constant", k),
        by_viscosity=np.concatenate([_column(inputs, "viscosity"), zeros]),
        by_gravity=np.concatenate([_column(inputs, "gravity"), zeros]),
        by_loss=by_loss,
        covariance=_table(held["covariance"], z, z),
        walls=tuple(_wall(one, z) for one in walls),
        notes=tuple(str(one) for one in held["notes"]),
    )


def _tested(reaches: list[Mapping[str, Any]], walls: list[Mapping[str, Any]], key: str) -> Array:
    """An end of the tested Re of each reach; that of its wall where a file of an older program holds no other."""
    of_wall = {str(one["wall"]): one[key] for one in walls}
    return np.array(
        [_number(one[key] if key in one else of_wall[str(one["wall"])]) for one in reaches], dtype=float
    )


def _wall(held: Mapping[str, Any], errors: int) -> CarriedWall:
    grid = np.array(held["grid"], dtype=float)
    return CarriedWall(
        name=str(held["wall"]),
        roughness=_number(held["roughness"]),
        low=_number(held["roughness_low"]),
        high=_number(held["roughness_high"]),
        interval=bool(held["interval"]),
        reynolds_low=_number(held["reynolds_low"]),
        reynolds_high=_number(held["reynolds_high"]),
        published=_number(held["published"]),
        grid=grid,
        score=np.array(held["score"], dtype=float).reshape(len(grid), -1 if len(grid) else 0),
        mean=np.array(held["mean"], dtype=float).reshape(len(grid), errors),
        reason=held["reason"],
    )


def _measured(held: Mapping[str, Any] | None) -> Measured | None:
    return None if held is None else Measured(float(held["value"]), held["u"])


def _fluid(held: Mapping[str, Any]) -> Fluid:
    table = held.get("table")
    points = []
    for at, value in held.get("viscosity_at") or ():
        measured = _measured(value)
        assert measured is not None
        points.append((float(at), measured))
    return Fluid(
        name=str(held["name"]),
        density=_measured(held.get("density")),
        viscosity=_measured(held.get("viscosity")),
        kinematic_viscosity=_measured(held.get("kinematic_viscosity")),
        table=None
        if table is None
        else PropertyTable(
            file=str(table["file"]),
            temperature=tuple(table["temperature"]),
            density=tuple(table["density"]),
            kinematic_viscosity=tuple(table["kinematic_viscosity"]),
            density_u=table["density_u"],
            viscosity_u=table["viscosity_u"],
        ),
        viscosity_at=tuple(points),
        density_temperature=held.get("density_temperature"),
        expansion=_measured(held.get("expansion")),
        line_pressure=_measured(held.get("line_pressure")),
        humidity=float(held.get("humidity", 0.5)),
    )
