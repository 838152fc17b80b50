"""``[logger]`` of ``survey.toml``: which windows are steady enough to be runs."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict

from gradeline.errors import QuantityError
from gradeline.loader.keys import exact_reader, read_text
from gradeline.quantities import parse_uncertainty

__all__ = ["LoggerTable"]


def _read_drift(value: object) -> float:
    text = read_text(value) if isinstance(value, str) else ""
    if not text.endswith("%"):
        raise QuantityError("the drift limit is a part of the flow; write it in percent, such as '0.5 %'")
    size = parse_uncertainty(text, "dimensionless")[0]
    if not 0.0 < size <= 0.2:
        raise QuantityError(
            f"{text!r} is not above 0 % and up to 20 %; a flow that drifts more is not steady"
        )
    return float(size)


def _length(example: str, low: float) -> Any:
    return BeforeValidator(exact_reader("time", example, low, 1e6))


class LoggerTable(BaseModel):
    """``[logger]``: the drift limit of a window that is found, its least length and what is left out after a change."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    drift: Annotated[float, BeforeValidator(_read_drift)] = 0.005
    least_length: Annotated[float, _length("60 s", 1e-3)] = 60.0
    settle: Annotated[float, _length("30 s", 0.0)] = 30.0
