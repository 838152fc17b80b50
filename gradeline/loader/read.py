"""A survey's folder to a `gradeline.survey.Survey`."""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping
from dataclasses import replace
from pathlib import Path

from gradeline.errors import SurveyError
from gradeline.flow_methods import FlowSetup
from gradeline.loader.axis import along_axis
from gradeline.loader.document import NAME, Document, read_document
from gradeline.loader.flow_gauge_tables import check_flow_gauges
from gradeline.loader.flow_gauges import TAPPINGS
from gradeline.loader.fluids import build_fluid, state_fluid, temperature_rule
from gradeline.loader.gas_pressures import with_gas_read
from gradeline.loader.gauge_columns import check_columns, observe, with_gauge_columns
from gradeline.loader.gauge_statements import state_gauge_assumptions
from gradeline.loader.gauges import check_gauges, read_calibration
from gradeline.loader.ledger import Ledger
from gradeline.loader.line import (
    build_fittings,
    build_gauge,
    build_reaches,
    build_site,
    build_stated,
    check_gauge_temperatures,
    check_given_fluid,
)
from gradeline.loader.logger.read import Logged, read_logger
from gradeline.loader.offtakes import Branch, build_branches
from gradeline.loader.readings import read_runs
from gradeline.loader.repeats import RunTable
from gradeline.loader.side_valves import build_side_valves, state_side_valves
from gradeline.loader.statements import state_assumptions, state_cautions
from gradeline.loader.tables import source_of
from gradeline.loader.taps import TapTable, read_taps
from gradeline.loader.walls import build_wall_histories
from gradeline.survey import (
    Calibration,
    Fitting,
    Fluid,
    Reach,
    SideValve,
    StatedUncertainties,
    Survey,
    WallHistory,
)

__all__ = ["read_from", "read_survey"]


def read_survey(
    path: str | os.PathLike[str],
    *,
    diameter: str | None = None,
    flow: str | None = None,
    temperature: str | None = None,
    progress: Callable[[float], None] | None = None,
    threads: int | None = None,
) -> Survey:
    """Return the survey that a folder, a workbook or one table of heads holds.

    Parameters
    ----------
    path : str or path
        A folder with ``survey.toml``, ``taps.csv`` and ``readings.csv`` (or ``logger.csv`` or ``logger.parquet``), and ``runs.csv`` where the readings are
        listed one a row (the tables may be ``.parquet`` instead); an ``.xlsx`` with the sheets ``survey``, ``taps``,
        ``readings`` and perhaps ``runs``; or one table with columns such as ``chainage [m]`` and ``head [mm]``.
    diameter, flow, temperature : str or None
        For one table of heads, and only for it: bore, flow and temperature with their units, such as
        ``"26.6 mm +/- 0.1 mm"``, ``"0.84 L/s"`` and ``"18 degC"``.
    progress : callable or None
        Is told the share of a logger's file that was read, 0 to 1.
    threads : int or None
        Cores that may read a logger's file; None: all that this process may use.

    Returns
    -------
    Survey
        In SI units, with the assumptions made and the cautions found.

    Raises
    ------
    SurveyError
        With every problem of every file at once: its place, the rule, the value found and the remedy.
    UsageError
        Where diameter, flow or temperature are missing or at fault beside one table of heads, or given beside a
        survey that says them itself.

    Examples
    --------
    >>> read_survey("no such folder")
    Traceback (most recent call last):
        ...
    gradeline.errors.SurveyError: no such folder: there is no such folder; give the folder that holds survey.toml
    """
    path = Path(path)
    ledger = Ledger(path.parent if path.is_file() else path, progress=progress, threads=threads)
    ledger.source = source_of(ledger, path, {"diameter": diameter, "flow": flow, "temperature": temperature})
    if ledger.source is None:
        ledger.raise_problems()
    return read_from(ledger, path)


