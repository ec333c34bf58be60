"""Settings written as TOML, with a comment on every key.

The main function is :func:`settings_text`.
"""

from __future__ import annotations

import textwrap
from collections.abc import Collection, Mapping
from pathlib import PurePath
from typing import Any, get_args

import tomlkit
from pydantic import BaseModel
from pydantic.fields import FieldInfo
from tomlkit.items import Array, Item, Table

from rayloom.settings.documentation import key_descriptions, summary

_WIDTH = 88


def settings_text(
    settings: BaseModel,
    *,
    heading: str = "",
    comments: bool = True,
    hidden: Mapping[str, Collection[str]] | None = None,
) -> str:
    """Write settings as TOML text.

    Parameters
    ----------
    settings : pydantic.BaseModel
        Its fields are settings classes themselves and become tables.
    heading : str
        Text set as a comment above everything.
    comments : bool
        Whether a comment above each key describes it and names its default.
    hidden : mapping of str to collection of str, optional
        Keys to leave out, by section.

    Returns
    -------
    str
        TOML. A key without a value stands as a comment.
    """
    document = tomlkit.document()
    for line in heading.splitlines():
        document.add(tomlkit.comment(line) if line else tomlkit.nl())
    for name in type(settings).model_fields:
        section: BaseModel = getattr(settings, name)
        document.add(tomlkit.nl())
        without = (hidden or {}).get(name, ())
        document.add(name, _table(section, comments=comments, without=without))
    return tomlkit.dumps(document)


def _table(settings: BaseModel, *, comments: bool, without: Collection[str] = ()) -> Table:
    table = tomlkit.table()
    described = key_descriptions(type(settings)) if comments else {}
    if comments:
        _remark(table, summary(type(settings)))
    told = ""
    groups: list[tuple[str, Any]] = []
    for name, field in type(settings).model_fields.items():
        if name in without:
            continue
        value = getattr(settings, name)
        if isinstance(value, BaseModel) or (_holds_tables(field) and value):
            groups.append((name, value))
            continue
        comment = _comment(described.get(name, ""), field, value)
        if comment != told:
            _remark(table, comment)
            told = comment
        if value is None:
            table.add(tomlkit.comment(f"{name} ="))
        else:
            table.add(name, _item(value))
    for name, value in groups:
        if isinstance(value, BaseModel):
            table.add(name, _table(value, comments=comments))
        else:
            tables = tomlkit.aot()
            for entry in value:
                tables.append(_given(entry))
            table.add(name, tables)
    return table


def _given(settings: BaseModel) -> Table:
    table = tomlkit.table()
    for name, value in settings.model_dump(exclude_none=True).items():
        table.add(name, _item(value))
    return table


def _holds_tables(field: FieldInfo) -> bool:
    """Tell whether a field is a sequence of settings and of nothing else."""
    parts = get_args(field.annotation)
    return bool(parts) and isinstance(parts[0], type) and issubclass(parts[0], BaseModel)


def _comment(description: str, field: FieldInfo, value: object) -> str:
    description = _sentence(description)
    if not description or field.is_required():
        return description
    default = field.get_default(call_default_factory=True)
    if value is None or default is None or default == value or isinstance(default, BaseModel):
        return description
    return f"{description.rstrip('.')} (default: {_item(default).as_string()})."


def _sentence(text: str) -> str:
    return text[:1].upper() + text[1:] + ("" if text.endswith((".", "…")) else ".") if text else ""


def _item(value: Any) -> Item:
    if isinstance(value, PurePath):
        return tomlkit.item(value.as_posix())
    if isinstance(value, BaseModel):
        value = value.model_dump(exclude_none=True)
    if isinstance(value, dict):
        inline = tomlkit.inline_table()
        for key, entry in value.items():
            inline.append(str(key), _item(entry))
        return inline
    if isinstance(value, (list, tuple)):
        return _array([_item(entry) for entry in value])
    item: Item = tomlkit.item(value)
    return item


def _array(items: list[Item]) -> Array:
    """Set out a list on one line, or a long one on several."""
    array = tomlkit.array()
    lines: list[list[Item]] = [[]]
    width = 0
    for item in items:
        width += len(item.as_string()) + 2
        if width > _WIDTH:
            lines.append([])
            width = len(item.as_string()) + 2
        lines[-1].append(item)
    if len(lines) == 1:
        array.extend(items)
        return array
    for line in lines:
        array.add_line(*line)
    array.add_line(indent="")
    return array


def _remark(table: Table, text: str) -> None:
    for line in textwrap.wrap(text, _WIDTH):
        table.add(tomlkit.comment(line))
