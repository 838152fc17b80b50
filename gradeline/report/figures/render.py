"""Every figure of a report as SVG and PNG bytes, the same bytes for the same reduction."""

from __future__ import annotations

import io
import re
import warnings
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.converted import converted
from gradeline.report.figures.ailments import (
    BreakArtists,
    TapErrorArtists,
    ailing_taps,
    break_title,
    broken_places,
    draw_break,
    draw_tap_error,
)
from gradeline.report.figures.budget import budget_alt, budget_figure
from gradeline.report.figures.compose import Canvases, grade_line_figure, sheet_figure, single
from gradeline.report.figures.differences import drawn_runs
from gradeline.report.figures.grade_lines import flagged_words, run_title
from gradeline.report.figures.laws import draw_friction_factor, draw_slope_velocity
from gradeline.report.figures.likelihood import LikelihoodArtists, draw_likelihood, drawn_walls
from gradeline.report.figures.logger_record import record_alt, record_figure, recorded
from gradeline.report.figures.losses import LossArtists, draw_loss_coefficient, drawn_losses
from gradeline.report.figures.residuals import any_left_over, draw_residuals
from gradeline.report.figures.style import shorten, styled

__all__ = ["Picture", "embedded", "pictures", "png_of", "svg_of"]

#: More runs than this are drawn as panels.
SINGLE_RUNS = 24
PANELS_A_SHEET = 12
MOST_PANELS = 120
#: Fitted losses, and walls, that get a figure.
_MOST_LOSSES, _MOST_WALLS = 12, 6
#: Ailing taps that get a figure.
_MOST_TAPS = 4
_DPI = 125
_PAPER_DPI = 200


@dataclass(frozen=True)
class Picture:
    """One figure of a report.

    Parameters
    ----------
    name : str
        Name of its file without the ending.
    title : str
        One line for the page's caption.
    alt : str
        What it shows, for readers who do not see it.
    group : {"record", "grade lines", "residuals", "ailments", "slope velocity", "friction factor", "fittings", "budget", "likelihood"}
        The section of the page it belongs to.
    svg, png : bytes
        Empty where that format was not asked for.
    paper : bytes
        For a PDF, empty where that was not asked for: SVG whose words are drawn as shapes; a PNG of 200 dpi where the
        figure is hatched, since SVG patterns are not understood there.
    """

    name: str
    title: str
    alt: str
    group: str
    svg: bytes
    png: bytes
    paper: bytes = b""


def pictures(
    reduction: Reduction,
    *,
    svg: bool = True,
    png: bool = True,
    paper: bool = False,
    display: Display = SI_DISPLAY,
) -> tuple[Picture, ...]:
    """Draw every figure of a reduction.

    Parameters
    ----------
    reduction : Reduction
        What is drawn.
    svg, png, paper : bool
        Which formats are wanted; `paper` is what a PDF embeds.
    display : Display
        Units of the axes.

    Returns
    -------
    tuple of Picture
        Grade lines run by run (or sheets of panels where there are more than 24 runs), residuals by tap, slope
        against velocity, friction factor against Reynolds number.
    """
    reduction = converted(reduction, display)
    with styled(), warnings.catch_warnings():
        # a name in a script that the font lacks: the SVG keeps the text, the PNG shows a box
        warnings.filterwarnings("ignore", message=r"Glyph .* missing from", category=UserWarning)
        plans = _plans(reduction, display, Canvases())
        return tuple(_render(*plan, svg=svg, png=png, paper=paper) for plan in plans)


_Plan = tuple[str, str, str, str, Callable[[], Figure]]


