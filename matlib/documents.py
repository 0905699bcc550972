"""Tables checked against a document type, every fault at once."""

from __future__ import annotations

import re
from typing import Any, TypeVar

from pydantic import BaseModel, ConfigDict, ValidationError
from pydantic_core import ErrorDetails

from matlib.errors import Fault, FaultyInputError, nearest_hint
from matlib.files import shown

__all__ = ["ContradictionError", "Document", "validated"]

DocumentType = TypeVar("DocumentType", bound="Document")


class ContradictionError(ValueError):
    """What a document type's own validator raises: keys that are well formed each, but cannot stand together.

    Parameters
    ----------
    key : str
        Within the table; empty for the table itself.
    found, expected : str
        As in `Fault`.
    """

    def __init__(self, key: str, found: str, expected: str) -> None:
        super().__init__(expected)
        self.key = key
        self.found = found


class Document(BaseModel):
    """Base of all checked file contents: no unknown keys, no silent conversion, no NaN."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, allow_inf_nan=False, defer_build=True)


_EXPECTED = {
    "float_type": "a number",
    "int_type": "a whole number",
    "int_from_float": "a whole number",
    "string_type": "text in quotes",
    "string_too_short": "text that is not empty",
    "bool_type": "true or false",
    "list_type": "a list",
    "dict_type": "a table",
    "model_type": "a table",
    "model_attributes_type": "a table",
    "finite_number": "a finite number",
}


def _dotted(location: tuple[int | str, ...]) -> str:
    key = ""
    for part in location[:-1] if location[-1:] == ("[key]",) else location:  # a wrong key is itself the last part
        key += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if key else part
    return key or "file"


def _expected(error: ErrorDetails, model: type[BaseModel]) -> tuple[str, str]:
    """What is expected, and a hint."""
    kind, context = error["type"], error.get("ctx", {})
    if kind == "missing":
        return _description(error["loc"], model) or "a value for this key", "add the key"
    if kind == "extra_forbidden":
        known = sorted(_fields(error["loc"][:-1], model))
        hint = nearest_hint(error["loc"][-1], known) or "remove the key"
        return "one of the keys " + ", ".join(known), hint
    if kind == "literal_error":
        return f"one of {context['expected']}", nearest_hint(
            error["input"], re.findall(r"'([^']*)'", context["expected"])
        )
    if kind in ("too_short", "too_long"):
        most = context.get("max_length")
        least = context.get("min_length")
        return (f"at least {least} entries" if kind == "too_short" else f"at most {most} entries"), ""
    if kind in ("greater_than", "greater_than_equal", "less_than", "less_than_equal"):
        sign = {"greater_than": ">", "greater_than_equal": ">=", "less_than": "<", "less_than_equal": "<="}[kind]
        bound = next(value for name, value in context.items() if name in ("gt", "ge", "lt", "le"))
        return f"a number {sign} {bound:g}", ""
    if kind == "value_error":
        return str(context["error"]), ""
    return _EXPECTED.get(kind, error["msg"].lower()), ""


def _model_at(location: tuple[int | str, ...], model: type[BaseModel]) -> type[BaseModel] | None:
    current: type[BaseModel] | None = model
    for part in location:
        if isinstance(part, int):
            continue
        field = current.model_fields.get(part) if current is not None else None
        current = _model_in(field.annotation) if field is not None else None
    return current


def _model_in(annotation: Any) -> type[BaseModel] | None:
    """The first document type inside an annotation such as ``list[X] | None``."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for inner in getattr(annotation, "__args__", ()):
        found = _model_in(inner)
        if found is not None:
            return found
    return None


def _fields(location: tuple[int | str, ...], model: type[BaseModel]) -> list[str]:
    at = _model_at(location, model)
    return [] if at is None else [field.alias or name for name, field in at.model_fields.items()]


def _description(location: tuple[int | str, ...], model: type[BaseModel]) -> str | None:
    at = _model_at(location[:-1], model)
    field = at.model_fields.get(str(location[-1])) if at is not None else None
    return field.description if field is not None else None


def validated(model: type[DocumentType], data: object, prefix: tuple[int | str, ...] = ()) -> DocumentType:
    """Check plain data against a document type.

    Parameters
    ----------
    model : type of Document
    data : object
        Tables as read from a file.
    prefix : tuple, optional
        Where in the file `data` stands.

    Raises
    ------
    FaultyInputError
        With every fault of `data`, keys in full.
    """
    try:
        return model.model_validate(data)
    except ValidationError as error:
        faults = []
        for detail in error.errors(include_url=False):
            expected, hint = _expected(detail, model)
            location = prefix + detail["loc"]
            found = "nothing" if detail["type"] == "missing" else shown(detail["input"])
            contradiction = detail.get("ctx", {}).get("error")
            if isinstance(contradiction, ContradictionError):
                found = contradiction.found
                location = (*location, contradiction.key) if contradiction.key else location
            faults.append(Fault(key=_dotted(location), found=found, expected=expected, hint=hint))
        raise FaultyInputError(faults) from None
