"""Every public function of the computing rooms says what it takes, in which unit, and shows an example.

Held over `gradeline.hydraulics` and `gradeline.fitting`; their examples are run by pytest's doctests.
"""

from __future__ import annotations

import dataclasses
import importlib
import inspect
import pkgutil
import re

import pytest

import gradeline.fitting
import gradeline.hydraulics

ROOMS = (gradeline.hydraulics, gradeline.fitting)

# a unit stands at the beginning, after a comma or a bracket, or after "in": a lone K elsewhere is a coefficient
_SIMPLE = r"m|mm|m²|m³|s|kg|K|°C|rad|Pa|N|J|W|Hz|%"
UNIT = re.compile(
    rf"(?:^|[,;:(] ?|\b[Ii]n )(?:(?:{_SIMPLE}|1)/(?:{_SIMPLE})[²³]?|Pa s|{_SIMPLE})(?![\w(=/²³])"
)
NO_UNIT = re.compile(r"\b(?:dimensionless|units? of|the same units?|SI units?)\b", re.IGNORECASE)
NUMERIC = re.compile(r"\b(?:float|array_like|ndarray|arrays?)\b")
# an integer is a count or an index, which has no unit
NOT_A_NUMBER = re.compile(r"\b(?:int|bool|str|Generator|callable|mapping|tuple of str)\b", re.IGNORECASE)


def _modules():
    for room in ROOMS:
        yield room
        for found in pkgutil.walk_packages(room.__path__, room.__name__ + "."):
            yield importlib.import_module(found.name)


def _public(kind):
    """Pairs of (id, object) of what each module defines and offers, each once."""
    seen = {}
    for module in _modules():
        names = getattr(module, "__all__", [name for name in vars(module) if not name.startswith("_")])
        for name in names:
            thing = getattr(module, name)
            if kind(thing) and thing.__module__ == module.__name__:
                seen[f"{module.__name__}.{name}"] = thing
    return [pytest.param(thing, id=name) for name, thing in seen.items()]


def _sections(thing):
    """Sections of a numpydoc docstring by their heading."""
    lines = inspect.cleandoc(thing.__doc__ or "").split("\n")
    heads = [
        k for k in range(1, len(lines)) if re.fullmatch(r"-{3,}", lines[k].strip()) and lines[k - 1].strip()
    ]
    ends = [*(k - 1 for k in heads[1:]), len(lines)]
    return {lines[k - 1].strip(): lines[k + 1 : end] for k, end in zip(heads, ends, strict=True)}


def _parameters(lines):
    """(name, type, description) of each entry of a Parameters section; ``a, b : float`` is two entries."""
    entries = []
    for line in lines:
        if line and not line[0].isspace():
            names, _, kind = line.partition(" : ")
            entries.append(([name.strip().lstrip("*") for name in names.split(",")], kind.strip(), []))
        elif line.strip() and entries:
            entries[-1][2].append(line.strip())
    return [(name, kind, " ".join(text)) for names, kind, text in entries for name in names]


def _without_unit(parameters):
    """Names of the numeric parameters whose text names no unit, with that text."""
    found = []
    for name, kind, text in parameters:
        if not NUMERIC.search(kind) or NOT_A_NUMBER.search(kind):
            continue
        plain = re.sub(r"\([^()]*,[^()]*\)", "", text)  # a shape such as (m, n) is no unit
        says = bool(UNIT.search(plain) or NO_UNIT.search(plain))
        if not says:
            found.append(f"{name} ({kind}): {text!r}")
    return found


FUNCTIONS = _public(inspect.isfunction)
RECORDS = _public(lambda thing: inspect.isclass(thing) and dataclasses.is_dataclass(thing))


def test_there_is_something_to_hold():
    assert len(FUNCTIONS) >= 25


@pytest.mark.parametrize("function", FUNCTIONS)
def test_parameters_are_those_of_the_signature(function):
    documented = [name for name, _, _ in _parameters(_sections(function).get("Parameters", []))]
    taken = list(inspect.signature(function).parameters)
    assert documented == taken, f"{function.__qualname__}: the docstring lists {documented}, the call {taken}"


@pytest.mark.parametrize("function", FUNCTIONS)
def test_every_number_has_a_unit(function):
    missing = _without_unit(_parameters(_sections(function).get("Parameters", [])))
    assert not missing, f"{function.__qualname__}: say the unit, or 'dimensionless', of " + "; ".join(missing)


@pytest.mark.parametrize("function", FUNCTIONS)
def test_what_comes_back_is_told_and_shown(function):
    sections = _sections(function)
    assert "Returns" in sections, f"{function.__qualname__}: a Returns section is missing"
    example = "\n".join(sections.get("Examples", []))
    assert ">>> " in example, f"{function.__qualname__}: an Examples section with a line that runs is missing"
    assert function.__name__ in example, f"{function.__qualname__}: its example does not call it"


@pytest.mark.parametrize("record", RECORDS)
def test_fields_of_a_record_are_documented_with_units(record):
    sections = _sections(record)
    parameters = _parameters(sections.get("Parameters", sections.get("Attributes", [])))
    documented, fields = (
        [name for name, _, _ in parameters],
        [f.name for f in dataclasses.fields(record) if f.init],
    )
    assert documented == fields, (
        f"{record.__name__}: the docstring lists {documented}, the fields are {fields}"
    )
    missing = _without_unit(parameters)
    assert not missing, f"{record.__name__}: say the unit, or 'dimensionless', of " + "; ".join(missing)


@pytest.mark.parametrize(
    ("kind", "text", "faulty"),
    [
        ("float", "Bore, m.", False),
        ("array_like, shape (m,)", "Bore of the run's reach.", True),
        ("float", "Dimensionless, from 0 to 1.", False),
        ("float", "Local gravity, m/s².", False),
        ("float", "Slope Σ_m of (m, n).", True),
        ("float", "The fitted K of a valve.", True),
        ("float", "Fluid's dynamic viscosity, Pa s.", False),
        ("int", "Number of draws.", False),
        ("float", "Number of draws.", True),
        ("(R,) int array", "Pattern of each run.", False),
        ("str", "Name.", False),
        ("ndarray of bool, shape (n,)", "What was read.", False),
    ],
)
def test_the_check_for_units_itself(kind, text, faulty):
    assert bool(_without_unit([("x", kind, text)])) is faulty


def test_the_reading_of_sections_itself():
    def sample():
        """Say.

        Parameters
        ----------
        a, b : float
            Bores, m.
        *rest : int
            Index
            of it.

        Returns
        -------
        float
        """

    sections = _sections(sample)
    assert list(sections) == ["Parameters", "Returns"]
    assert _parameters(sections["Parameters"]) == [
        ("a", "float", "Bores, m."),
        ("b", "float", "Bores, m."),
        ("rest", "int", "Index of it."),
    ]