def _plans(reduction: Reduction, display: Display, blanks: Canvases) -> Iterator[_Plan]:
    if recorded(reduction):
        yield (
            "record",
            "The logger's record",
            record_alt(reduction),
            "record",
            partial(record_figure, reduction),
        )
    runs = drawn_runs(reduction)
    if len(runs) <= SINGLE_RUNS:
        for n, run in enumerate(runs, 1):
            slug = re.sub(r"[^A-Za-z0-9_-]+", "-", str(run)).strip("-")[:40]
            title = run_title(reduction, run, display)
            yield (
                f"grade_lines_{n:02d}" + (f"_{slug}" if slug else ""),
                title,
                f"Hydraulic and energy grade line against chainage. {title}. {_readings_in_words(reduction, run)}",
                "grade lines",
                partial(grade_line_figure, reduction, run, title, display, blanks),
            )
    else:
        chosen = chosen_runs(reduction)
        sheets = [chosen[at : at + PANELS_A_SHEET] for at in range(0, len(chosen), PANELS_A_SHEET)]
        for n, sheet in enumerate(sheets, 1):
            title = f"Grade lines, sheet {n} of {len(sheets)}: runs {shorten(sheet[0], 20)} to {shorten(sheet[-1], 20)}"
            yield (
                f"grade_lines_sheet_{n}",
                title,
                f"{title}. Each panel shows the hydraulic and the energy grade line of one run against chainage.",
                "grade lines",
                partial(sheet_figure, reduction, sheet, display),
            )
    if any_left_over(reduction):
        yield (
            "residuals",
            "Residuals by tap, all runs",
            "Measured minus fitted energy head of every reading, the taps in order of chainage, flagged readings ringed.",
            "residuals",
            lambda: single(lambda ax: draw_residuals(ax, reduction, display=display), "Residuals by tap"),
        )
    for n, row in enumerate(ailing_taps(reduction)[:_MOST_TAPS], 1):
        title = f"{str(row['what']).capitalize()} {shorten(row['name'], 20)}: {row['ailment']}"
        yield (
            f"tap_error_{n}",
            title,
            f"{title}. Its error in every run, as the other readings show it, with its interval, and what the error would be "
            "by the patterns that fit.",
            "ailments",
            partial(single, partial(_tap_error, reduction, str(row["name"]), display), title),
        )
    for n, row in broken_places(reduction):
        title = break_title(row, display)
        yield (
            f"unlisted_{n + 1}",
            title,
            f"{title}. Energy heads of all runs against chainage, the straight line taken out, over the velocity head for a loss and "
            "over the friction slope for a change of slope; the stretch that holds the place is shaded.",
            "ailments",
            partial(single, partial(_break, reduction, n, display), title),
        )
    yield (
        "slope_velocity",
        "Friction slope against velocity",
        "Friction slope against mean velocity on log axes with the fitted powers of the velocity.",
        "slope velocity",
        lambda: single(
            lambda ax: draw_slope_velocity(ax, reduction, display=display), "Friction slope and velocity"
        ),
    )
    yield (
        "friction_factor",
        "Friction factor against Reynolds number",
        "Darcy friction factor against Reynolds number on log axes with the laminar law, the law of a smooth wall "
        "and the fitted law with its band.",
        "friction factor",
        lambda: single(
            lambda ax: draw_friction_factor(ax, reduction), "Friction factor and Reynolds number", height=4.4
        ),
    )
    for n, name in enumerate(drawn_losses(reduction)[:_MOST_LOSSES], 1):
        title = f"Loss coefficient of {shorten(name, 24)} and Reynolds number"
        yield (
            f"loss_coefficient_{n}",
            title,
            f"{title}: K of each run with its interval, the mean over all runs with its band, and the published value of "
            "the kind where there is one.",
            "fittings",
            partial(single, partial(_loss, reduction, name), title),
        )
    if len(reduction.budget):
        yield (
            "uncertainty_budget",
            "Where the uncertainty comes from",
            budget_alt(reduction),
            "budget",
            partial(budget_figure, reduction),
        )
    for n, wall in enumerate(drawn_walls(reduction)[:_MOST_WALLS], 1):
        title = f"Likelihood of the roughness, {shorten(wall, 40)}"
        yield (
            f"likelihood_{n}",
            title,
            f"{title}: relative likelihood against the roughness with its interval, the 95 % upper bound and the roughness at "
            "which the roughness Reynolds number of the fastest run is 5.",
            "likelihood",
            partial(single, partial(_likelihood, reduction, wall, display), title, height=3.4),
        )


def _likelihood(reduction: Reduction, wall: str, display: Display, ax: Axes) -> LikelihoodArtists:
    return draw_likelihood(ax, reduction, wall, display=display)


def _tap_error(reduction: Reduction, name: str, display: Display, ax: Axes) -> TapErrorArtists:
    return draw_tap_error(ax, reduction, name, display=display)


def _break(reduction: Reduction, number: int, display: Display, ax: Axes) -> BreakArtists:
    return draw_break(ax, reduction, number, display=display)


def _loss(reduction: Reduction, name: str, ax: Axes) -> LossArtists:
    return draw_loss_coefficient(ax, reduction, name)


