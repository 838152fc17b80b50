"""The value of one key of ``survey.toml``: text, quantities, uncertainties, choices.

Each reader takes what the file holds and returns the value, or raises `QuantityError` with what is wrong, which
pydantic collects.
"""

from __future__ import annotations

import datetime
from collections.abc import Callable
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator

from gradeline.errors import QuantityError
from gradeline.loader.cells import nearest
from gradeline.loader.ledger import CONTROL, PLACEHOLDER
from gradeline.quantities import Measured, parse_quantity, parse_uncertainty
from gradeline.survey import Stated

__all__ = [
    "Bores",
    "Chainage",
    "KelvinUncertainty",
    "LengthUncertainty",
    "RelativeUncertainty",
    "Text",
    "Truth",
    "choice_reader",
    "exact_reader",
    "measured_reader",
    "read_date",
    "read_loss_coefficient",
    "read_reading_uncertainty",
    "read_text",
    "uncertainty_reader",
    "written",
]


def written(value: object) -> str:
    """A value of the wrong type, for a message."""
    if isinstance(value, dict | list):
        return "a table" if isinstance(value, dict) else "a list"
    if isinstance(value, bool):
        return str(value).lower()
    return repr(value) if len(repr(value)) <= 40 else repr(value)[:37] + "..."


def read_text(value: object) -> str:
    """A text in one line, stripped and not empty."""
    if isinstance(value, str):
        if value.strip().startswith(PLACEHOLDER):
            raise QuantityError("the value is still to be filled in")
        if CONTROL.search(value) or len(value.splitlines()) > 1:
            raise QuantityError(
                f"{written(value)} has characters that are not printable; write it in one line"
            )
        if value.strip():
            return value.strip()
        raise QuantityError("the text is empty; fill it in or leave the key out")
    if isinstance(value, dict | list | bool):
        raise QuantityError(f"{written(value)} is not text; write the value in quotes")
    raise QuantityError(f"{written(value)} is not text; put it in quotes")


def _quantity_text(value: object, dimension: str, example: str) -> str:
    """The text of a quantity; a bare number is taken where no unit is needed."""
    if isinstance(value, int | float) and not isinstance(value, bool):
        if dimension == "dimensionless":
            return repr(value)
        raise QuantityError(
            f"{written(value)} has no unit; write it in quotes with its unit, such as {example!r}"
        )
    if not isinstance(value, str):
        raise QuantityError(f"{written(value)} is not a value with a unit; write it as {example!r}")
    return read_text(value)


def measured_reader(
    dimension: str, example: str, low: float | None = None, high: float | None = None, *, strict: bool = False
) -> Callable[[object], Measured]:
    """A reader of values with an optional ±, held between `low` and `high` (SI); strict: `low` itself is refused."""

    def read(value: object) -> Measured:
        text = _quantity_text(value, dimension, example)
        found = parse_quantity(text, dimension)
        if low is not None and (found.value < low or (strict and found.value == low)):
            raise QuantityError(
                f"{text!r} must be {'above' if strict else 'at least'} {low:g}; write it as {example!r}"
            )
        if high is not None and found.value > high:
            raise QuantityError(f"{text!r} is too large; write it as {example!r}")
        return found

    return read


def exact_reader(
    dimension: str, example: str, low: float | None = None, high: float | None = None
) -> Callable[[object], float]:
    """A reader of values that carry no ± of their own."""
    measured = measured_reader(dimension, example, low, high)

    def read(value: object) -> float:
        found = measured(value)
        if found.u is not None:
            raise QuantityError(f"{value!r} takes no ± here; state its uncertainty in [uncertainty]")
        return found.value

    return read


def uncertainty_reader(
    dimension: str, example: str, *, kind: Literal["absolute", "relative", "either"]
) -> Any:
    """A reader of standard uncertainties."""

    def read(value: object) -> Stated:
        if isinstance(value, int | float) and not isinstance(value, bool):
            raise QuantityError(f"{written(value)} has no unit; write it in quotes, such as {example!r}")
        text = _quantity_text(value, dimension, example)
        if kind == "relative" and not text.endswith("%"):
            raise QuantityError(f"{text!r} must be relative; write it in percent, such as {example!r}")
        number, relative = parse_uncertainty(text, dimension)
        if kind == "absolute" and relative:
            raise QuantityError(f"{text!r} must be absolute; write it with a unit, such as {example!r}")
        return Stated(number, relative=relative)

    return read


def choice_reader(*known: str) -> Callable[[object], str]:
    """A reader of one of the `known` texts."""

    def read(value: object) -> str:
        text = read_text(value)
        if text not in known:
            raise QuantityError(f"unknown {text!r}; {nearest(text, known)}")
        return text

    return read


def read_truth(value: object) -> bool:
    if not isinstance(value, bool):
        raise QuantityError(f"{written(value)} is neither true nor false; write one of them without quotes")
    return value


def read_date(value: object) -> str:
    """A date, with or without quotes, as ISO 8601."""
    if isinstance(value, datetime.datetime | datetime.date):
        return value.isoformat()
    try:
        return datetime.date.fromisoformat(read_text(value)).isoformat()
    except ValueError:
        raise QuantityError(f"{written(value)} is not a date; write it as 2026-05-06") from None


def read_loss_coefficient(value: object) -> Measured | None:
    """A loss coefficient, None where it is to be fitted."""
    if isinstance(value, str) and value.strip() == "fit":
        return None
    if isinstance(value, str) and value.strip()[:1].isalpha():
        raise QuantityError(f'{value!r} is neither "fit" nor a number; write one of them')
    return measured_reader("dimensionless", "0.2 +/- 0.05")(value)


def read_reading_uncertainty(value: object) -> tuple[str, float]:
    """A reading's uncertainty as a length or a pressure."""
    text = _quantity_text(value, "length", "0.5 mm")
    if text.endswith("%"):
        raise QuantityError(f"{text!r} must be absolute; write it with a unit, such as '0.5 mm' or '0.1 kPa'")
    try:
        return "length", parse_uncertainty(text, "length")[0]
    except QuantityError as error:
        try:
            return "pressure", parse_uncertainty(text, "pressure")[0]
        except QuantityError:
            raise error from None


Text = Annotated[str, BeforeValidator(read_text)]
Truth = Annotated[bool, BeforeValidator(read_truth)]
Chainage = Annotated[float, BeforeValidator(exact_reader("length", "5.5 m"))]
Length = Annotated[float, BeforeValidator(exact_reader("length", "38 m"))]
Bores = Annotated[float, BeforeValidator(exact_reader("dimensionless", "10", 0.0))]
LengthUncertainty = Annotated[Stated, BeforeValidator(uncertainty_reader("length", "1 mm", kind="absolute"))]
KelvinUncertainty = Annotated[
    Stated, BeforeValidator(uncertainty_reader("temperature", "0.2 K", kind="absolute"))
]
RelativeUncertainty = Annotated[
    Stated, BeforeValidator(uncertainty_reader("dimensionless", "0.3 %", kind="relative"))
]
