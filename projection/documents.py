"""Reading documents: TOML in, checked models out, and errors that say file, key, value and remedy."""

from __future__ import annotations

import difflib
import tomllib
from collections.abc import Callable, Iterable
from datetime import date
from pathlib import Path
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError

import assumptions
from assumptions.basis import Basis, BasisDocument, prepare_basis
from assumptions.shock_sets import ShockSet
from assumptions.shocking import WrongBasisError, need_same_basis, shocked
from assumptions.shocks import Shock
from assumptions.tables import TableError
from portfolios.designs import Design

from .run_document import RunDocument

Model = TypeVar("Model", bound=BaseModel)


class DocumentError(ValueError):
    """A document or table that stops the run: names the file, the place, the value and the remedy.

    side: name of the further basis that is at odds with the rest, nothing for the run's own.
    """

    side = ""


def read_run(path: Path | str) -> RunDocument:
    """Read a run document. Raises DocumentError."""
    return read_document(path, RunDocument)


def read_basis(path: Path | str) -> Basis:
    """Read a basis and the tables that it names, relative to its folder. Raises DocumentError."""
    path = Path(path)
    document = read_document(path, BasisDocument)
    try:
        return prepare_basis(document, path.parent)
    except (TableError, ValueError, OSError) as error:
        raise DocumentError(f"{path}: {error}") from error


def read_designs(path: Path | str) -> list[Design]:
    """Read one design, or every ``*.toml`` of a folder in order of name. Raises DocumentError."""
    path = Path(path)
    files = sorted(path.glob("*.toml")) if path.is_dir() else [path]
    if not files:
        raise DocumentError(f"{path}: the folder holds no design (*.toml)")
    designs: dict[str, Design] = {}
    for file in files:
        design = read_document(file, Design)
        if design.code in designs:
            raise DocumentError(f"{file}: key 'code': '{design.code}' is already the code of another design in {path}")
        designs[design.code] = design
    return list(designs.values())


NAMED_SETS = Path(assumptions.__file__).with_name("named_sets")
"""Sets of shocks that come with the program, as dated documents."""


def read_shock(path: Path | str, basis: Basis | None = None) -> Shock:
    """Read a shock; with a basis, check that it is the one that the shock is made for. Raises DocumentError."""
    shock = read_document(path, Shock)
    if basis is not None:
        _need(path, lambda: need_same_basis(shock.basis, basis, shock.name_in_words))
    return shock


def read_shocks(path: Path | str, basis: Basis | None = None) -> ShockSet:
    """Read a set of shocks, by its path or by the name of one that comes with the program ('eu-life-2015').

    With a basis, check that it is the one that the set is made for. Raises DocumentError.
    """
    named = NAMED_SETS / f"{path}.toml"
    if Path(path).name == str(path) and named.is_file() and not Path(path).is_file():
        path = named
    try:
        shocks = read_document(path, ShockSet)
    except DocumentError as error:
        if Path(path).is_file():
            raise
        raise DocumentError(f"{error}; the named sets are {', '.join(named_sets())}") from None
    if basis is not None:
        _need(path, lambda: shocks.need(basis))
    return shocks


def named_sets() -> list[str]:
    """Names of the sets of shocks that come with the program."""
    return sorted(file.stem for file in NAMED_SETS.glob("*.toml"))


def shocked_basis(basis: Basis, shock: Shock, valuation_date: date, name: Path | str = "shock") -> Basis:
    """Return the basis after a shock. Raises DocumentError, with the name of the document, where it does not fit."""
    try:
        return shocked(basis, shock, valuation_date)
    except ValueError as error:
        raise DocumentError(f"{name}: {error}") from error


def _need(path: Path | str, check: Callable[[], None]) -> None:
    try:
        check()
    except WrongBasisError as error:
        raise DocumentError(f"{path}: key 'basis': {error}") from error


def read_document(path: Path | str, model: type[Model]) -> Model:
    """Read one TOML document as a model. Raises DocumentError."""
    path = Path(path)
    try:
        with path.open("rb") as file:
            # Some editors put a mark of the byte order in front.
            content = tomllib.loads(file.read().decode("utf-8-sig"))
    except FileNotFoundError:
        raise DocumentError(f"{path}: there is no such file") from None
    except OSError as error:
        raise DocumentError(f"{path}: cannot be read: {error.strerror}") from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise DocumentError(f"{path}: not valid TOML: {error}") from error
    return check_document(content, model, str(path))


def check_document(content: dict[str, Any], model: type[Model], name: str) -> Model:
    """Return the content as a model. Raises DocumentError with every fault, one a line."""
    try:
        return model.model_validate(content)
    except ValidationError as error:
        raise DocumentError("\n".join(f"{name}: {fault}" for fault in _sentences(error, model, content))) from None