def chosen_runs(reduction: Reduction) -> list[str]:
    """Return the runs that get a panel: all up to 120, else the flagged ones and others spread evenly over the flow."""
    runs = drawn_runs(reduction)
    if len(runs) <= MOST_PANELS:
        return runs
    flagged = set(reduction.flags["run"].dropna())
    kept = [run for run in runs if run in flagged][: MOST_PANELS // 2]
    flow = dict(zip(reduction.runs["run"], reduction.runs["flow"].to_numpy(float), strict=True))
    rest = sorted((run for run in runs if run not in flagged), key=lambda run: flow[run])
    if rest:
        places = np.unique(np.linspace(0, len(rest) - 1, MOST_PANELS - len(kept)).astype(int))
        kept += [rest[place] for place in places]
    wanted = set(kept)
    return [run for run in runs if run in wanted]


def _readings_in_words(reduction: Reduction, run: str) -> str:
    heads = reduction.heads[(reduction.heads["run"] == run).to_numpy(bool)]
    used = int(heads["used"].fillna(False).to_numpy(bool).sum())
    names = heads["gauge"].where(heads["tap_2"].notna(), heads["tap"])
    flagged = [str(name) for name, flag in zip(names, heads["flag"], strict=True) if flag == "outlier"]
    about = flagged_words(reduction, run)
    words = f"{about[0].upper()}{about[1:]}. " if about else ""
    words += f"{used} readings in the fit" + (" of its line" if about else "")
    return f"{words}; flagged: {', '.join(flagged)}." if flagged else f"{words}; none flagged."


def _render(
    name: str,
    title: str,
    alt: str,
    group: str,
    draw: Callable[[], Figure],
    *,
    svg: bool,
    png: bool,
    paper: bool,
) -> Picture:
    mpl.rcParams["svg.hashsalt"] = name
    figure = draw()
    as_svg = svg_of(figure) if svg else b""
    for_paper = b""
    if paper:
        with mpl.rc_context({"svg.fonttype": "path"}):
            for_paper = _METADATA.sub(b"", svg_of(figure), count=1)
        if b"<pattern" in for_paper:
            for_paper = png_of(figure, _PAPER_DPI)
    return Picture(name, title, alt, group, as_svg, png_of(figure, _DPI) if png else b"", for_paper)


def svg_of(figure: Figure) -> bytes:
    """Return a figure as SVG, the same bytes every time where `svg.hashsalt` is set."""
    out = io.BytesIO()
    FigureCanvasSVG(figure).print_svg(  # type: ignore[no-untyped-call]  # the library has no types
        out, metadata={"Date": None, "Creator": None}
    )
    return out.getvalue()


def png_of(figure: Figure, dpi: int) -> bytes:
    """Return a figure as PNG, the same bytes every time."""
    out = io.BytesIO()
    figure.set_dpi(dpi)
    canvas = FigureCanvasAgg(figure)
    canvas.print_png(  # type: ignore[no-untyped-call]  # the library has no types
        out, metadata={"Software": None}, pil_kwargs={"compress_level": 1}
    )
    return out.getvalue()


_METADATA = re.compile(rb"<metadata>.*?</metadata>", re.DOTALL)
_TAG = re.compile(r"<[a-zA-Z][^>]*>")
_IDENTITY = re.compile(r"""\bid="([^"]*)"|url\(#([^)]*)\)|href="#([^"]*)\"""")


def embedded(picture: Picture) -> str:
    """Return a picture's SVG as it stands inside a page: no prolog, its names its own, an accessible label.

    Parameters
    ----------
    picture : Picture
        With its SVG.

    Returns
    -------
    str
        Markup; every text in it was escaped when it was drawn.
    """
    text = picture.svg.decode("utf-8")
    text = text[text.index("<svg") :]
    text = re.sub(r"<metadata>.*?</metadata>", "", text, count=1, flags=re.DOTALL)
    prefix = picture.name + "-"

    def own(match: re.Match[str]) -> str:
        return _IDENTITY.sub(_renamed, match.group())

    def _renamed(match: re.Match[str]) -> str:
        identity, url, reference = match.groups()
        if identity is not None:
            return f'id="{prefix}{identity}"'
        return f"url(#{prefix}{url})" if url is not None else f'href="#{prefix}{reference}"'

    text = _TAG.sub(own, text)
    return re.sub(
        r'^<svg\b([^>]*?) width="[^"]*"',
        r'<svg role="img"\1',
        re.sub(r'^(<svg\b[^>]*?) height="[^"]*"', r"\1", text),
    )
