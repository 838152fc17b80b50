"""What a plan takes for granted where the survey does not say it: roughness, loss coefficients, one reading."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from gradeline.errors import ReductionError, UsageError
from gradeline.quantities.printing import SI_DISPLAY, format_number
from gradeline.reduction.line import Line
from gradeline.reduction.published_losses import published_loss
from gradeline.reduction.surfaces import SOURCES, Surface, known_surfaces, one_spelling
from gradeline.survey import GAUGE_KINDS, Gauge, Survey

__all__ = ["Assumed", "losses_assumed", "roughness_assumed", "with_reading_uncertainty"]

#: The surface that stands for a wall whose name tells none.
_DEFAULT = "commercial steel or wrought iron"
#: K where neither the survey nor a published value tells one.
_LOSS = 1.0
#: Standard uncertainty of one reading of a scale where nobody stated one, m (common practice: a steel rule beside a
#: column).
_READING = 1e-3
#: Of one reading of a gauge with a stated full scale, as a share of it (common practice: half a division of two hundred).
_OF_FULL_SCALE = 0.0025
_TELLING = 4


@dataclass(frozen=True)
class Assumed:
    """A value taken for granted, and where it comes from."""

    value: float
    source: str


def roughness_assumed(
    survey: Survey, given: float | Mapping[str, float] | None
) -> tuple[dict[str, Assumed], list[str]]:
    """Return the roughness of each wall, and cautions.

    Parameters
    ----------
    survey : Survey
        Its walls, and what is known of them.
    given : float, mapping of str to float, or None
        ε of all walls or by wall, m.

    Returns
    -------
    dict of str to Assumed, list of str
        As given; else what the survey says of the wall (its earlier value first); else that of the published surface
        whose name has most words of the wall's; else new commercial steel, with a caution.

    Raises
    ------
    UsageError
        For a wall that the survey does not have, or a roughness below zero.
    """
    walls = list(dict.fromkeys(reach.wall for reach in survey.reaches))
    by_wall = given if isinstance(given, Mapping) else {} if given is None else dict.fromkeys(walls, given)
    spelt = {one_spelling(wall): wall for wall in walls}
    by_wall = {
        name if name in walls else spelt.get(one_spelling(name), name): value
        for name, value in by_wall.items()
    }
    for name, value in by_wall.items():
        if name not in walls:
            raise UsageError(f"roughness: there is no wall {name!r}; walls are {', '.join(walls)}")
        if not value >= 0:
            raise UsageError(f"roughness: {value} m of {name!r} is below zero; give 0 for a smooth wall")
    found, cautions = {}, []
    histories = {one.wall: one for one in survey.wall_histories}
    for wall in walls:
        history = histories.get(wall)
        surface = _surface(wall)
        if wall in by_wall:
            found[wall] = Assumed(float(by_wall[wall]), "given")
        elif history is not None and history.earlier is not None:
            found[wall] = Assumed(history.earlier.value, f"found earlier{_by(history.earlier_source)}")
        elif history is not None and history.published is not None:
            found[wall] = Assumed(history.published.value, f"published{_by(history.published_source)}")
        elif surface is not None:
            found[wall] = Assumed(surface.middle, f"{surface.name} ({SOURCES[surface.source]})")
        else:
            steel = next(one for one in known_surfaces() if one.name == _DEFAULT)
            found[wall] = Assumed(
                steel.middle, f"{steel.name} ({SOURCES[steel.source]}), for want of a better"
            )
            shown = SI_DISPLAY.text("roughness", steel.middle, digits=2, unit=True)
            cautions.append(
                f"No published surface is called like the wall {wall!r}: {shown} of new commercial steel stands for it. Give "
                "--roughness, or [wall] in survey.toml."
            )
    return found, cautions


def _by(source: str | None) -> str:
    return f" ({source})" if source else ""


def _surface(wall: str) -> Surface | None:
    """The published surface whose name has most of a wall's words: one of just these words first, then the smoothest."""
    mine = _words(wall)
    ranked = [
        (len(mine & _words(one.name)), _words(one.name) <= mine, -one.middle, one) for one in known_surfaces()
    ]
    best = max(ranked, key=lambda one: one[:3])
    return best[3] if best[0] else None


