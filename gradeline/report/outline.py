"""What the report says and in which order: the one description that page and PDF follow."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Literal

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.ailments import ailment_sentences, ailment_table
from gradeline.report.blocks import (
    Block,
    Bullets,
    Drawings,
    Fold,
    Heading,
    Outline,
    Pairs,
    Paragraph,
    Section,
    SideBySide,
    Tabled,
)
from gradeline.report.cautions import further_cautions
from gradeline.report.converted import converted
from gradeline.report.figures.render import MOST_PANELS
from gradeline.report.figures.residuals import any_left_over
from gradeline.report.inputs import (
    fitting_input_table,
    gauge_table,
    raw_reading_tables,
    side_valve_table,
    stated_reach_table,
    stated_tap_table,
    statements,
    uncertainty_table,
)
from gradeline.report.laws import (
    conveyance_table,
    law_sentences,
    law_table,
    roughness_check_table,
    surface_table,
    transition_table,
    zero_drift_table,
)
from gradeline.report.logger import record_flag_table, record_sentences, window_table
from gradeline.report.losses import loss_table
from gradeline.report.printed import PrintedTable, percent
from gradeline.report.sentences import Summary, summarise
from gradeline.report.slips import slip_table
from gradeline.report.tables import (
    bore_table,
    elevations_known,
    exponent_table,
    fitting_table,
    flag_table,
    reach_table,
    run_table,
    scatter_table,
    tap_table,
    wall_table,
)
from gradeline.report.uncertainty import budget_table, improvement_sentences, likelihood_sentences

__all__ = ["handling", "outline"]

_MOST_ROWS = 1000
_MOST_READINGS = 200

_TRAPPED = (
    "Trapped pressure.",
    "A closed tap, hose or gauge line can hold the pressure of an earlier run. Open bleed valves slowly, away from "
    "the face, and take a line apart only when it has been seen to be empty.",
)
_BELOW = (
    "Pressure below the atmosphere's.",
    "Where the hydraulic grade line lies below the pipe's crown, air or dirty water can be drawn in through joints, "
    "taps and air valves, and the water column can part and close again with a blow.",
)
_MERCURY = (
    "Mercury.",
    "Its vapour is poisonous. Keep a trap in the line, do not let the column be blown over by opening a tap on one "
    "side only, and collect spills by the rules of the place.",
)


def outline(reduction: Reduction, version: str, display: Display = SI_DISPLAY) -> Outline:
    """Return what the report of a reduction says, section by section.

    Parameters
    ----------
    reduction : Reduction
        What is reported.
    version : str
        Of the program.
    display : Display
        Units of the reader.

    Returns
    -------
    Outline
        Plain text throughout; whoever prints it escapes it.
    """
    reduction = converted(reduction, display)
    survey, summary = reduction.survey, summarise(reduction, display)
    date = str(survey.get("date") or "")
    sections = (
        _summary(summary),
        *_record(reduction),
        _grade_lines(reduction),
        _residuals(reduction),
        _taps_and_line(reduction, display),
        _slope_and_friction(reduction),
        _what_laws_say(reduction, display),
        *_fittings(reduction, display),
        _tables(reduction, display),
        _flags(reduction, display),
        _readings(reduction, display),
        *_uncertainty(reduction, display),
        _inputs(reduction, display),
        Section("assumptions", "Assumptions", "Assumptions", _bullets_or_none(reduction.assumptions)),
        _cautions(reduction, summary),
        _provenance(reduction, version, display),
    )
    return Outline(
        title=str(survey.get("title") or "Survey"),
        subtitle=f"Head loss, friction factor and wall roughness{f', measured {date}' if date else ''}",
        date=date,
        sections=sections,
    )


def handling(reduction: Reduction) -> tuple[tuple[str, str], ...]:
    """Return what people at this line should know: trapped pressure always, the rest where the survey has it."""
    said = " ".join((*reduction.cautions, *reduction.assumptions, *reduction.inputs["text"].dropna())).lower()
    lines = reduction.grade_lines
    below = "below the pipe's crown" in said or (
        elevations_known(reduction)
        and bool((lines["piezometric_head"] < lines["crown"]).to_numpy(bool).any())
    )
    return (_TRAPPED, *([_BELOW] if below else []), *([_MERCURY] if "mercury" in said else []))


def _listed(sentences: Iterable[str], style: Literal["plain", "look", ""] = "plain") -> Bullets:
    return Bullets(tuple(("", sentence) for sentence in sentences), style)


def _bullets_or_none(sentences: Sequence[str]) -> tuple[Block, ...]:
    return (_listed(sentences),) if sentences else (Paragraph("None.", "small"),)


def _where_any(printed: PrintedTable, name: str, heading: str | None = None) -> tuple[Block, ...]:
    """A table under its heading, nothing where it has no rows."""
    if not printed.rows:
        return ()
    return (*((Heading(heading),) if heading is not None else ()), Tabled(printed, name))


def _summary(summary: Summary) -> Section:
    right: list[Block] = []
    if summary.look:
        right += [Heading("What to look at"), _listed(summary.look, "look")]
    if summary.missing:
        right += [Heading("What could not be determined"), _listed(summary.missing, "")]
    found = (Heading("What was found, and how sure it is"), _listed(summary.found, ""))
    return Section(
        "summary",
        "Summary",
        "",
        (SideBySide((found, tuple(right)), "columns"), Paragraph(summary.close, "close")),
    )


def _record(reduction: Reduction) -> tuple[Section, ...]:
    sentences = record_sentences(reduction)
    if not sentences:
        return ()
    windows = window_table(reduction, limit=_MOST_ROWS)
    faults = record_flag_table(reduction, limit=_MOST_ROWS)
    blocks = (
        *(Paragraph(sentence) for sentence in sentences),
        Drawings(("record",), "alone"),
        Heading("Windows"),
        Tabled(windows, "Windows", max(len(reduction.windows) - _MOST_ROWS, 0)),
        *_where_any(faults, "What is wrong with the record", "What is wrong with the record"),
    )
    return (Section("record", "The logger's record", "Record", blocks),)


def _grade_lines(reduction: Reduction) -> Section:
    level = percent(reduction.level)
    blocks: list[Block] = [
        Paragraph(
            f"The hydraulic grade line (HGL) with its {level} band, where it is wide enough to be seen, and the energy grade "
            "line (EGL), which lies the velocity head above it. Filled marks entered the fit; hollow ones were left out; "
            "ringed ones were flagged."
        )
    ]
    if reduction.runs["run"].nunique() > MOST_PANELS:
        blocks.append(
            Paragraph(
                "There are more runs than can be drawn: the flagged ones and others spread evenly over the flow are shown, "
                f"{MOST_PANELS} at most.",
                "small",
            )
        )
    return Section(
        "grade-lines",
        "Grade lines",
        "Grade lines",
        (*blocks, Drawings(("grade lines",), "pair lines")),
    )


def _residuals(reduction: Reduction) -> Section:
    if not any_left_over(reduction):
        why = "No run has more readings than its line has parameters: no reading lies off it, and there is nothing to draw."
        return Section("residuals-by-tap", "Residuals by tap", "Residuals", (Paragraph(why),))
    return Section(
        "residuals-by-tap",
        "Residuals by tap",
        "Residuals",
        (
            Paragraph(
                "What each reading lies above or below the fitted energy line of its run. A tap whose marks all lie to one side "
                "deserves a look at its hole, its height and its gauge. A mark at the upper or lower edge lies beyond it."
            ),
            Drawings(("residuals",), "alone"),
        ),
    )


def _taps_and_line(reduction: Reduction, display: Display) -> Section:
    ailments = _where_any(ailment_table(reduction, display), "What ails taps and line")
    return Section(
        "taps-and-line",
        "Taps and line",
        "Taps and line",
        (
            *(Paragraph(sentence) for sentence in ailment_sentences(reduction)),
            *ailments,
            *((Drawings(("ailments",)),) if ailments else ()),
        ),
    )


def _slope_and_friction(reduction: Reduction) -> Section:
    return Section(
        "laws",
        "Friction slope and friction factor",
        "Slope and friction factor",
        (
            Paragraph(
                f"Bars are {percent(reduction.level)} intervals; one that ends in an arrowhead at the edge goes on beyond it."
            ),
            Drawings(("slope velocity", "friction factor")),
            *_where_any(exponent_table(reduction), "Exponents"),
        ),
    )


def _what_laws_say(reduction: Reduction, display: Display) -> Section:
    sentences = law_sentences(reduction, display)
    conveyance = conveyance_table(reduction, limit=_MOST_ROWS)
    fold = Fold(
        "Hazen–Williams C and Manning n of each run",
        (
            Tabled(
                conveyance,
                "Hazen–Williams C and Manning n",
                max(len(reduction.conveyance) - _MOST_ROWS, 0),
                "the attribute conveyance of the reduction",
            ),
        ),
    )
    return Section(
        "what-the-laws-say",
        "What the laws say",
        "What the laws say",
        (
            _listed(sentences)
            if sentences
            else Paragraph("Too few turbulent runs to hold them against the laws.", "small"),
            *_where_any(transition_table(reduction, display), "Critical velocities", "Critical velocities"),
            *_where_any(law_table(reduction, display), "Laws of friction", "Laws of friction"),
            *_where_any(surface_table(reduction, display), "Known surfaces", "Known surfaces"),
            *_where_any(
                roughness_check_table(reduction, display),
                "Against what was stated",
                "Against what was stated",
            ),
            *((fold,) if conveyance.rows else ()),
        ),
    )


def _fittings(reduction: Reduction, display: Display) -> tuple[Section, ...]:
    fittings = fitting_table(reduction, display)
    if not fittings.rows:
        return ()
    losses = loss_table(reduction)
    fitted: tuple[Block, ...] = (
        Paragraph(
            "The loss of a straight pipe between the taps is taken off before a loss coefficient is worked out. Bars are "
            f"{percent(reduction.level)} intervals of a single run, the errors that all runs share included; hollow runs did "
            "not enter."
        ),
        Drawings(("fittings",)),
        Tabled(losses, "Fitted losses"),
    )
    blocks = (Tabled(fittings, "Fittings"), *(fitted if losses.rows else ()))
    return (Section("fittings", "Fittings", "Fittings", blocks),)


def _tables(reduction: Reduction, display: Display) -> Section:
    return Section(
        "tables",
        "Tables",
        "Tables",
        (
            Heading("Runs"),
            Tabled(
                run_table(reduction, display, limit=_MOST_ROWS),
                "Runs",
                max(len(reduction.runs) - _MOST_ROWS, 0),
            ),
            Heading("Walls"),
            Tabled(wall_table(reduction, display), "Walls"),
            Heading("Reaches"),
            Tabled(reach_table(reduction, display), "Reaches"),
        ),
    )


def _flags(reduction: Reduction, display: Display) -> Section:
    return Section(
        "flags",
        "Flags",
        "Flags",
        (
            Tabled(
                flag_table(reduction, display, limit=_MOST_ROWS),
                "Flags",
                max(len(reduction.flags) - _MOST_ROWS, 0),
            ),
            *_where_any(slip_table(reduction, limit=_MOST_ROWS), "Slips of the pen", "Slips of the pen"),
        ),
    )


def _readings(reduction: Reduction, display: Display) -> Section:
    taps = tap_table(reduction, display)
    columns = (
        (Heading("Taps"), Tabled(taps, "Taps")) if len(taps.heads) > 1 else (),
        _where_any(
            zero_drift_table(reduction, display),
            "Zero drift between static runs",
            "Zero drift between static runs",
        ),
        _where_any(
            bore_table(reduction, display), "How much hangs on the bore", "How much hangs on the bore"
        ),
    )
    return Section(
        "readings",
        "Readings, taps and bore",
        "Readings",
        (
            Heading("Scatter of the readings"),
            Tabled(scatter_table(reduction, display), "Scatter of the readings"),
            SideBySide(tuple(column for column in columns if column)),
        ),
    )


def _uncertainty(reduction: Reduction, display: Display) -> tuple[Section, ...]:
    budget = budget_table(reduction, display)
    likelihood = likelihood_sentences(reduction, display)
    if not budget.rows and not likelihood:
        return ()
    blocks = (
        _listed((*improvement_sentences(reduction, display), *likelihood)),
        Drawings(("budget", "likelihood")),
        *_where_any(budget, "Uncertainty budget"),
    )
    return (Section("uncertainty", "Uncertainty budget", "Uncertainty", blocks),)


def _inputs(reduction: Reduction, display: Display) -> Section:
    left = max(reduction.raw_readings["run"].nunique() - _MOST_READINGS, 0)
    raw = raw_reading_tables(reduction, display, limit=_MOST_READINGS)
    return Section(
        "inputs",
        "What was put in",
        "Inputs",
        (
            Pairs(statements(reduction, display)),
            Tabled(stated_reach_table(reduction, display), "Reaches as stated"),
            *_where_any(fitting_input_table(reduction, display), "Fittings as stated"),
            *_where_any(side_valve_table(reduction, display), "Isolation checklist"),
            Tabled(gauge_table(reduction, display), "Gauges as stated"),
            SideBySide(
                (
                    (Tabled(stated_tap_table(reduction, display), "Taps as stated"),),
                    (Tabled(uncertainty_table(reduction, display), "Uncertainties as stated"),),
                )
            ),
            Fold(
                "Readings as read",
                tuple(Tabled(one, "Readings as read", left, "the input file") for one in raw),
                unfolded=True,
            ),
        ),
    )


def _cautions(reduction: Reduction, summary: Summary) -> Section:
    cautions = further_cautions(reduction, summary.look)
    return Section(
        "cautions",
        "Cautions",
        "Cautions",
        (
            *((_listed(cautions),) if cautions else ()),
            Heading("At the line"),
            Bullets(handling(reduction)),
            Paragraph(summary.close, "close"),
        ),
        together=True,
    )


def _provenance(reduction: Reduction, version: str, display: Display) -> Section:
    source, files = reduction.survey.get("source"), dict(reduction.survey.get("files") or {})
    gravity = f"{display.value('gravity', reduction.gravity):.5f} {display.unit('gravity')}"
    rows = [("Program", f"gradeline {version}")]
    if source:
        rows.append(("Survey", str(source)))
    rows += [
        (
            "Intervals",
            f"{percent(reduction.level)}; ± is one standard uncertainty. An uncertainty that nobody stated contributes nothing "
            "and is listed as a caution.",
        ),
        ("Gravity", gravity),
    ]
    digests = tuple((str(name), str(digest)) for name, digest in files.items())
    return Section(
        "provenance",
        "Provenance",
        "Provenance",
        (
            Pairs(tuple(rows)),
            *((Heading("Input files, SHA-256"), Pairs(digests, code=True)) if digests else ()),
        ),
        together=True,
    )
