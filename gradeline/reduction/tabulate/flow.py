"""How the flow was measured, as rows of the table of inputs."""

from __future__ import annotations

from gradeline.flow_methods import FLOW_METHODS, FlowKey, FlowMethod, FlowSetup
from gradeline.quantities import Measured

__all__ = ["flow_rows"]

_SI = {
    "length": "m",
    "pressure": "Pa",
    "volume": "m³",
    "time": "s",
    "mass": "kg",
    "density": "kg/m³",
    "angle": "rad",
}


def flow_rows(
    setup: FlowSetup,
) -> list[tuple[str, str, str, str | None, str | None, float | None, float | None]]:
    """Return what ``[flow]`` says, values as text in SI; nothing where the flow was simply given.

    Parameters
    ----------
    setup : FlowSetup
        Of the survey.

    Returns
    -------
    list of tuple
        Rows of the table of inputs.
    """
    if setup == FlowSetup():
        return []
    method = FLOW_METHODS[setup.method]
    said = [("method", setup.method)]
    said += [
        (_words(key), _text(method, method.keys[key], setup, value)) for key, value in setup.settings.items()
    ]
    for outlet in setup.outlets:
        said += [
            (f"outlet {outlet.name}, {_words(key)}", _text(method, method.outlet_keys[key], setup, value))
            for key, value in outlet.settings.items()
        ]
    if setup.read is not None:
        said.append(("taps read", setup.read))
    if setup.constant_head_at is not None:
        said.append(("constant head at", f"{setup.constant_head_at:g} m"))
    return [("flow", "", what, text, None, None, None) for what, text in said]


def _words(key: str) -> str:
    return f"u of {key[2:].replace('_', ' ')}" if key.startswith("u_") else key.replace("_", " ")


def _text(method: FlowMethod, key: FlowKey, setup: FlowSetup, value: Measured | str) -> str:
    if isinstance(value, str):
        return value
    if key.dimension == "relative":
        return f"{100 * value.value:.4g} %"
    unit = _SI.get(_dimension(method, key, setup), "")
    u = "" if value.u is None else f" ± {value.u:.2g}"
    return f"{value.value:.6g}{u} {unit}".rstrip()


def _dimension(method: FlowMethod, key: FlowKey, setup: FlowSetup) -> str:
    """The dimension of a key; that of an uncertainty is its column's."""
    if not key.dimension.startswith("uncertainty of "):
        return key.dimension
    column = key.dimension.removeprefix("uncertainty of ").replace("_", " ")
    dimensions = method.columns[method.primary if column == "zero" else column].dimensions
    if {"gauge_fluid", "gauge_fluid_density"} & set(setup.settings):
        return "length"
    return "SI" if "velocity" in dimensions else dimensions[0]
