"""The tables of a reduction as a reader sees them: rounded, with units, and a note where a value is missing."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping

from gradeline.quantities.printing import (
    MISSING,
    SI_DISPLAY,
    Display,
    format_interval,
    format_number,
    rounded,
    thousands,
)
from gradeline.reduction.tables import Reduction
from gradeline.report.flag_words import flag_words
from gradeline.report.losses import equivalent_length_uncertainties
from gradeline.report.printed import (
    PrintedTable,
    Row,
    TableColumn,
    count,
    known,
    lay_out,
    name_column,
    percent,
    records,
    truth,
)

__all__ = [
    "bore_table",
    "elevations_known",
    "exponent_table",
    "fitting_table",
    "flag_table",
    "flagged_value",
    "reach_table",
    "reading_names",
    "reading_units",
    "run_table",
    "scatter_table",
    "tap_table",
    "wall_table",
]

#: A curve that all runs share is called one below this probability.
_CURVED = 0.01


def run_table(
    reduction: Reduction, display: Display = SI_DISPLAY, *, limit: int | None = None
) -> PrintedTable:
    """Return the run table: flow, Re, regime, friction slope, friction factor, roughness of each run and reach."""
    rows = records(reduction.runs if limit is None else reduction.runs.iloc[:limit])
    level = percent(reduction.level)
    several = len(reduction.reaches) > 1
    return lay_out(
        "Runs. ± is one standard uncertainty, shared inputs included. Roughness is that of the run alone; the "
        "wall's, below, comes from all runs together.",
        rows,
        [
            name_column("run"),
            *([name_column("reach")] if several else []),
            TableColumn(display.head("flow", "flow"), lambda row: display.text("flow", row["flow"])),
            TableColumn(display.head("V", "velocity"), lambda row: display.text("velocity", row["velocity"])),
            TableColumn(
                display.head("t", "temperature"),
                lambda row: _temperature(row, display),
                always=False,
            ),
            TableColumn("Re", lambda row: thousands(row["reynolds"])),
            name_column("regime"),
            TableColumn(
                display.head("friction slope S", "slope"),
                lambda row: display.text("slope", row["slope"], row["slope_u"]),
            ),
            TableColumn(
                "friction factor f", lambda row: rounded(row["friction_factor"], row["friction_factor_u"])
            ),
            TableColumn(
                display.head("roughness ε", "roughness"),
                lambda row: display.within(
                    "roughness", row["roughness"], row["roughness_low"], row["roughness_high"]
                ),
                always=False,
            ),
            TableColumn(
                display.head(f"ε, {level} interval", "roughness"),
                lambda row: display.interval("roughness", row["roughness_low"], row["roughness_high"]),
                always=False,
            ),
            TableColumn("readings used", lambda row: count(row["observations_used"])),
            TableColumn("straightness p", lambda row: _probability(row["straightness_p"]), always=False),
        ],
    )


def _temperature(row: Row, display: Display) -> str:
    if not known(row["temperature"]):
        return MISSING
    return f"{display.value('temperature', row['temperature']):.1f}".replace("-", "−")


def _probability(value: float | None) -> str:
    if value is None or not math.isfinite(value):
        return MISSING
    if value < 1e-3:
        return "< 0.001"
    return f"{value:.2f}" if value >= 0.095 else f"{value:.2g}"


def wall_table(
    reduction: Reduction, display: Display = SI_DISPLAY, *, conveyance: bool = True
) -> PrintedTable:
    """Return the walls: roughness with interval and bound, resolved or not, smooth or not, misfit of the law.

    With `conveyance`, Hazen–Williams C and Manning n at the highest flow too, and the cautions on them.
    """
    older = {row["wall"]: row for row in records(reduction.wall_conveyance)} if conveyance else {}
    rows = records(reduction.walls)
    for row in rows if not conveyance else ():
        row["reason"] = "; ".join(
            part for part in str(row["reason"] or "").split("; ") if " formula is meant for " not in part
        )

    def measure(name: str) -> Callable[[Row], str]:
        return lambda row: rounded(row[name], older.get(row["wall"], {}).get(f"{name}_u"))

    level = percent(reduction.level)
    bound = " The upper bound is one-sided, all of its 5 % above it, and so may lie inside the two-sided interval."
    if level != "95 %":
        bound += f" It is one of 95 %, whatever the level of the intervals ({level})."

    def within(key: str) -> Callable[[Row], str]:
        return lambda row: display.within("roughness", row[key], row["roughness_low"], row["roughness_high"])

    return lay_out(
        "Walls, from all turbulent runs together. ε⁺ is the roughness Reynolds number of the fastest run; the trend "
        f"is that of f against the friction law.{bound}",
        rows,
        [
            name_column("wall"),
            TableColumn(display.head("roughness ε", "roughness"), within("roughness")),
            TableColumn(
                display.head(f"{level} interval", "roughness"),
                lambda row: display.interval("roughness", row["roughness_low"], row["roughness_high"]),
            ),
            TableColumn(display.head("one-sided 95 % upper bound", "roughness"), within("roughness_upper95")),
            TableColumn("resolved", lambda row: truth(row["roughness_resolved"]), text=True),
            TableColumn("hydraulically smooth", lambda row: truth(row["hydraulically_smooth"]), text=True),
            TableColumn("ε⁺", lambda row: format_number(row["roughness_reynolds"], 3)),
            TableColumn(
                "trend of f (%/decade of Re)", lambda row: _hundredfold(row["law_trend"], row["law_trend_u"])
            ),
            TableColumn("runs used", lambda row: count(row["runs_used"])),
            *(
                [
                    TableColumn("Hazen–Williams C", measure("hazen_williams_c"), always=False),
                    TableColumn("Manning n", measure("manning_n"), always=False),
                ]
                if conveyance
                else []
            ),
        ],
    )


def _hundredfold(value: float | None, u: float | None) -> str:
    return rounded(None if value is None else 100 * value, None if u is None else 100 * u, digits=2)


def fitting_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the fittings with their loss coefficients."""
    level = percent(reduction.level)
    length_u = equivalent_length_uncertainties(reduction)
    return lay_out(
        "Fittings. K refers to the velocity head that the survey names, the smaller bore's otherwise; the equivalent length is "
        "that of straight pipe that loses as much in the fastest run.",
        records(reduction.fittings),
        [
            name_column("fitting"),
            TableColumn(
                "loss coefficient K", lambda row: rounded(row["loss_coefficient"], row["loss_coefficient_u"])
            ),
            TableColumn(
                f"K, {level} interval",
                lambda row: format_interval(row["loss_coefficient_low"], row["loss_coefficient_high"]),
            ),
            TableColumn(
                display.head("equivalent length", "length"),
                lambda row: display.text(
                    "length", row["equivalent_length"], length_u.get(row["fitting"]), digits=2
                ),
                always=False,
            ),
        ],
    )


