"""The gauges at the tappings of a flow's meter: their columns of the runs, which rows are static, what cannot be."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

import numpy as np

from gradeline.gauge_kinds import GAUGE_KINDS, GaugeKind
from gradeline.loader.cells import nearest
from gradeline.loader.columns import Columns, Known
from gradeline.loader.gauge_keys import Span
from gradeline.loader.ledger import Ledger
from gradeline.quantities import Measured

__all__ = [
    "PAIR",
    "TAPPINGS",
    "FlowGauge",
    "FlowGauges",
    "check_gauge_rows",
    "flow_gauges_of",
    "gauge_columns",
    "joined",
    "named_gauges",
    "named_together",
    "static_rows",
]

_NAME = "survey.toml"
_KEYS = ("differential_gauge", "upstream_gauge", "downstream_gauge")

#: What the two tappings are called in the legs of a compound manometer.
TAPPINGS = ("upstream", "downstream")
#: The columns of two gauges that read one tapping each.
PAIR = ("upstream tapping", "downstream tapping")


@dataclass(frozen=True)
class FlowGauge:
    """A gauge at the tappings: its name, its kind (None where that is at fault), its levels and its scale."""

    name: str
    kind: GaugeKind | None
    levels: tuple[str, ...] = ()
    span: Span | None = None

    @property
    def parts(self) -> list[str]:
        """The columns that it is read in one by one: its limbs or its levels."""
        kind = self.kind
        named = () if kind is None else self.levels if kind.legs else kind.limbs
        return [f"{self.name} {part}" for part in named]


@dataclass(frozen=True)
class FlowGauges:
    """One gauge of a differential kind, or two that read a tapping each.

    Parameters
    ----------
    gauges : tuple of FlowGauge
        One, or the upstream and the downstream one.
    rise : Measured
        How much higher the downstream tapping lies, m.
    """

    gauges: tuple[FlowGauge, ...]
    rise: Measured = field(default_factory=lambda: Measured(0.0))

    @property
    def pair(self) -> bool:
        """Whether two readings make the difference."""
        return len(self.gauges) > 1

    @property
    def told(self) -> str:
        """Their names as a phrase."""
        names = list(dict.fromkeys(repr(gauge.name) for gauge in self.gauges))
        return f"gauge{'s' * (len(names) > 1)} {' and '.join(names)}"

    @property
    def columns(self) -> dict[str, FlowGauge]:
        """Every column that they may be read in."""
        if self.pair:
            return dict(zip(PAIR, self.gauges, strict=True))
        (one,) = self.gauges
        whole = [] if one.kind is None or one.kind.legs else [one.name]
        return dict.fromkeys([*whole, *one.parts], one)


def gauge_columns(gauges: FlowGauges, headings: Iterable[str]) -> dict[str, Known]:
    """Return the columns of the runs that the gauges are read from, and ``flow`` for the static runs.

    Parameters
    ----------
    gauges : FlowGauges
        Of ``[flow]``.
    headings : iterable of str
        Of the table: where a gauge is at fault, whatever bears its name is one of its columns.
    """
    known = {
        name: Known((gauge.kind.reading,), remedy="enter it, or take the row away")
        if gauge.kind is not None
        else Known(own_unit=False)
        for name, gauge in gauges.columns.items()
    }
    for gauge in gauges.gauges:
        if gauge.kind is None:
            own = [name for name in headings if name == gauge.name or name.startswith(f"{gauge.name} ")]
            known |= dict.fromkeys(own, Known(own_unit=False))
    return {"flow": Known(("flow",), remedy="leave it empty, or give 0 for a static run"), **known}


def _difference(columns: Columns, gauges: FlowGauges) -> np.ndarray:
    """The reading as it stands, one part less the other; NaN for a chain of legs, which tells no zero by itself."""
    (one, *_) = gauges.gauges
    if gauges.pair:
        return np.asarray(columns.values(PAIR[0]) - columns.values(PAIR[1]))
    if one.kind is None or one.kind.legs:
        return np.full(len(columns.cells), np.nan)
    if one.name in columns or not one.parts:
        return columns.values(one.name)
    first, second = one.parts
    return np.asarray(columns.values(first) - columns.values(second))


def static_rows(columns: Columns, gauges: FlowGauges) -> np.ndarray:
    """Return 0 for each static row and NaN for the others, whose flow is still to be worked out.

    A row is static where its ``flow`` says 0, or where the gauges show no difference and ``flow`` is empty.
    """
    said = columns.values("flow")
    alike = (_difference(columns, gauges) == 0) & np.isnan(said)
    return np.where((said == 0) | alike, 0.0, np.nan)


def check_gauge_rows(columns: Columns, gauges: FlowGauges, still: np.ndarray) -> None:
    """Note every column that is missing or doubled, and every reading that is missing or beyond the scale.

    Parameters
    ----------
    columns : Columns
        Of the runs.
    gauges : FlowGauges
        Of ``[flow]``.
    still : bool array
        Which rows are static.
    """
    if "flow" in columns:
        for row in np.flatnonzero(columns.values("flow") > 0).tolist():
            columns.problem(
                row,
                "flow",
                f"{columns.raw('flow')[row]} is a flow, but [flow] has it worked out from {gauges.told}; leave the cell empty, "
                "or give 0 for a static run",
            )
    if any(gauge.kind is None for gauge in gauges.gauges):
        return
    for name in _read(columns, gauges):
        _check_span(columns, name, gauges.columns[name])
        for row, cell in enumerate(columns.raw(name)):
            if not cell and not still[row]:
                columns.problem(
                    row, name, f"the cell is empty; read the {gauges.told}, or give flow 0 for a static run"
                )


def _read(columns: Columns, gauges: FlowGauges) -> list[str]:
    """The columns that the gauges are read in; what is missing or doubled is noted, and then there are none."""
    (one, *_) = gauges.gauges
    assert one.kind is not None
    parts = list(PAIR) if gauges.pair else one.parts
    whole = not gauges.pair and one.name in columns
    read = [name for name in parts if name in columns]
    dimensions = {
        name: gauge.kind.reading for name, gauge in gauges.columns.items() if gauge.kind is not None
    }

    def headed(names: Iterable[str]) -> str:
        units: Mapping[str, str] = {"length": "mm", "pressure": "kPa"}
        return " and ".join(f"'{name} [{units[dimensions[name]]}]'" for name in names)

    def note(message: str) -> None:
        columns.ledger.problem(columns.cells.file, columns.cells.heading_line, None, message)

    if set(gauges.columns) & set(columns.misnamed):
        return []  # told already
    if whole and read:
        note(f"there are the columns {one.name!r} and {read[0]!r}; keep the deflection or the limbs")
        return []
    if whole:
        return [one.name]
    missing = [name for name in parts if name not in read]
    if parts and not missing:
        return parts
    wanted = headed(missing)
    if not read and not gauges.pair and not one.kind.legs:
        wanted = headed([one.name]) + (f", or {headed(parts)}" if parts else "")
    note(f"the flow is worked out from {gauges.told}, which is not read; add the column {wanted}")
    return []


def _check_span(columns: Columns, name: str, gauge: FlowGauge) -> None:
    span = gauge.span
    if span is None or gauge.kind is None:
        return
    low, high = span
    if name == gauge.name and gauge.kind.reading == "length":
        # One deflection is a difference of two places on the scale.
        low, high = low - high, high - low
    slack = 1e-9 * max(abs(low), abs(high))
    shown = " to ".join(f"{span.unit.from_si(end):g}" for end in (low, high))
    values = columns.values(name)
    with np.errstate(invalid="ignore"):
        beyond = np.flatnonzero((values < low - slack) | (values > high + slack))
    for row in beyond.tolist():
        columns.problem(
            row,
            name,
            f"{columns.raw(name)[row]} lies beyond the scale of gauge {gauge.name!r}, {shown} {span.unit.text}; mend the "
            "reading or the gauge's range",
        )


def named_gauges(flow: object) -> list[str]:
    """Return the names of the gauges that ``[flow]`` names, each once; flow is the table as TOML has it."""
    if not isinstance(flow, dict):
        return []
    return list(dict.fromkeys(str(flow[key]).strip() for key in _KEYS if key in flow))


def named_together(ledger: Ledger, settings: Mapping[str, object]) -> bool:
    """Whether the keys of ``[flow]`` that tell of its gauges go together; a fault is noted.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    settings : mapping
        The keys that were given.
    """
    given = [key for key in _KEYS if key in settings]
    before = len(ledger.problems)

    def note(key: str, message: str) -> None:
        ledger.problem(_NAME, None, f"flow.{key}", message)

    if not given:
        if "tapping_rise" in settings:
            note(
                "tapping_rise",
                "the column 'differential' is taken at one level, so that the key has no effect; take it away, or name the "
                "gauge as differential_gauge",
            )
        return len(ledger.problems) == before
    if "differential_gauge" in settings:
        for key in given[1:]:
            note(
                key,
                "differential_gauge is given as well; keep one gauge between the tappings, or one at each",
            )
    elif len(given) == 1:
        other = next(key for key in _KEYS[1:] if key not in settings)
        note(given[0], f"one tapping alone tells no difference; add {other}, or name a differential_gauge")
    for key, instead in (
        ("u_differential", "uncertainty"),
        ("u_scale", "u_scale"),
        ("u_zero", "u_zero"),
        ("gauge_fluid", "gauge_fluid"),
        ("gauge_fluid_density", "gauge_fluid_density"),
    ):
        if key in settings:
            note(
                key,
                f"the differential is read by a gauge; state it there, as [gauge.{settings[given[0]]}] {instead}",
            )
    return len(ledger.problems) == before


def joined(ledger: Ledger, name: str, table: object) -> object:
    """Return the table of a gauge between the tappings with these as its taps; taps of the line are noted.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    name : str
        Of the gauge.
    table : object
        As TOML has it; one of another kind, or at fault, is returned as it is.
    """
    kind = table.get("kind") if isinstance(table, dict) else None
    known = GAUGE_KINDS.get(kind.strip()) if isinstance(kind, str) else None
    if not isinstance(table, dict) or known is None or not known.differential:
        return table
    for key in TAPPINGS:
        if key in table:
            ledger.problem(
                _NAME,
                None,
                f"gauge.{name}.{key}",
                "the gauge is joined to the tappings of the flow's meter, as [flow] says, not to taps of the line; take the "
                "key away",
            )
    return {**table, **{key: key for key in TAPPINGS}}


def flow_gauges_of(
    ledger: Ledger, settings: Mapping[str, object], found: Mapping[str, FlowGauge], others: Iterable[str]
) -> FlowGauges | None:
    """Return the gauges that ``[flow]`` names, None where it names none or they cannot be.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    settings : mapping
        The keys of ``[flow]``.
    found : mapping of str to FlowGauge
        Those of its gauges that are described.
    others : iterable of str
        The other gauges that are described.
    """
    given = {key: str(settings[key]) for key in _KEYS if key in settings}
    gauges = []
    for key, name in given.items():
        if name not in found:
            hint = nearest(name, others)
            ledger.problem(_NAME, None, f"flow.{key}", f"there is no [gauge.{name}]; {hint}")
            continue
        gauges.append(found[name])
        kind = found[name].kind
        if kind is None:
            continue
        if key == "differential_gauge" and not kind.differential:
            ledger.problem(
                _NAME,
                None,
                f"flow.{key}",
                f"gauge {name!r} reads one place and shows no difference; name a u-tube, a differential transducer or the like, "
                "or one gauge at each tapping as upstream_gauge and downstream_gauge",
            )
        elif key != "differential_gauge" and kind.differential:
            ledger.problem(
                _NAME,
                None,
                f"flow.{key}",
                f"gauge {name!r} reads a difference itself; name it as differential_gauge",
            )
    if len(gauges) < len(given) or not gauges:
        return None
    kinds = [gauge.kind for gauge in gauges]
    if (
        len(gauges) > 1
        and gauges[0].name != gauges[1].name
        and any(k is not None and k.level_key for k in kinds)
    ):
        ledger.problem(
            _NAME,
            None,
            "flow.upstream_gauge",
            "columns under trapped gas tell a difference only among themselves; name one gauge for both tappings",
        )
    rise = settings.get("tapping_rise")
    return FlowGauges(tuple(gauges), rise if isinstance(rise, Measured) else Measured(0.0))
