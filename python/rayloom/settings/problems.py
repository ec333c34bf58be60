"""What is wrong with a settings file, one line a problem, in the words of its keys.

The main function is :func:`describe_problems`.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterator, Mapping, Sequence
from types import UnionType
from typing import Any, Union, get_args, get_origin

from pydantic import BaseModel, ValidationError

_EXPECTED = {
    "bool_parsing": "true or false",
    "bool_type": "true or false",
    "dict_type": "a table",
    "float_parsing": "a number",
    "float_type": "a number",
    "finite_number": "a finite number",
    "int_from_float": "a whole number",
    "int_parsing": "a whole number",
    "int_type": "a whole number",
    "list_type": "a list in square brackets",
    "model_type": "a table",
    "path_type": "the name of a file in quotes",
    "string_type": "a text in quotes",
    "tuple_type": "a list in square brackets",
}


def describe_problems(
    error: ValidationError, settings: type[BaseModel], text: str = ""
) -> list[str]:
    """Turn a validation error into one line per problem.

    Parameters
    ----------
    error : pydantic.ValidationError
        What the validation found.
    settings : type of pydantic.BaseModel
        The class that was validated, searched for keys of similar names.
    text : str
        The TOML text, from which line numbers are taken.

    Returns
    -------
    list of str
        ``line 12: inversion.damping: got "x", expected a number``; the line
        number is left out where the key does not appear in the text.
    """
    described: dict[str, tuple[int, str]] = {}
    entries = error.errors(include_url=False)
    for entry in entries:
        if entry["type"] == "too_short" and _is_consequence(entry["loc"], entries):
            continue
        keys = _key_path(entry["loc"], settings)
        line = _line_of(keys, text)
        where = (f"line {line}: " if line else "") + ".".join(keys)
        sentence = _sentence(entry, keys, settings)
        known = described.get(where)
        described[where] = (line or 0, _joined(known[1], sentence) if known else sentence)
    ordered = sorted(described.items(), key=lambda item: item[1][0])
    return [f"{where}: {sentence}" for where, (_, sentence) in ordered]


def closest(word: str, known: list[str]) -> str:
    """Return ``; did you mean 'x'?`` for the known word most like this one, or nothing."""
    matches = difflib.get_close_matches(word.lower(), known, n=1, cutoff=0.6)
    return f"; did you mean '{matches[0]}'?" if matches else ""


def _is_consequence(place: tuple[int | str, ...], entries: Sequence[Mapping[str, Any]]) -> bool:
    """Tell whether a list is too short only because its items were refused."""
    depth = len(place)
    return any(len(entry["loc"]) > depth and entry["loc"][:depth] == place for entry in entries)


def _sentence(entry: Mapping[str, Any], keys: list[str], settings: type[BaseModel]) -> str:
    kind, got = entry["type"], _shown(entry["input"])
    context = entry.get("ctx", {})
    if kind == "extra_forbidden":
        return _unknown_key(keys, settings)
    if kind == "missing":
        return "is missing and has no default"
    if kind == "literal_error":
        known = re.findall(r"'([^']*)'", str(context.get("expected", "")))
        return f"got {got}, expected {context['expected']}{closest(str(entry['input']), known)}"
    if kind in ("value_error", "assertion_error"):
        return str(context.get("error", entry["msg"]))
    expected = _EXPECTED.get(kind, _without_lead(entry["msg"]))
    return f"got {got}, expected {expected}"


def _joined(first: str, second: str) -> str:
    """Say once what several branches of a union expected of the same value."""
    lead, _, expected = second.partition(", expected ")
    if not expected or not first.startswith(f"{lead}, expected "):
        return first if second in first else f"{first}; {second}"
    return first if expected in first else f"{first} or {expected}"


def _unknown_key(keys: list[str], settings: type[BaseModel]) -> str:
    owner = _model_at(keys[:-1], settings)
    known = list(owner.model_fields) if owner else []
    guess = closest(keys[-1], known)
    if guess:
        return f"is not a known key{guess}"
    elsewhere = [
        f"[{section}]"
        for section, model in _sections(settings)
        if keys[-1] in model.model_fields and model is not owner
    ]
    if elsewhere:
        return f"is not a known key here; it belongs to {' or '.join(elsewhere)}"
    return f"is not a known key; known here: {', '.join(known)}"


def _without_lead(message: str) -> str:
    message = re.sub(r"^(Input|Value|Decimal input|String) should (be|have)\s+", "", message)
    return message[:1].lower() + message[1:]


def _shown(value: object) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    text = f'"{value}"' if isinstance(value, str) else str(value)
    return text if len(text) <= 60 else f"{text[:57]}…"


def _key_path(location: tuple[int | str, ...], settings: type[BaseModel]) -> list[str]:
    """Keep the parts of pydantic's location that a person finds in the file."""
    keys: list[str] = []
    for part in location:
        owner = _model_at(keys, settings)
        if isinstance(part, int):
            if keys:
                keys[-1] += f"[{part + 1}]"
        elif owner is None and keys and _is_branch(part):
            continue
        else:
            keys.append(part)
    return keys


def _is_branch(part: str) -> bool:
    """Tell whether a location part names a branch of a union, not a key."""
    names = ("float", "int", "str", "bool", "path", "dict", "list", "tuple", "none", "literal")
    return (
        part.split("[")[0].removeprefix("constrained-") in names
        or "[" in part
        or part[:1].isupper()
    )


def _model_at(keys: list[str], settings: type[BaseModel]) -> type[BaseModel] | None:
    model: type[BaseModel] | None = settings
    for key in keys:
        if model is None or key not in model.model_fields:
            return None
        model = next(_models_in(model.model_fields[key].annotation), None)
    return model


def _models_in(annotation: object) -> Iterator[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    elif get_origin(annotation) in (Union, UnionType):
        for branch in get_args(annotation):
            yield from _models_in(branch)


def _sections(settings: type[BaseModel]) -> Iterator[tuple[str, type[BaseModel]]]:
    for name, field in settings.model_fields.items():
        for model in _models_in(field.annotation):
            yield name, model


def _line_of(keys: list[str], text: str) -> int | None:
    """Find the line of a key, or else of its table, in TOML text of ``key = value`` lines."""
    wanted = [key.split("[")[0] for key in keys]
    best, depth = None, 0
    for number, path in _keys_by_line(text):
        if depth < len(path) and path == wanted[: len(path)]:
            best, depth = number, len(path)
    return best


def _keys_by_line(text: str) -> Iterator[tuple[int, list[str]]]:
    table: list[str] = []
    for number, line in enumerate(text.splitlines(), start=1):
        header = re.match(r"\s*\[+\s*([^\]]+?)\s*\]+", line)
        assignment = re.match(r"\s*([^#=\[]+?)\s*=", line)
        if header:
            table = _parts(header.group(1))
            yield number, table
        elif assignment:
            yield number, table + _parts(assignment.group(1))


def _parts(dotted: str) -> list[str]:
    return [part.strip(" \"'") for part in dotted.split(".")]