def reach_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the reaches with their bores and walls."""
    return lay_out(
        "Reaches, in flow order. A curve that all runs share is called one where tap errors would make it in fewer than "
        "1 of 100 surveys (p < 0.01).",
        records(reduction.reaches),
        [
            name_column("reach"),
            name_column("wall"),
            TableColumn(display.head("length", "length"), lambda row: display.text("length", row["length"])),
            TableColumn(
                display.head("bore", "diameter"),
                lambda row: display.text("diameter", row["diameter"], digits=5),
            ),
            TableColumn(
                "curve of all runs", lambda row: _curve(row["shared_curve_p"]), text=True, always=False
            ),
        ],
    )


def _curve(p: float | None) -> str:
    """What the test of a curve that all runs share says, in words."""
    if p is None or not math.isfinite(p):
        return MISSING
    verdict = "all runs share a curve" if p < _CURVED else "not told from tap errors"
    shown = _probability(p)
    return f"{verdict} (p {shown if shown.startswith('<') else '= ' + shown})"


def exponent_table(reduction: Reduction) -> PrintedTable:
    """Return the exponents n of S ∝ Qⁿ."""
    level = percent(reduction.level)
    return lay_out(
        "Exponent n of S ∝ Qⁿ, and of Vⁿ: 1 in laminar flow, about 1.75 where the wall is smooth, 2 where it is fully rough. "
        "Runs of different temperature are brought to one viscosity. An error in the same proportion of all flows or slopes "
        "leaves n as it is; an offset of the flow meter does not, and is not in its uncertainty.",
        records(reduction.exponents),
        [
            name_column("reach"),
            name_column("regime"),
            TableColumn("exponent n", lambda row: rounded(row["exponent"], row["exponent_u"])),
            TableColumn(
                f"n, {level} interval", lambda row: format_interval(row["exponent_low"], row["exponent_high"])
            ),
            TableColumn("runs used", lambda row: count(row["runs_used"])),
        ],
    )


def scatter_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the scatter of the readings by kind of gauge, with the gauges of that kind."""
    units = reduction.reading_units
    gauges: dict[str, list[str]] = {}
    for kind, gauge in dict.fromkeys(zip(units["kind"], units["gauge"], strict=True)):
        gauges.setdefault(str(kind), []).append(str(gauge))
    return lay_out(
        "Scatter of one reading, pooled over all runs: σ² = σ₀² + (c V²/2g)².",
        records(reduction.scatter),
        [
            name_column("gauge", "kind of gauge"),
            TableColumn(
                "gauges",
                lambda row: ", ".join(gauges.get(str(row["gauge"]), [])) or MISSING,
                text=True,
                always=False,
            ),
            TableColumn(
                display.head("σ₀", "small head"),
                lambda row: display.text("small head", row["base"], digits=2),
            ),
            TableColumn("c", lambda row: format_number(row["surge"], 2)),
            TableColumn(
                display.head("stated", "small head"),
                lambda row: display.text("small head", row["stated"], digits=2),
            ),
            TableColumn("degrees of freedom", lambda row: count(row["dof"])),
        ],
        note="note",
    )


