"""A line made ready for predictions: at any flow all of its heads with their intervals, and the flow for a head."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from gradeline.hydraulics.friction import (
    LAMINAR_LIMIT,
    TURBULENT_LIMIT,
    colebrook_white_sensitivities,
    regime,
)
from gradeline.prediction.carried import Carried
from gradeline.prediction.interval import profile_interval, sets_of
from gradeline.prediction.losses import (
    LAMINAR_IN_ZONE,
    TURBULENT_IN_ZONE,
    ZONE,
    Conditions,
    Parts,
    friction_parts,
    loss_parts,
    velocity_head_parts,
)
from gradeline.quantities import Measured

__all__ = ["BETWEEN", "CRITICAL", "Answer", "PipeLine", "Place"]

Array = NDArray[np.float64]
Three = tuple[float, float, float]

CRITICAL = "Re lies in the critical zone (2000 to 4000), where no law of friction holds"
BETWEEN = f"{CRITICAL}: the interval runs from laminar to turbulent flow"
_NO_INTERVAL = "a single run of unknown scatter tells no interval"
_NOTHING_STATED = "nothing is stated that would make it uncertain"
_SAME_PLACE = 1e-6
_DOUBLINGS = 60
#: A head that is missed by more than this share is passed over in a jump; without one it is met to rounding.
_MISSED = 1e-6


@dataclass(frozen=True)
class Place:
    """A place where the grade lines bend or a tap sits; `after` a loss or change of bore there, or before it."""

    chainage: float
    name: str
    after: bool
    reach: int


@dataclass(frozen=True)
class Answer:
    """All heads at one flow.

    Parameters
    ----------
    flow : float
        m³/s.
    total, extra : tuple of float
        Head loss of the line, and that beyond a new one: value, low, high, m; NaN where there is none.
    new_total : float
        Head loss of the new line, m.
    reaches, fittings, grade_lines : list of dict
        Rows of the tables of those names.
    reason, extra_reason : str or None
        Why a value, or what is lost beyond a new line, is missing.
    """

    flow: float
    total: Three
    extra: Three
    new_total: float
    reaches: list[dict[str, Any]]
    fittings: list[dict[str, Any]]
    grade_lines: list[dict[str, Any]]
    reason: str | None
    extra_reason: str | None


@dataclass(frozen=True)
class PipeLine:
    """A line under given conditions.

    Parameters
    ----------
    carried : Carried
        The line and what its runs say.
    conditions : Conditions
        What flows.
    replaced : mapping of int to Measured
        Roughness in place of a wall's own, by the wall's number, m.
    new_roughness : (W,) array or None
        Of a new pipe, m.
    end_head : float or None
        Piezometric head at the downstream end, m; None: the pipe's axis there.
    measured_u : float
        Standard uncertainty of a measured head loss to be compared, m.
    """

    carried: Carried
    conditions: Conditions
    replaced: Mapping[int, Measured]
    new_roughness: Array | None = None
    end_head: float | None = None
    measured_u: float = 0.0

    @cached_property
    def _sets(self) -> Any:
        return sets_of(self.carried)

    @cached_property
    def roughness(self) -> Array:
        """ε of each reach, best set first (C, K), m; NaN where nothing is known."""
        rough = self._sets.roughness.copy()
        for wall, one in self.replaced.items():
            rough[:, wall] = one.value
        return np.asarray(rough[:, self.carried.wall_of])

    @cached_property
    def _covariance(self) -> Array:
        """Of the errors that the runs tell of, the law here and in a new pipe, and roughnesses that were stated."""
        z = len(self.carried.covariance)
        whole = np.eye(z + 2 + len(self.replaced))
        whole[:z, :z] = self.carried.covariance
        return whole

    @cached_property
    def places(self) -> tuple[Place, ...]:
        """Every place of the grade lines, in order."""
        carried = self.carried
        losses = carried.at[np.nan_to_num(carried.loss_coefficient) != 0]
        inner = carried.start[1:]
        names: dict[float, list[str]] = {}
        for x, name in [
            (float(carried.start[0]), "upstream end"),
            (float(carried.end[-1]), "downstream end"),
            *((float(x), f"end of {carried.reaches[k]}") for k, x in enumerate(inner)),
            *(
                (float(x), name)
                for x, name, k in zip(carried.at, carried.fittings, carried.loss_coefficient, strict=True)
                if np.nan_to_num(k) != 0
            ),
            *zip(carried.tap_chainage.tolist(), carried.tap_names, strict=True),
        ]:
            if not carried.start[0] - _SAME_PLACE <= x <= carried.end[-1] + _SAME_PLACE:
                continue
            known = next((at for at in names if abs(at - x) < _SAME_PLACE), x)
            names.setdefault(known, []).append(name)
        found = []
        last = len(carried.reaches) - 1
        for x in sorted(names):
            text = ", ".join(names[x])
            before = int(np.clip(np.searchsorted(carried.end, x - _SAME_PLACE), 0, last))
            after = int(np.clip(np.searchsorted(carried.end, x + _SAME_PLACE), 0, last))
            bends = before != after or (np.abs(losses - x) < _SAME_PLACE).any()
            found.append(Place(x, text, False, before))
            if bends:
                found.append(Place(x, text, True, after))
        return tuple(found)

    @cached_property
    def elevation(self) -> Array:
        """Of the pipe's axis at each place, m."""
        carried = self.carried
        if not len(carried.tap_chainage):
            return np.zeros(len(self.places))
        order = np.argsort(carried.tap_chainage, kind="stable")
        at = [one.chainage for one in self.places]
        return np.interp(at, carried.tap_chainage[order], carried.tap_elevation[order])

    @cached_property
    def _weights(self) -> Array:
        """What each target is of the parts (T, N): reaches, fittings, total, extra, then energy and hydraulic lines.

        Parts: friction of K reaches, losses of M fittings, friction of K new reaches, velocity heads of K reaches.
        """
        carried = self.carried
        k, m = len(carried.reaches), len(carried.fittings)
        friction, loss, new, speed = (
            slice(0, k),
            slice(k, k + m),
            slice(k + m, 2 * k + m),
            slice(2 * k + m, 3 * k + m),
        )
        count = 3 * k + m
        each = np.eye(count)[: k + m]
        total, extra = np.zeros(count), np.zeros(count)
        total[: k + m] = 1.0
        extra[friction], extra[new] = 1.0, -1.0
        own = carried.end - carried.start - carried.taken_off.sum(axis=0)
        lines = []
        for place in self.places:
            x = place.chainage
            below = (carried.at > x + _SAME_PLACE) | (
                (np.abs(carried.at - x) <= _SAME_PLACE) & (not place.after)
            )
            length = np.clip(carried.end - np.maximum(carried.start, x), 0.0, None)
            length = length - below @ carried.taken_off if m else length
            row = np.zeros(count)
            row[friction] = length / own
            row[loss] = below
            row[speed][-1] += 1.0
            lines.append(row)
        hydraulic = []
        for place, row in zip(self.places, lines, strict=True):
            one = row.copy()
            one[speed][place.reach] -= 1.0
            hydraulic.append(one)
        return np.vstack([each, total, extra, *lines, *hydraulic])

    def _parts(
        self, flow: float, *, limits: tuple[float, float] = ZONE
    ) -> tuple[Parts, Array, NDArray[np.bool_]]:
        """All parts, f of each reach (K,), and which fittings have no K."""
        carried, mean = self.carried, self._sets.mean
        friction, factor = friction_parts(carried, self.conditions, flow, self.roughness, mean, limits=limits)
        law_u = 0.0 if math.isnan(carried.friction_law_u) else carried.friction_law_u
        reynolds = self.conditions.reynolds(carried, flow)
        turbulent = reynolds > limits[1]
        law = np.where(turbulent, law_u, 0.0)
        parts = [self._extended(friction, law, 0, np.where(turbulent, reynolds, 0.0))]
        losses = loss_parts(carried, self.conditions, flow, mean)
        unknown = np.isnan(carried.loss_coefficient)
        parts.append(self._extended(Parts(np.nan_to_num(losses.head), np.nan_to_num(losses.gradient))))
        if self.new_roughness is None:
            parts.append(Parts(np.zeros_like(friction.head), np.zeros_like(parts[0].gradient)))
        else:
            rough = np.broadcast_to(self.new_roughness[carried.wall_of], self.roughness.shape)
            fresh, _ = friction_parts(carried, self.conditions, flow, rough, mean, limits=limits)
            parts.append(self._extended(fresh, law, 1))
        parts.append(self._extended(velocity_head_parts(carried, self.conditions, flow, factor[0], mean)))
        whole = Parts(
            np.concatenate([one.head for one in parts], axis=1),
            np.concatenate([one.gradient for one in parts], axis=1),
        )
        return whole, np.asarray(factor[0]), np.asarray(unknown, dtype=bool)

    def _extended(
        self, parts: Parts, law: Array | None = None, which: int = 0, reynolds: Array | None = None
    ) -> Parts:
        """Parts that also know of the law's own error and of roughnesses that were stated with an uncertainty."""
        count, number, z = parts.gradient.shape
        gradient = np.zeros((count, number, len(self._covariance)))
        gradient[:, :, :z] = parts.gradient
        if law is not None:
            gradient[:, :, z + which] = parts.head * law
        if reynolds is not None:
            bore = self.carried.diameter
            for n, (wall, one) in enumerate(self.replaced.items()):
                if one.u:
                    safe = np.where(
                        law is not None and reynolds > LAMINAR_LIMIT, reynolds, 2 * TURBULENT_LIMIT
                    )
                    _, _, by_roughness = colebrook_white_sensitivities(safe, one.value / bore)
                    change = np.where(reynolds > LAMINAR_LIMIT, by_roughness / bore * one.u, 0.0)
                    gradient[:, :, z + 2 + n] = parts.head * change * (self.carried.wall_of == wall)
        return Parts(parts.head, gradient)

    def _intervals(self, parts: Parts, weights: Array, measured: Array | float) -> tuple[Array, Array, Array]:
        # A reach in the critical zone leaves those alone that it is no part of.
        missing = np.isnan(parts.head)
        head = np.where(missing @ (weights != 0).T, np.nan, np.where(missing, 0.0, parts.head) @ weights.T)
        gradient = np.einsum("tn,cnz->ctz", weights, np.nan_to_num(parts.gradient))
        value, low, high = profile_interval(head, gradient, self._sets, self._covariance, measured)
        # Nobody stated anything: no interval, which is not one of no width.
        none = ~(high > low)
        return value, np.where(none, np.nan, low), np.where(none, np.nan, high)

    def at(self, flow: float) -> Answer:
        """Return all heads at a flow (m³/s) at the line's start."""
        carried = self.carried
        k, m = len(carried.reaches), len(carried.fittings)
        parts, factor, unknown = self._parts(flow)
        weights = self._weights
        measured = np.zeros(len(weights))
        measured[: k + m + 1] = self.measured_u**2
        with np.errstate(invalid="ignore"):
            value, low, high = self._intervals(parts, weights, measured)
        reynolds = self.conditions.reynolds(carried, flow)
        critical = (reynolds >= LAMINAR_LIMIT) & (reynolds <= TURBULENT_LIMIT)
        if critical.any():
            low, high = self._between_laws(flow, weights, measured, value, low, high)
        three = list(zip(value.tolist(), low.tolist(), high.tolist(), strict=True))
        total, extra = three[k + m], three[k + m + 1]
        if self.new_roughness is None or critical.any():  # the two pipes need not be in the same state
            extra = (math.nan, math.nan, math.nan)
        lines = three[k + m + 2 :]
        count = len(self.places)
        return Answer(
            flow=flow,
            total=total,
            extra=extra,
            new_total=math.nan if self.new_roughness is None else float(parts.head[0, k : 2 * k + m].sum()),
            reaches=self._reach_rows(flow, reynolds, factor, three, critical),
            fittings=self._fitting_rows(flow, three[k : k + m], unknown),
            grade_lines=self._line_rows(flow, lines[:count], lines[count:]),
            reason=_critical_reason(total) if critical.any() else self._no_interval(total),
            extra_reason=CRITICAL if critical.any() else self._no_interval(total),
        )

    def _between_laws(
        self, flow: float, weights: Array, measured: Array, value: Array, low: Array, high: Array
    ) -> tuple[Array, Array]:
        """Ends of the intervals where a value has no law: the lower one of laminar, the upper one of turbulent flow."""
        ends = []
        for limits in (LAMINAR_IN_ZONE, TURBULENT_IN_ZONE):
            parts, _, _ = self._parts(flow, limits=limits)
            with np.errstate(invalid="ignore"):
                at, below, above = self._intervals(parts, weights, measured)
            if math.isfinite(self._sets.limit):  # nothing makes the law's own value uncertain
                below, above = np.where(np.isnan(below), at, below), np.where(np.isnan(above), at, above)
            ends.append((below, above))
        (first_low, first_high), (second_low, second_high) = ends
        none = np.isnan(value)
        return (
            np.where(none, np.minimum(first_low, second_low), low),
            np.where(none, np.maximum(first_high, second_high), high),
        )

    def _no_interval(self, three: Three) -> str | None:
        if math.isfinite(three[1]) or not math.isfinite(three[0]):
            return None
        return _NO_INTERVAL if math.isnan(self._sets.limit) else _NOTHING_STATED

    def _reach_rows(
        self, flow: float, reynolds: Array, factor: Array, three: list[Three], critical: NDArray[np.bool_]
    ) -> list[dict[str, Any]]:
        carried = self.carried
        velocity = self.conditions.velocity(carried, flow)
        own = carried.end - carried.start - carried.taken_off.sum(axis=0)
        names = regime(reynolds)
        rows = []
        for k, reach in enumerate(carried.reaches):
            w = int(carried.wall_of[k])
            wall = carried.walls[w]
            tested = w not in self.replaced and names[k] == "turbulent"
            low, high = (
                (float(carried.tested_low[k]), float(carried.tested_high[k]))
                if tested
                else (math.nan, math.nan)
            )
            value, below, above = three[k]
            rows.append(
                {
                    "flow": flow,
                    "reach": reach,
                    "wall": wall.name,
                    "roughness": self.roughness[0, k],
                    "velocity": velocity[k],
                    "reynolds": reynolds[k],
                    "regime": str(names[k]),
                    "friction_factor": factor[k],
                    "slope": value / own[k] if own[k] > 0 else math.nan,
                    "head_loss": value,
                    "head_loss_low": below,
                    "head_loss_high": above,
                    "tested_reynolds_low": low,
                    "tested_reynolds_high": high,
                    "beyond": _beyond(float(reynolds[k]), low, high),
                    "reason": _critical_reason(three[k]) if critical[k] else self._no_interval(three[k]),
                }
            )
        return rows

    def _fitting_rows(
        self, flow: float, three: list[Three], unknown: NDArray[np.bool_]
    ) -> list[dict[str, Any]]:
        carried = self.carried
        nothing = (math.nan, math.nan, math.nan)
        mean = self._sets.mean[0] @ carried.by_loss
        rows = []
        for m, name in enumerate(carried.fittings):
            coefficient = carried.loss_coefficient[m]
            if coefficient == 0:
                continue
            value, low, high = nothing if unknown[m] else three[m]
            rows.append(
                {
                    "flow": flow,
                    "fitting": name,
                    "loss_coefficient": coefficient + mean[m],
                    "head_loss": value,
                    "head_loss_low": low,
                    "head_loss_high": high,
                    "reason": f"left out: {carried.reasons[m] or 'its K is not known'}"
                    if unknown[m]
                    else self._no_interval((value, low, high)),
                }
            )
        return rows

    def _line_rows(self, flow: float, energy: list[Three], hydraulic: list[Three]) -> list[dict[str, Any]]:
        end = self.elevation[-1] if self.end_head is None else self.end_head
        if any(math.isfinite(one[1]) for one in energy):
            # The level at the end is given: an interval of no width.
            energy, hydraulic = (
                [(one[0], one[0], one[0]) if math.isnan(one[1]) else one for one in lines]
                for lines in (energy, hydraulic)
            )
        rows = []
        for place, z, high_line, low_line in zip(self.places, self.elevation, energy, hydraulic, strict=True):
            rows.append(
                {
                    "flow": flow,
                    "chainage": place.chainage,
                    "place": place.name,
                    "elevation": z,
                    "energy_head": end + high_line[0],
                    "energy_head_low": end + high_line[1],
                    "energy_head_high": end + high_line[2],
                    "piezometric_head": end + low_line[0],
                    "piezometric_head_low": end + low_line[1],
                    "piezometric_head_high": end + low_line[2],
                }
            )
        return rows

    def total(self, flow: float, *, zone: bool = True) -> Three:
        """Return the head loss of the line at a flow (m³/s) with its interval, m."""
        parts, _, _ = self._parts(flow, limits=ZONE if zone else TURBULENT_IN_ZONE)
        k, m = len(self.carried.reaches), len(self.carried.fittings)
        value, low, high = self._intervals(parts, self._weights[[k + m]], self.measured_u**2)
        return float(value[0]), float(low[0]), float(high[0])

    def capacity(self, head: float) -> tuple[float, float, float, str | None]:
        """Return the flow that loses a head (m): value, low, high (m³/s), and why there is none."""
        flow = self._flow_for(head, 0)
        carried = self.carried
        reynolds = self.conditions.reynolds(carried, flow)
        inside = ((reynolds >= LAMINAR_LIMIT) & (reynolds <= TURBULENT_LIMIT)).any()
        # The loss jumps where laminar flow ends: a head within the jump belongs to no flow of either law.
        jumped = abs(self.total(flow, zone=False)[0] - head) > _MISSED * head
        if inside or jumped:
            return math.nan, math.nan, math.nan, CRITICAL
        none = self._no_interval(self.total(flow))
        if none is not None:
            return flow, math.nan, math.nan, none
        low, high = self._flow_for(head, 2), self._flow_for(head, 1)
        return flow, low, high, self._ends_in_zone(low, high)

    def _ends_in_zone(self, low: float, high: float) -> str | None:
        """Say which ends of an interval of flows lie where no law of friction holds."""
        ends = []
        for name, flow in (("lower", low), ("upper", high)):
            reynolds = self.conditions.reynolds(self.carried, flow)
            if ((reynolds >= LAMINAR_LIMIT) & (reynolds <= TURBULENT_LIMIT)).any():
                ends.append(name)
        if not ends:
            return None
        words = (
            f"the {ends[0]} end, that of turbulent flow, lies"
            if len(ends) == 1
            else "both ends, those of turbulent flow, lie"
        )
        return f"{words} in the critical zone (Re 2000 to 4000), where no law of friction holds"

    def _flow_for(self, head: float, which: int) -> float:
        """The flow at which the head loss, or an end of its interval, is `head`; losses rise with the flow."""
        least = float(self.conditions.taken.max(initial=0.0))

        def short(flow: float) -> float:
            return self.total(flow, zone=False)[which] - head

        high = max(2 * least, float(self.carried.area.min()))
        for _ in range(_DOUBLINGS):
            if short(high) > 0:
                break
            high *= 2.0
        low = high
        for _ in range(_DOUBLINGS):
            low = least + (low - least) / 2.0
            if short(low) < 0:
                break
        return float(brentq(short, low, high, xtol=1e-15, rtol=1e-12))


def _critical_reason(three: Three) -> str:
    return BETWEEN if math.isfinite(three[1]) else CRITICAL


def _beyond(reynolds: float, low: float, high: float) -> float:
    if math.isnan(low):
        return math.nan
    if reynolds > high * (1 + 1e-6):
        return reynolds / high
    return reynolds / low if reynolds < low * (1 - 1e-6) else 1.0