def read_from(ledger: Ledger, path: Path) -> Survey:
    """Return the survey whose tables a ledger's source holds, as `read_survey` does."""
    document = read_document(ledger)
    fluid = reaches = None
    fittings: tuple[Fitting, ...] = ()
    branches: tuple[Branch, ...] = ()
    stated = StatedUncertainties()
    if document is not None:
        fluid = build_fluid(ledger, document.fluid)
        if fluid is not None:
            check_given_fluid(ledger, document, fluid)
        reaches = build_reaches(ledger, document)
        fittings = build_fittings(ledger, document, reaches)
        branches = build_branches(ledger, document, reaches)
        stated = build_stated(ledger, document)
    described = document.gauges if document is not None else {}
    taps = read_taps(ledger, described, reaches)
    at_meter = document.flow_gauges if document is not None else {}
    calibrations = {
        name: read_calibration(ledger, gauge) for name, gauge in {**described, **at_meter}.items()
    }
    columns = None if taps is None else with_gauge_columns(taps, described)
    logged = read_logger(ledger, document, columns, branches)
    if logged is not None:
        ledger.source = logged
    runs = read_runs(
        ledger,
        columns,
        is_water=None if fluid is None else fluid.is_water,
        rule=temperature_rule(fluid),
        branches=branches,
        gauges=described,
        flow_u=stated.flow,
        flow=document.flow if document is not None else None,
    )
    if document is not None and fluid is not None and runs is not None:
        check_gauge_temperatures(ledger, document, fluid, runs.runs["temperature"].tolist())
    if document is not None:
        check_gauges(
            ledger,
            document,
            fluid,
            None if taps is None else taps.taps,
            [] if runs is None else runs.runs["temperature"].tolist(),
        )
        check_flow_gauges(
            ledger,
            document,
            fluid,
            () if taps is None else taps.taps,
            [] if runs is None else runs.runs["temperature"].tolist(),
        )
    if taps is not None and runs is not None:
        check_columns(ledger, described, taps, runs)
    side_valves = (
        () if document is None else build_side_valves(ledger, document, None if taps is None else taps.taps)
    )
    histories = () if document is None else build_wall_histories(ledger, document.walls, reaches)
    ledger.raise_problems()
    if document is None or fluid is None or reaches is None or taps is None or runs is None:
        raise SurveyError(ledger.problems)  # a fault that nobody noted would be a slip of this program
    return _compose(
        ledger,
        document,
        fluid=fluid,
        reaches=reaches,
        fittings=fittings,
        branches=branches,
        side_valves=side_valves,
        stated=stated,
        table=taps,
        calibrations=calibrations,
        runs=runs,
        path=path,
        histories=histories,
        logged=logged,
    )


def _compose(
    ledger: Ledger,
    document: Document,
    *,
    fluid: Fluid,
    reaches: tuple[Reach, ...],
    fittings: tuple[Fitting, ...],
    branches: tuple[Branch, ...],
    side_valves: tuple[SideValve, ...],
    stated: StatedUncertainties,
    table: TapTable,
    calibrations: Mapping[str, Calibration | None],
    runs: RunTable,
    path: Path,
    histories: tuple[WallHistory, ...],
    logged: Logged | None,
) -> Survey:
    """The parts, sound each by itself, as one survey."""
    gauges = tuple(
        with_gas_read(replace(gauge, calibration=calibrations.get(gauge.name)), runs.runs)
        for each in document.gauges.values()
        if (gauge := build_gauge(each)) is not None
    )
    flow_gauges = tuple(
        replace(
            gauge,
            calibration=calibrations.get(gauge.name),
            settings={key: value for key, value in gauge.settings.items() if key not in TAPPINGS},
        )
        for each in document.flow_gauges.values()
        if (gauge := build_gauge(each)) is not None
    )
    observed = observe(table, document.gauges, runs)
    runs = observed.runs
    taps = table.taps
    header = document.survey
    offtakes = tuple(one.offtake for one in branches)
    if header is not None and header.chainage_is == "plan":
        # An off-take lies where a reach begins, also along the axis.
        starts = [next(k for k, reach in enumerate(reaches) if reach.start == one.at) for one in offtakes]
        reaches, fittings, taps = along_axis(reaches, fittings, taps)
        ledger.assumptions.append(
            "Chainages are measured on the plan: they are made true lengths with the elevations of the taps, "
            "straight between taps and level before the first and after the last."
        )
        offtakes = tuple(replace(one, at=reaches[k].start) for one, k in zip(offtakes, starts, strict=True))
    setup = document.flow.setup if document.flow is not None else FlowSetup()
    state_side_valves(ledger, side_valves, method=setup.method)
    state_fluid(ledger, document.fluid, fluid, runs.runs["temperature"].tolist())
    state_gauge_assumptions(ledger, flow_gauges, replace(runs, referenced=False))
    state_assumptions(ledger, document, taps=table, gauges=gauges, fluid=fluid, runs=runs)
    state_cautions(ledger, stated, fluid=fluid, reaches=reaches, taps=taps, gauges=gauges, runs=runs)
    return Survey(
        title=(header.title if header is not None else None)
        or (path.stem if path.is_file() else path.resolve().name),
        source=str(path),
        reaches=reaches,
        taps=taps,
        gauges=gauges,
        observations=observed.observations,
        levels=observed.levels,
        runs=runs.runs,
        readings=runs.readings,
        repeats=runs.repeats,
        spreads=runs.spreads,
        flow=setup,
        flow_gauges=flow_gauges,
        flow_readings=runs.flow_readings,
        written=runs.written,
        fittings=fittings,
        offtakes=offtakes,
        side_valves=side_valves,
        wall_histories=histories,
        fluid=fluid,
        site=build_site(document),
        stated=stated,
        files=tuple(ledger.files),
        assumptions=tuple(ledger.assumptions),
        cautions=tuple(ledger.cautions),
        date=header.date if header is not None else None,
        units={
            **{f"{NAME} {key}": unit for key, unit in document.units.items()},
            **{f"taps.csv {column}": unit for column, unit in table.units.items()},
            **runs.units,
        },
        record=None if logged is None else logged.record,
    )
