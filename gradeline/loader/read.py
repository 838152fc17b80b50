"""A survey's folder to a `gradeline.survey.Survey`."""

from __future__ import annotations

import os
from pathlib import Path

from gradeline.errors import SurveyError
from gradeline.loader.axis import along_axis
from gradeline.loader.document import NAME, Document, read_document
from gradeline.loader.ledger import Ledger
from gradeline.loader.line import (
    build_fittings,
    build_fluid,
    build_gauge,
    build_reaches,
    build_site,
    build_stated,
    check_gauge_temperatures,
    check_given_fluid,
)
from gradeline.loader.readings import read_runs
from gradeline.loader.repeats import RunTable
from gradeline.loader.statements import state_assumptions, state_cautions
from gradeline.loader.taps import TapTable, read_taps
from gradeline.survey import Fitting, Fluid, Observation, Reach, StatedUncertainties, Survey

__all__ = ["read_survey"]


def read_survey(path: str | os.PathLike[str]) -> Survey:
    """Return the survey that a folder holds.

    Parameters
    ----------
    path : str or path
        A folder with ``survey.toml``, ``taps.csv`` and ``readings.csv``, and ``runs.csv`` where the readings are
        listed one a row.

    Returns
    -------
    Survey
        In SI units, with the assumptions made and the cautions found.

    Raises
    ------
    SurveyError
        With every problem of every file at once: its place, the rule, the value found and the remedy.

    Examples
    --------
    >>> read_survey("no such folder")
    Traceback (most recent call last):
        ...
    gradeline.errors.SurveyError: no such folder: there is no such folder; give the folder that holds survey.toml
    """
    folder = Path(path)
    ledger = Ledger(folder)
    if not folder.is_dir():
        what = "this is a file, not a folder" if folder.is_file() else "there is no such folder"
        ledger.problem(str(folder), None, None, f"{what}; give the folder that holds {NAME}")
        ledger.raise_problems()
    document = read_document(ledger)
    fluid = reaches = None
    fittings: tuple[Fitting, ...] = ()
    stated = StatedUncertainties()
    if document is not None:
        fluid = build_fluid(ledger, document)
        if fluid is not None:
            check_given_fluid(ledger, document, fluid)
        reaches = build_reaches(ledger, document)
        fittings = build_fittings(ledger, document, reaches)
        stated = build_stated(ledger, document)
    described = document.gauges if document is not None else {}
    taps = read_taps(ledger, described, reaches)
    runs = read_runs(
        ledger,
        taps,
        is_water=None if fluid is None else fluid.density is None and fluid.name == "water",
        flow_u=stated.flow,
    )
    if document is not None and fluid is not None and runs is not None:
        check_gauge_temperatures(ledger, document, fluid, runs.runs["temperature"].tolist())
    ledger.raise_problems()
    if document is None or fluid is None or reaches is None or taps is None or runs is None:
        raise SurveyError(ledger.problems)  # a fault that nobody noted would be a slip of this program
    return _compose(
        ledger,
        document,
        fluid=fluid,
        reaches=reaches,
        fittings=fittings,
        stated=stated,
        table=taps,
        runs=runs,
    )


def _compose(
    ledger: Ledger,
    document: Document,
    *,
    fluid: Fluid,
    reaches: tuple[Reach, ...],
    fittings: tuple[Fitting, ...],
    stated: StatedUncertainties,
    table: TapTable,
    runs: RunTable,
) -> Survey:
    """The parts, sound each by itself, as one survey."""
    gauges = tuple(gauge for each in document.gauges.values() if (gauge := build_gauge(each)) is not None)
    taps = table.taps
    header = document.survey
    if header is not None and header.chainage_is == "plan":
        reaches, fittings, taps = along_axis(reaches, fittings, taps)
        ledger.assumptions.append(
            "Chainages are measured on the plan: they are made true lengths with the elevations of the taps, "
            "straight between taps and level before the first and after the last."
        )
    state_assumptions(ledger, document, taps=table, gauges=gauges, fluid=fluid, runs=runs)
    state_cautions(ledger, stated, fluid=fluid, reaches=reaches, taps=taps, gauges=gauges, runs=runs)
    return Survey(
        title=(header.title if header is not None else None) or ledger.folder.resolve().name,
        source=str(ledger.folder),
        reaches=reaches,
        taps=taps,
        gauges=gauges,
        observations=tuple(Observation(gauge=tap.gauge or "", tap=tap.name) for tap in taps),
        runs=runs.runs,
        readings=runs.readings,
        repeats=runs.repeats,
        spreads=runs.spreads,
        fittings=fittings,
        fluid=fluid,
        site=build_site(document),
        stated=stated,
        files=tuple(ledger.files),
        assumptions=tuple(ledger.assumptions),
        cautions=tuple(ledger.cautions),
        date=header.date if header is not None else None,
        units={
            **{f"{NAME} {key}": unit for key, unit in document.units.items()},
            **{f"{table.file} {column}": unit for column, unit in table.units.items()},
            **runs.units,
        },
    )