def tap_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return the taps: offsets from static runs, ailments where they were looked for."""
    unit = "small head"
    return lay_out(
        "Taps. The offset is what a tap reads too high when nothing flows; it was taken off where a static run gave it.",
        records(reduction.taps),
        [
            name_column("tap"),
            TableColumn(
                display.head("offset", unit),
                lambda row: display.text(unit, row["offset"], row["offset_u"], digits=2),
                always=False,
            ),
            TableColumn(
                "edge coefficient",
                lambda row: rounded(row["edge_coefficient"], row["edge_coefficient_u"]),
                always=False,
            ),
            name_column("diagnosis", always=False),
        ],
        common_note=True,
    )


def bore_table(reduction: Reduction, display: Display = SI_DISPLAY) -> PrintedTable:
    """Return what a slightly different bore would make of f and of the roughness."""
    return lay_out(
        "If the bore were a little different: f grows as D⁵, and the roughness follows.",
        records(reduction.bore_sensitivity),
        [
            name_column("wall"),
            TableColumn("bore (%)", lambda row: _signed(row["diameter_change"])),
            TableColumn("friction factor f (%)", lambda row: _signed(row["friction_factor_change"])),
            TableColumn(
                display.head("roughness ε", "roughness"),
                lambda row: display.text("roughness", row["roughness"], digits=2),
            ),
        ],
    )


def _signed(fraction: float | None) -> str:
    if fraction is None or not math.isfinite(fraction):
        return MISSING
    text = format_number(100 * fraction, 2)
    return f"+{text}" if fraction > 0 else text


def flag_table(
    reduction: Reduction, display: Display = SI_DISPLAY, *, limit: int | None = None
) -> PrintedTable:
    """Return the flags with what was read and what was expected."""
    rows = records(reduction.flags if limit is None else reduction.flags.iloc[:limit])
    units = reading_units(reduction)

    def reading(key: str) -> Callable[[Row], str]:
        return lambda row: flagged_value(row, key, units)

    return lay_out(
        "Flags. The score is the studentised residual with the reading itself left out. A flag is a question to the "
        "record, not a verdict.",
        rows,
        [
            name_column("kind"),
            TableColumn("what", flag_words(reduction, display), text=True),
            name_column("run", always=False),
            name_column("tap", always=False),
            TableColumn("read", reading("reading"), always=False),
            TableColumn("expected", reading("expected"), always=False),
            TableColumn("score", lambda row: format_number(row["score"], 2)),
            name_column("suggestion", always=False),
        ],
        note=None,
    )


def elevations_known(reduction: Reduction) -> bool:
    """Return whether the pipe has elevations: all at 0 nobody gave any, and nothing is known of the pressure."""
    return bool(reduction.grade_lines["elevation"].fillna(0.0).to_numpy(float).any())


def reading_names(reduction: Reduction) -> list[str]:
    """Return the name of each row of heads: its tap, or the gauge of a differential reading."""
    heads = reduction.heads
    return [
        str(gauge) if isinstance(other, str) else str(tap)
        for tap, other, gauge in zip(heads["tap"], heads["tap_2"], heads["gauge"], strict=True)
    ]


def reading_units(reduction: Reduction) -> dict[str, tuple[str, float]]:
    """Return the unit of each tap's readings as it was read, and how many SI units it has."""
    table = reduction.reading_units
    return {
        tap: (unit, scale)
        for tap, unit, scale in zip(table["tap"], table["unit"], table["si_per_unit"], strict=True)
    }


def flagged_value(row: Row, key: str, units: Mapping[str, tuple[str, float]]) -> str:
    """Print the reading or what was expected of a flag, in the unit in which it was read."""
    value = row[key]
    if row["tap"] not in units or not known(value):
        return format_number(value)
    unit, scale = units[row["tap"]]
    other = row["expected" if key == "reading" else "reading"]
    digits = 4
    if known(other) and value and value != other:
        # enough digits to tell the two apart
        digits = min(max(4, math.ceil(math.log10(abs(value / (value - other)))) + 2), 8)
    return f"{format_number(value / scale, digits)} {unit}"
