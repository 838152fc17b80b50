"""How the flow was measured: the table ``[flow]``, its outlets and a meter's table."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Annotated, Any

import numpy as np
from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, create_model

from gradeline.errors import QuantityError
from gradeline.flow_methods import FLOW_METHODS, FlowKey, FlowMethod, FlowSetup, MeterTable, Outlet
from gradeline.loader.cells import nearest, read_cells
from gradeline.loader.columns import Columns, Known
from gradeline.loader.flow_gauges import FlowGauges, named_together
from gradeline.loader.gauge_keys import read_file_name
from gradeline.loader.keys import choice_reader, exact_reader, measured_reader, read_text, written
from gradeline.loader.ledger import Ledger
from gradeline.quantities import DIMENSIONS, Measured, parse_uncertainty

__all__ = ["FlowTable", "read_flow_table"]

_NAME = "survey.toml"
_REMEDY = "enter it, or take the row away"
_FEW = 2

Validate = Callable[[Ledger, Any, object, str], BaseModel | None]


@dataclass(frozen=True)
class FlowTable:
    """``[flow]`` as it was read.

    `measured` has the dimension of each stated uncertainty of a reading, `gauges` the gauges at a meter's tappings.
    """

    setup: FlowSetup = field(default_factory=FlowSetup)
    measured: Mapping[str, str] = field(default_factory=dict)
    gauges: FlowGauges | None = None

    @property
    def method(self) -> FlowMethod:
        """What its method reads and takes."""
        return FLOW_METHODS[self.setup.method]

    @property
    def column_names(self) -> dict[str, str]:
        """The columns of the runs that the method reads, and under which of its columns each stands."""
        found: dict[str, str] = {}
        if self.gauges is not None:
            return found  # its gauges have columns of their own
        for name, column in self.method.columns.items():
            if column.each_outlet:
                found |= {f"{name} {outlet.name}": name for outlet in self.setup.outlets}
            else:
                found[name] = name
        return found


#: Stands for the dimension of an uncertainty in parts of what it belongs to.
_PARTS = "relative"


def _either_dimension(dimensions: tuple[str, ...], example: str) -> Callable[[object], Any]:
    """A reader of a standard uncertainty in one of several dimensions, in % only where one of them is a pure number."""

    def read(value: object) -> tuple[str, float]:
        if isinstance(value, int | float) and not isinstance(value, bool):
            raise QuantityError(f"{written(value)} has no unit; write it in quotes, such as {example!r}")
        text = read_text(value)
        first: QuantityError | None = None
        for dimension in dimensions:
            if text.endswith("%") and dimension != "dimensionless":
                continue
            try:
                size, relative = parse_uncertainty(text, dimension)
                return (_PARTS if relative else dimension), size
            except QuantityError as error:
                first = first or error
        if first is not None and len(dimensions) > _FEW:
            units = ", ".join(DIMENSIONS[dimension].units[0] for dimension in dimensions)
            raise QuantityError(
                f"{text!r} is not an uncertainty of a reading; give it with a unit such as {units}"
            )
        raise first or QuantityError(f"{text!r} must be absolute; write it with a unit, such as {example!r}")

    return read


def _relative(example: str) -> Callable[[object], Measured]:
    def read(value: object) -> Measured:
        text = read_text(value) if isinstance(value, str) else ""
        if not text.endswith("%"):
            raise QuantityError(
                f"{written(value)} must be relative; write it in percent, such as {example!r}"
            )
        return Measured(parse_uncertainty(text, "dimensionless")[0])

    return read


def _reader(key: FlowKey, method: FlowMethod) -> Callable[[object], Any]:
    if key.dimension.startswith("uncertainty of "):
        column = key.dimension.removeprefix("uncertainty of ").replace("_", " ")
        dimensions = method.columns[method.primary if column == "zero" else column].dimensions
        return _either_dimension(dimensions, key.example)
    if key.choices:
        return choice_reader(*key.choices)
    if key.dimension == "file":
        return read_file_name
    if key.dimension == "text":
        return read_text
    if key.dimension == "relative":
        return _relative(key.example)
    return measured_reader(key.dimension, key.example, key.low, key.high, strict=key.low is not None)


def _model(
    title: str, method: FlowMethod, keys: Mapping[str, FlowKey], more: Mapping[str, Any]
) -> type[BaseModel]:
    fields: dict[str, Any] = dict(more)
    for key, known in keys.items():
        annotated = Annotated[Any, BeforeValidator(_reader(known, method))]
        fields[key] = (
            annotated,
            Field(examples=[known.example]) if known.required else Field(None, examples=[known.example]),
        )
    config = ConfigDict(extra="forbid", frozen=True, arbitrary_types_allowed=True)
    return create_model(title, __config__=config, **fields)


def read_flow_table(ledger: Ledger, data: object, validate: Validate) -> FlowTable | None:
    """Return what ``[flow]`` says, the default where there is none, None where it is at fault.

    Parameters
    ----------
    ledger : Ledger
        Takes the problems.
    data : object
        The table as TOML has it, None where there is none.
    validate : callable
        Takes the ledger, a model, a table and its path, and notes every fault of the table.
    """
    if data is None:
        return FlowTable()
    if not isinstance(data, dict):
        ledger.problem(
            _NAME, None, "flow", f"{written(data)} stands here; write the table [flow] with its keys"
        )
        return None
    name = data.get("method", "direct")
    if not isinstance(name, str) or name.strip() not in FLOW_METHODS:
        hint = nearest(name if isinstance(name, str) else "", FLOW_METHODS)
        ledger.problem(_NAME, None, "flow.method", f"unknown method {written(name)}; {hint}")
        return None
    name = name.strip()
    method = FLOW_METHODS[name]
    common: dict[str, Any] = {
        "method": (str, "direct"),
        "read": (
            Annotated[Any, BeforeValidator(choice_reader("together", "in order"))],
            Field(None, examples=["in order"]),
        ),
        "constant_head_at": (
            Annotated[Any, BeforeValidator(exact_reader("length", "0 m"))],
            Field(None, examples=["0 m"]),
        ),
    }
    if method.outlet_keys:
        common["outlet"] = (Any, Field(None, examples=["[[flow.outlet]]"]))
    model = validate(ledger, _model("Flow", method, method.keys, common), data, "flow")
    outlets = _outlets(ledger, method, data.get("outlet"), validate) if method.outlet_keys else ()
    if model is None or outlets is None:
        return None
    given = {key: value for key in method.keys if (value := getattr(model, key)) is not None}
    measured = {key: value[0] for key, value in given.items() if isinstance(value, tuple)}
    settings = {
        key: Measured(value[1]) if isinstance(value, tuple) else value for key, value in given.items()
    }
    if not _sound(ledger, method, settings):
        return None
    table = None
    if "table" in settings:
        table = _meter_table(ledger, str(settings["table"]))
        if table is None:
            return None
        measured["table"] = table[1]
    relative = {key for key, dimension in measured.items() if dimension == _PARTS}
    measured = {key: dimension for key, dimension in measured.items() if key not in relative}
    if table and table[0].unit.text == "%":
        # The meter itself reads in percent: so do its errors.
        relative = set()
    setup = FlowSetup(
        method=name,
        settings=settings,
        outlets=outlets,
        table=table[0] if table else None,
        read=getattr(model, "read", None),
        constant_head_at=getattr(model, "constant_head_at", None),
        relative=frozenset(relative),
    )
    return FlowTable(setup, measured)


def _sound(ledger: Ledger, method: FlowMethod, settings: Mapping[str, Any]) -> bool:
    """Whether the keys go together."""
    sound = True
    if method.smaller is not None:
        throat, pipe = (settings[key].value for key in method.smaller)
        if throat >= pipe:
            ledger.problem(
                _NAME,
                None,
                f"flow.{method.smaller[0]}",
                f"the ratio of bores β = {throat / pipe:.4g} must be below 1 ({1000 * throat:.4g} mm in a pipe of "
                f"{1000 * pipe:.4g} mm); give the bore of the plate or the throat here and that of the pipe as "
                f"{method.smaller[1]}",
            )
            sound = False
    sound &= named_together(ledger, settings)
    if {"gauge_fluid", "gauge_fluid_density"} <= set(settings):
        ledger.problem(
            _NAME,
            None,
            "flow.gauge_fluid_density",
            "gauge_fluid is given as well; keep one of the two",
        )
        sound = False
    widths = [settings[key].value for key in ("notch_width", "channel_width") if key in settings]
    if len(widths) == 2 and widths[0] > widths[1] * (1 + 1e-9):
        ledger.problem(
            _NAME,
            None,
            "flow.notch_width",
            f"the notch ({widths[0]:g} m) is wider than its channel ({widths[1]:g} m); mend one of the two",
        )
        sound = False
    if settings.get("equation") == "rehbock" and len(widths) == 2 and widths[0] < widths[1] * (1 - 1e-9):
        ledger.problem(
            _NAME,
            None,
            "flow.equation",
            "Rehbock's equation is for a weir of the channel's full width, and the notch is narrower; take "
            "'kindsvater-carter'",
        )
        sound = False
    return sound


def _outlets(
    ledger: Ledger, method: FlowMethod, data: object, validate: Validate
) -> tuple[Outlet, ...] | None:
    if not isinstance(data, list) or not data:
        ledger.problem(
            _NAME, None, "flow.outlet", "there is no [[flow.outlet]]; describe each outlet that was open"
        )
        return None
    name_field = (Annotated[str, BeforeValidator(read_text)], Field(examples=["north"]))
    model = _model("Outlet", method, method.outlet_keys, {"name": name_field})
    found: list[Outlet] = []
    for place, each in enumerate(data, start=1):
        read = validate(ledger, model, each, f"flow.outlet[{place}]")
        if read is None:
            continue
        name = str(getattr(read, "name"))  # noqa: B009 (the model is made at run time: no type knows its names)
        if name in {one.name for one in found}:
            ledger.problem(
                _NAME,
                None,
                f"flow.outlet[{place}].name",
                f"two outlets are called {name!r}; give each its own name",
            )
            continue
        found.append(Outlet(name, {key: getattr(read, key) for key in method.outlet_keys}))
    return tuple(found) if len(found) == len(data) else None


def _meter_table(ledger: Ledger, file: str) -> tuple[MeterTable, str] | None:
    """The meter's table and the dimension of its readings."""
    cells = read_cells(ledger, file)
    if cells is None:
        return None
    dimensions = FLOW_METHODS["calibrated meter"].columns["meter reading"].dimensions
    before = len(ledger.problems)
    known = {
        "reading": Known(dimensions, required=True, remedy=_REMEDY),
        "flow": Known(("flow",), required=True, remedy=_REMEDY),
        "flow uncertainty": Known(("flow",), difference=True),
    }
    columns = Columns(ledger, cells, known)
    reading, flow, flow_u = (columns.values(name) for name in known)
    for name, values in (("reading", reading), ("flow", flow)):
        if name in columns:
            raw = columns.raw(name)
            for row in [row for row, cell in enumerate(raw) if not cell]:
                columns.problem(row, name, f"the cell is empty; {_REMEDY}")
            with np.errstate(invalid="ignore"):
                for row in (np.flatnonzero(np.diff(values) <= 0) + 1).tolist():
                    columns.problem(
                        row,
                        name,
                        f"{raw[row]} does not rise above the {raw[row - 1]} before it; readings and flows of a meter's "
                        "table rise together, so sort the rows or mend the value",
                    )
    if len(cells) < 2:
        ledger.problem(file, None, None, "the table has fewer than two points; add the others")
    unit = columns.units.get("reading")
    if len(ledger.problems) > before or unit is None:
        return None
    return MeterTable(file, tuple(reading), tuple(flow), tuple(flow_u), unit), unit.dimension
