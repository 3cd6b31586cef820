"""The reference of documents and columns, written from the models and the registry themselves.

``python -m reports.reference`` rewrites ``documents.md`` and ``columns.md`` beside the page of conventions.
"""

from __future__ import annotations

import types
import typing
from collections.abc import Iterator
from datetime import date
from pathlib import Path
from typing import Any

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from assumptions.basis import BasisDocument
from assumptions.shock_sets import ShockSet
from assumptions.shocks import Shock
from portfolios.columns import COLUMNS, Column
from portfolios.designs import Design
from projection.premium_document import PremiumDocument
from projection.run_document import RunDocument

from .output_columns import OUTPUT_TABLES

FOLDER = Path(__file__).with_name("reference")
MODELS: tuple[tuple[str, type[BaseModel]], ...] = (
    ("Run document", RunDocument),
    ("Basis", BasisDocument),
    ("Product design", Design),
    ("Premium document", PremiumDocument),
    ("Shock", Shock),
    ("Set of shocks", ShockSet),
)
"""Every document, by its name."""

_PLAIN = {str: "text", int: "whole number", float: "number", bool: "true or false", date: "date"}
_WRITTEN = "Written by `python -m reports.reference` from the program's own definitions; do not edit."


def documents_page() -> str:
    """Return the reference of every key of every document."""
    parts = ["# Documents, key by key", _WRITTEN]
    parts.append(
        "Every document is TOML. An unknown key is an error. A key without a default must be given. Paths "
        "are relative to the folder of the document that they stand in."
    )
    for title, model in MODELS:
        parts += [f"## {title}", *_sections(model, set())]
    return "\n\n".join(parts) + "\n"


def columns_page() -> str:
    """Return the reference of the extract's columns and of the tables of a run folder."""
    head = "| column | holds | unit | range | meaning |\n|---|---|---|---|---|\n"
    rows = "\n".join(
        f"| `{column.name}` | {column.kind} | {column.unit} | {_range(column)} | {column.meaning}"
        f"{' (always needed)' if column.always else ''} |"
        for column in COLUMNS
    )
    parts = ["# Columns", _WRITTEN, "## The extract", _EXTRACT, head + rows, "## The run folder", _FOLDER]
    for name, columns in OUTPUT_TABLES.items():
        body = "\n".join(f"| {_code(column)} | {unit} | {meaning} |" for column, unit, meaning in columns)
        parts += [f"### {name}", "| column | unit | meaning |\n|---|---|---|\n" + body]
    return "\n\n".join(parts) + "\n"


_EXTRACT = (
    "A column is needed only where something in the run looks at it: a design, a rule or a grouping. Other "
    "columns are allowed and may serve in rules and as groups."
)
_FOLDER = (
    "Amounts are in currency, rounded to the minor unit, as doubles. `run.json` holds the record with totals "
    "as exact decimals; `report.html` and `report.xlsx` show the same to people."
)


def _sections(model: type[BaseModel], seen: set[type[BaseModel]]) -> Iterator[str]:
    """Yield the table of a model's keys, then those of the models inside it, each model once."""
    seen.add(model)
    fields = model.model_fields.items()
    rows = [_row(field.alias or name, field) for name, field in fields]
    yield "| key | value | default | meaning |\n|---|---|---|---|\n" + "\n".join(rows)
    for name, field in fields:
        for inner in _models(field.annotation):
            if inner not in seen:
                where = f"[[{field.alias or name}]]" if _is_list(field.annotation) else f"{field.alias or name}"
                yield f"### {_name(inner)}: `{where}` of {_name(model).lower()}"
                said = (inner.__doc__ or "").strip().split("\n\n")[0]
                yield " ".join(said.split())
                yield from _sections(inner, seen)


def _row(key: str, field: FieldInfo) -> str:
    value = _type(field.annotation) + _limits(field)
    return f"| `{key}` | {value} | {_default(field)} | {field.description} |"


def _name(model: type[BaseModel]) -> str:
    words = "".join(f" {letter.lower()}" if letter.isupper() else letter for letter in model.__name__)
    return words.strip().removesuffix(" document").capitalize()


def _type(annotation: Any) -> str:
    if annotation in _PLAIN:
        return _PLAIN[annotation]
    origin, inner = typing.get_origin(annotation), typing.get_args(annotation)
    if origin is typing.Literal:
        return ", ".join(f"`{value}`" for value in inner)
    if origin in (typing.Union, types.UnionType):
        return " or ".join(_choices(inner))
    if origin is list:
        return f"list of {_type(inner[0])}"
    if origin is dict:
        return f"table of {_type(inner[0])} to {_type(inner[1])}"
    if origin is typing.Annotated:
        return _type(inner[0])
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return _name(annotation).lower()
    return str(getattr(annotation, "__name__", annotation))


def _choices(members: tuple[Any, ...]) -> list[str]:
    """Return the kinds of a union in words, without those that another one covers."""
    kinds = list(dict.fromkeys(_type(part) for part in members if part is not type(None)))
    if set(_PLAIN.values()) <= set(kinds):
        kinds = [*(kind for kind in kinds if kind not in _PLAIN.values()), "value"]
    if "number" in kinds and "whole number" in kinds:
        kinds.remove("whole number")
    return kinds


def _limits(field: FieldInfo) -> str:
    """Return the range of a number in words, from the limits that the model sets."""
    words = {"ge": "at least", "gt": "above", "le": "at most", "lt": "below"}
    said = [
        f"{word} {getattr(limit, name):g}"
        for limit in field.metadata
        for name, word in words.items()
        if getattr(limit, name, None) is not None
    ]
    return f", {' and '.join(said)}" if said else ""


def _default(field: FieldInfo) -> str:
    if field.is_required():
        return "*must be given*"
    value = field.get_default(call_default_factory=True, validated_data={})
    if value is None or value in ("", [], {}):
        return ""
    if isinstance(value, BaseModel):
        return "its defaults"
    return f"`{_toml(value)}`"


def _toml(value: Any) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, list):
        return "[" + ", ".join(_toml(item) for item in value) + "]"
    return f'"{value}"' if isinstance(value, str) else f"{value}"


def _models(annotation: Any) -> Iterator[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    for part in typing.get_args(annotation):
        yield from _models(part)


def _is_list(annotation: Any) -> bool:
    members = (annotation, *typing.get_args(annotation)) if typing.get_origin(annotation) is not dict else ()
    return any(typing.get_origin(member) is list for member in members)


def _range(column: Column) -> str:
    if column.low is None or column.high is None:
        return ""
    return f"{column.low:,g} to {column.high:,.15g}"


def _code(name: str) -> str:
    return name if name.startswith("*") else f"`{name}`"


def write_reference(folder: Path = FOLDER) -> None:
    """Rewrite both pages."""
    (folder / "documents.md").write_text(documents_page(), encoding="utf-8")
    (folder / "columns.md").write_text(columns_page(), encoding="utf-8")


if __name__ == "__main__":
    write_reference()
