"""The demo workbooks and the templates, found in an installed wheel and in a checkout alike.

In a wheel they stand inside this package, in a checkout (and an editable install) in folders beside it.
"""

from __future__ import annotations

from collections.abc import Iterator
from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path

# In the order in which a newcomer should meet them; each file's name is the template's name.
_TEMPLATES = {
    "blank": "a bare start: one result, a few numbers and a category that may explain it",
    "quote": "quote a new job from past jobs: hours from area, material, coats and access",
    "calibration": "a calibration line: an instrument's readings at known values, with repeats",
    "energy": "energy use against weather and output, week by week, with a bend where heating ends",
    "price": "asking prices from attributes: size, age, condition and place",
    "repeated": "repeated measurements by group: several from each unit, standard errors by unit",
}


def demo_files() -> Iterator[tuple[str, bytes]]:
    """Each demo workbook's file name and content, in alphabetical order."""
    for file in sorted(_workbooks("demo_workbooks"), key=lambda file: file.name):
        yield file.name, file.read_bytes()


def template_names() -> tuple[str, ...]:
    """The templates' names, the plainest first."""
    return tuple(_TEMPLATES)


def template_line(name: str) -> str:
    """One line on what a template is for. Raises KeyError for an unknown name."""
    return _TEMPLATES[name]


def template(name: str) -> bytes:
    """A template's workbook. Raises KeyError for an unknown name."""
    if name not in _TEMPLATES:
        raise KeyError(name)
    return _folder("templates").joinpath(f"{name}.xlsx").read_bytes()


def _workbooks(folder: str) -> Iterator[Traversable]:
    return (file for file in _folder(folder).iterdir() if file.name.endswith(".xlsx"))


def _folder(name: str) -> Traversable:
    inside = files("bridge").joinpath(name)
    return inside if inside.is_dir() else Path(__file__).resolve().parent.parent / name