def _words(name: str) -> set[str]:
    plain = "".join(letter if letter.isalpha() else " " for letter in one_spelling(name))
    return {word for word in plain.split() if len(word) >= _TELLING}


def losses_assumed(line: Line, given: Mapping[str, float]) -> dict[str, Assumed]:
    """Return K of each fitting whose K is to be fitted.

    Parameters
    ----------
    line : Line
        Its fittings.
    given : mapping of str to float
        K by fitting, dimensionless.

    Returns
    -------
    dict of str to Assumed
        As given; else the published value of its kind; else 1.

    Raises
    ------
    UsageError
        For a fitting whose K is not to be fitted.
    """
    free = [one.name for one in line.fittings if one.loss_coefficient is None]
    for name in given:
        if name not in free:
            known = ", ".join(free) or "none"
            raise UsageError(f"loss: there is no fitting {name!r} whose K is to be fitted; there is {known}")
    found = {}
    for place, fitting in enumerate(line.fittings):
        if fitting.loss_coefficient is not None:
            continue
        published = published_loss(line, place)
        if fitting.name in given:
            found[fitting.name] = Assumed(float(given[fitting.name]), "given")
        elif published is not None:
            found[fitting.name] = Assumed(published.value, f"{published.described} ({published.source})")
        else:
            found[fitting.name] = Assumed(_LOSS, "for want of a better")
    return found


def with_reading_uncertainty(
    survey: Survey, length: float | None, pressure: float | None
) -> tuple[Survey, list[str]]:
    """Return a survey in which the uncertainty of one reading is known of every observation, and what was assumed.

    Parameters
    ----------
    survey : Survey
        The plan.
    length, pressure : float or None
        Standard uncertainty of one reading of scales (m) and of pressure gauges (Pa) that state none.

    Raises
    ------
    ReductionError
        Where a pressure gauge states neither an uncertainty nor a full scale, and none is given.

    Notes
    -----
    Readings by the law leave no residuals, so nothing but a statement can tell how they will scatter.
    """
    general = {"length": survey.stated.reading, "pressure": survey.stated.reading_pressure}
    given = {"length": length, "pressure": pressure}
    said, gauges = [], []
    for gauge in survey.gauges:
        mine = [one for one in survey.observations if one.gauge == gauge.name]
        kind = GAUGE_KINDS[gauge.kind].reading
        own = all(one.tap_2 is None and survey.tap(one.tap).reading_u is not None for one in mine)
        if gauge.reading_u is not None or general[kind] is not None or own or not mine:
            gauges.append(gauge)
            continue
        size = given[kind]
        if size is None:
            size = _size_assumed(gauge, kind)
            shown = (
                SI_DISPLAY.text("small head", size, digits=2, unit=True)
                if kind == "length"
                else SI_DISPLAY.text("pressure", size, digits=2, unit=True)
            )
            said.append(
                f"The uncertainty of one reading of {gauge.name!r} is not stated: {shown} is assumed (--reading gives another)."
            )
        gauges.append(replace(gauge, reading_u=size))
    return replace(survey, gauges=tuple(gauges)), said


def _size_assumed(gauge: Gauge, kind: str) -> float:
    if kind == "length":
        return _READING
    full = gauge.settings.get("full_scale")
    top = (
        gauge.span[1]
        if gauge.span is not None
        else full.value
        if full is not None and not isinstance(full, str)
        else None
    )
    if top is None:
        raise ReductionError(
            f"gauge {gauge.name!r}: the uncertainty of one reading is not stated, so nobody can say what the runs will tell; "
            f'add uncertainty to [gauge.{gauge.name}], or give --reading, such as "{format_number(0.5)} kPa"'
        )
    return _OF_FULL_SCALE * top
