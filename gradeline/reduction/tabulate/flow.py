"""How the flow was measured, as rows of the table of inputs."""

from __future__ import annotations

from gradeline.flow_methods import FLOW_METHODS, FlowKey, FlowMethod, FlowSetup
from gradeline.quantities import Measured

__all__ = ["flow_rows"]

_Row = tuple[str, str, str, str | None, str | None, float | None, float | None]

#: A dimension and the quantity that its values are shown as.
_SHOWN = {
    "length": "length",
    "pressure": "pressure",
    "density": "density",
    "angle": "angle",
    "flow": "flow",
    "relative": "relative",
    "dimensionless": "number",
}
#: What only a flow is measured by, in the unit of a bench, and how many of it make the SI unit.
_BENCH_UNITS = {"volume": ("L", 1e3), "time": ("s", 1.0), "mass": ("kg", 1.0)}


def flow_rows(setup: FlowSetup) -> list[_Row]:
    """Return what ``[flow]`` says; nothing where the flow was simply given.

    Parameters
    ----------
    setup : FlowSetup
        Of the survey.

    Returns
    -------
    list of tuple
        Rows of the table of inputs: values in SI with their quantity; volumes in L, times in s and masses in kg as text.
    """
    if setup == FlowSetup():
        return []
    method = FLOW_METHODS[setup.method]
    rows = [_said("method", setup.method)]
    rows += [
        _row(_words(key), key, method.keys[key], method, setup, value)
        for key, value in setup.settings.items()
    ]
    for outlet in setup.outlets:
        rows += [
            _row(f"outlet {outlet.name}, {_words(key)}", key, method.outlet_keys[key], method, setup, value)
            for key, value in outlet.settings.items()
        ]
    if setup.read is not None:
        rows.append(_said("taps read", setup.read))
    if setup.constant_head_at is not None:
        rows.append(("flow", "", "constant head at", None, "chainage", setup.constant_head_at, None))
    return rows


def _said(what: str, text: str) -> _Row:
    return "flow", "", what, text, None, None, None


def _words(key: str) -> str:
    return f"u of {key[2:].replace('_', ' ')}" if key.startswith("u_") else key.replace("_", " ")


def _row(
    what: str, name: str, key: FlowKey, method: FlowMethod, setup: FlowSetup, value: Measured | str
) -> _Row:
    if isinstance(value, str):
        return _said(what, value)
    dimension = _dimension(method, key, setup)
    if dimension in _BENCH_UNITS:
        unit, factor = _BENCH_UNITS[dimension]
        return _said(what, f"{factor * value.value:.6g} {unit}")
    if dimension not in _SHOWN:
        return _said(what, f"{value.value:.6g} (in the SI unit of its readings)")
    quantity = _SHOWN[dimension]
    if dimension == "length":
        quantity = (
            "diameter" if name.endswith("bore") else "small head" if name.startswith("u_") else quantity
        )
    return "flow", "", what, None, quantity, value.value, value.u


def _dimension(method: FlowMethod, key: FlowKey, setup: FlowSetup) -> str:
    """The dimension of a key; that of an uncertainty is its column's, ``"any"`` where that may be many."""
    if not key.dimension.startswith("uncertainty of "):
        return key.dimension
    column = key.dimension.removeprefix("uncertainty of ").replace("_", " ")
    dimensions = method.columns[method.primary if column == "zero" else column].dimensions
    if {"gauge_fluid", "gauge_fluid_density"} & set(setup.settings):
        return "length"
    return "any" if "velocity" in dimensions else dimensions[0]