def _sentences(error: ValidationError, model: type[BaseModel], content: dict[str, Any]) -> list[str]:
    """Say every fault; what may be one of several kinds has a fault for each, which become one sentence."""
    said: dict[str, list[str]] = {}
    for fault in error.errors():
        start, remedy = _sentence(fault, model, content)
        said.setdefault(start, []).append(remedy)
    return [start + " or ".join(dict.fromkeys(remedies)) for start, remedies in said.items()]


def _sentence(fault: Any, model: type[BaseModel], content: dict[str, Any]) -> tuple[str, str]:
    """Return place and value of a fault, and its remedy."""
    keys = [part for part in fault["loc"] if _is_place(part)]
    place = _place(keys, content)
    kind = fault["type"]
    if kind == "extra_forbidden":
        known = sorted(_keys_beside(keys, model, content))
        near = difflib.get_close_matches(str(keys[-1]), known, n=1)
        return f"{place} is not known; ", f"did you mean '{near[0]}'?" if near else f"known here: {', '.join(known)}"
    if kind == "missing":
        return f"{place} is missing", ""
    message = fault["msg"].removeprefix("Value error, ").removeprefix("Input should be ")
    if kind == "value_error":
        return f"{place}: " if keys else "", message
    return f"{place} is {_short(fault.get('input'))}; it should be ", _WORDS.get(kind, message)


_DATE = "a date, written like 2026-11-30 and without quotes"
_WORDS = {
    **dict.fromkeys(("int_type", "int_parsing", "int_from_float"), "a whole number"),
    **dict.fromkeys(("float_type", "float_parsing"), "a number"),
    **dict.fromkeys(("date_type", "date_parsing", "date_from_datetime_parsing", "date_from_datetime_inexact"), _DATE),
    **dict.fromkeys(("model_type", "model_attributes_type", "dict_type"), "a table of keys and values"),
    "bool_type": "true or false",
    "string_type": "text in quotes",
    "list_type": "a list in square brackets",
    "too_short": "a list of at least one item",
    "string_too_short": "text of at least one letter",
    "finite_number": "a finite number",
}
"""What a value should be, by the kind of fault, where the checker's own words are for programmers."""

_MEMBERS = {"str", "float", "int", "bool", "date", "AtAge", "Law", "TableFile", "ClaimDelay", "Band", "ScaleFile"}
_MEMBERS |= {"Inflation"}


def _is_place(part: Any) -> bool:
    # The names of union members in a location mean nothing to the author of a document.
    return isinstance(part, int) or (part.isidentifier() and part not in _MEMBERS)


def _short(value: Any) -> str:
    if isinstance(value, dict):
        return "a table of keys and values"
    if isinstance(value, list):
        return "a list" if value else "an empty list"
    if isinstance(value, bool):
        return str(value).lower()
    text = repr(value) if isinstance(value, str) else str(value)
    return text if len(text) <= 60 else text[:57] + "..."


def _place(keys: Iterable[Any], content: Any) -> str:
    words: list[str] = []
    for key in keys:
        if isinstance(key, int):
            content = content[key] if isinstance(content, list) and key < len(content) else None
            name = content.get("name") if isinstance(content, dict) else None
            words[-1:] = [f"{words[-1] if words else 'item'} {key + 1}" + (f" ('{name}')" if name else "")]
        else:
            content = content.get(key) if isinstance(content, dict) else None
            words.append(str(key))
    if not words:
        return "the document"
    *outer, last = words
    where = f"{', '.join(outer)}: " if outer else ""
    return f"{where}key '{last}'" if " " not in last else f"{where}{last}"


def _keys_beside(keys: list[Any], model: type[BaseModel], content: Any) -> list[str]:
    """Keys that are known where the last of these stands."""
    current: Any = model
    for key in keys[:-1]:
        content = _inside(content, key)
        if isinstance(key, int):
            continue
        field = next((field for name, field in current.model_fields.items() if key in (name, field.alias)), None)
        models = _models_in(field.annotation) if field is not None else []
        if not models:
            break
        # Where a table may be one of several kinds, the one that knows most of its keys is meant.
        written = content if isinstance(content, dict) else {}
        current = max(models, key=lambda kind: len(set(_keys_of(kind)).intersection(written)))
    return _keys_of(current)


def _inside(content: Any, key: Any) -> Any:
    try:
        return content[key]
    except (KeyError, IndexError, TypeError):
        return None


def _keys_of(model: type[BaseModel]) -> list[str]:
    return [field.alias or name for name, field in model.model_fields.items()]


def _models_in(annotation: Any) -> list[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return [annotation]
    return [found for argument in getattr(annotation, "__args__", ()) for found in _models_in(argument)]
