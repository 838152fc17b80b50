"""How the flow was measured, as the lines of a new survey and as `gradeline check` tells it."""

from __future__ import annotations

from gradeline.flow_methods import FLOW_METHODS, FlowKey, FlowSetup
from gradeline.quantities.printing import SI_DISPLAY, Display

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


def flow_text(setup: FlowSetup, display: Display = SI_DISPLAY) -> str:
    """Return how the flow was measured in one line, as the report tells it; empty where it was simply given."""
    from gradeline.reduction.tabulate.flow import flow_rows  # noqa: PLC0415 (a new survey asks for none of it)
    from gradeline.report.inputs import stated_words  # noqa: PLC0415 (as above)

    said = []
    for _, _, what, text, quantity, value, u in flow_rows(setup):
        words = stated_words(display, {"quantity": quantity, "text": text, "value": value, "value_u": u})
        if what == "method":
            said.append("the flow itself" if text == "direct" else words)
        else:
            said.append(f"{what} {words}")
    return f"Flow: {', '.join(said)}" if said else ""
