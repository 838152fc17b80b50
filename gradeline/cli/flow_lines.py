"""How the flow was measured, as the lines of a new survey and as `gradeline check` tells it."""

from __future__ import annotations

from gradeline.flow_methods import FLOW_METHODS, FlowKey, FlowSetup
from gradeline.quantities import Measured

__all__ = ["flow_template", "flow_text"]


def flow_template() -> str:
    """Return ``[flow]`` as comments: every method, its columns in place of 'flow', its keys."""
    lines = [
        "# [flow]                        # where the flow drifted, or was not read itself",
        '#   read = "in order"           # or "together": how the taps were read while it drifted; then readings.csv has',
        "#                               # 'flow start [L/s]' and 'flow end [L/s]', perhaps 'direction' (rising or falling)",
        _line("#   ", "constant_head_at", '"0 m"', "chainage of the head that stayed meanwhile"),
    ]
    told: set[str] = set()
    for name, method in FLOW_METHODS.items():
        if name == "direct":
            continue
        columns = ", ".join(
            f"'{column}{' NAME' if known.each_outlet else ''}'" for column, known in method.columns.items()
        )
        lines.append(
            f"#   method = \"{name}\" reads {columns} in place of 'flow', 0 in a static run, and takes:"
        )
        fresh = {key: known for key, known in method.keys.items() if f"{key} {known.meaning}" not in told}
        told |= {f"{key} {known.meaning}" for key, known in fresh.items()}
        lines += [_key(key, known) for key, known in fresh.items()]
        again = [key for key in method.keys if key not in fresh]
        lines += [f"#     as above: {', '.join(again)}"] if again else []
        if method.outlet_keys:
            lines += ["#     [[flow.outlet]]           # one for each", '#     name = "north"']
            lines += [_key(key, known) for key, known in method.outlet_keys.items()]
    return "\n".join(lines)


def _key(name: str, known: FlowKey) -> str:
    more = f"; or {', '.join(known.choices[1:])}" if known.choices else ""
    return _line(
        "#     ", name, f'"{known.example}"', known.meaning + more + (" (needed)" if known.required else "")
    )


def _line(mark: str, name: str, value: str, meaning: str) -> str:
    return f"{f'{mark}{name} = {value}':<31} # {meaning}"


def flow_text(setup: FlowSetup) -> str:
    """Return how the flow was measured in one line, values in SI; empty where it was simply given."""
    if setup == FlowSetup():
        return ""
    said = ["the flow itself" if setup.method == "direct" else setup.method]
    said += [f"{key} {_value(value)}" for key, value in setup.settings.items()]
    for outlet in setup.outlets:
        own = ", ".join(f"{key} {_value(value)}" for key, value in outlet.settings.items())
        said.append(f"outlet {outlet.name} ({own})")
    if setup.read is not None:
        said.append(f"taps read {setup.read}")
    if setup.constant_head_at is not None:
        said.append(f"head constant at {setup.constant_head_at:g} m")
    return f"Flow (SI): {', '.join(said)}"


def _value(value: Measured | str) -> str:
    if isinstance(value, str):
        return value
    return f"{value.value:.6g}" + ("" if value.u is None else f" ± {value.u:.2g}")
