"""What a settings class says about its keys, taken from its docstring.

The main function is :func:`key_descriptions`.
"""

from __future__ import annotations

import inspect
import re

from pydantic import BaseModel

_HEADINGS = ("Attributes", "Parameters")


def key_descriptions(settings: type[BaseModel]) -> dict[str, str]:
    """Return the description of each key.

    Parameters
    ----------
    settings : type of pydantic.BaseModel
        A class whose keys are described in an *Attributes* or *Parameters* section
        of its numpydoc docstring, or by ``Field(description=…)``, which wins.

    Returns
    -------
    dict of str
        One sentence or more per key, without line ends or markup.
    """
    found: dict[str, str] = {}
    for kind in reversed(settings.__mro__):
        if issubclass(kind, BaseModel) and kind is not BaseModel:
            found.update(_from_docstring(kind.__doc__ or ""))
    for name, field in settings.model_fields.items():
        if field.description:
            found[name] = _plain(field.description)
    return {name: found[name] for name in settings.model_fields if name in found}


def summary(settings: type[BaseModel]) -> str:
    """Return the first paragraph of a class's docstring on one line."""
    return _plain(inspect.cleandoc(settings.__doc__ or "").split("\n\n")[0])


def _from_docstring(docstring: str) -> dict[str, str]:
    found: dict[str, str] = {}
    names: list[str] = []
    inside = False
    lines = inspect.cleandoc(docstring).splitlines()
    for line, following in zip(lines, [*lines[1:], ""], strict=True):
        if following.startswith("---"):
            inside = line.strip() in _HEADINGS
            names = []
        elif inside and line and not line[0].isspace() and not line.startswith("---"):
            names = [name.strip() for name in line.split(" : ")[0].split(",")]
        elif inside and line.strip():
            for name in names:
                found[name] = f"{found.get(name, '')} {line.strip()}".strip()
    return {name: _plain(text) for name, text in found.items()}


def _plain(text: str) -> str:
    text = re.sub(r":\w+:`~?\.?([^`]+)`", r"\1", text)
    return " ".join(text.replace("``", "").replace("`", "").split())
