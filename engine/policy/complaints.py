"""What is wrong with a policy, in one line: file, key, and what the key may hold."""

from __future__ import annotations

from typing import Any

from pydantic import BaseModel
from pydantic_core import ErrorDetails

# pydantic's kinds of complaint -> what we say; {..} from the complaint's own context
_SAID = {
    "missing": "is missing",
    "float_type": "must be a number",
    "int_type": "must be a whole number",
    "int_from_float": "must be a whole number",
    "string_type": "must be text",
    "bool_type": "must be true or false",
    "tuple_type": "must be a list",
    "dict_type": "must be a table",
    "model_type": "must be a table",
    "finite_number": "must be a finite number",
    "greater_than": "must be above {gt:g}",
    "greater_than_equal": "must be at least {ge:g}",
    "less_than": "must be below {lt:g}",
    "less_than_equal": "must be at most {le:g}",
    "too_short": "must hold at least {min_length}",
    "too_long": "must hold at most {max_length}",
    "literal_error": "must be {expected}",
    "string_pattern_mismatch": "must be written as {pattern}",
}
# The complaint says all there is to say; what was given would only repeat it.
_WITHOUT_INPUT = {"missing", "value_error", "extra_forbidden"}


def complaint(
    errors: list[ErrorDetails], settings: object, model: type[BaseModel]
) -> str:
    """The first problem in full, and how many more there are."""
    more = len(errors) - 1
    return _one(errors[0], settings, model) + (f" (and {more} more)" if more else "")


def _one(error: ErrorDetails, settings: object, model: type[BaseModel]) -> str:
    key, kind = _key(error["loc"], settings), error["type"]
    if kind == "extra_forbidden":
        return f"{key} is not a setting; allowed are {_allowed(error['loc'], model)}"
    if kind == "value_error":
        said = str(error["ctx"]["error"])
    else:
        said = _SAID.get(kind, error["msg"]).format(**error.get("ctx", {}))
    given = "" if kind in _WITHOUT_INPUT else f"; got {error['input']!r}"
    return f"{key} {said}{given}"


def _key(place: tuple[int | str, ...], settings: object) -> str:
    """Dotted key; an entry of a list goes by its id where it has one."""
    parts: list[str] = []
    inside: Any = settings
    for step in place:
        try:
            inside = inside[step]
        except (KeyError, IndexError, TypeError):
            inside = None
        if isinstance(step, str):
            parts.append(step)
        elif isinstance(inside, dict) and isinstance(inside.get("id"), str):
            parts[-1] += f" {inside['id']}"
        else:
            parts[-1] += f" {step + 1}"
    return ".".join(parts) or "the policy"


def _allowed(place: tuple[int | str, ...], model: type[BaseModel]) -> str:
    """Names of the settings beside the unknown one."""
    inside: type[BaseModel] = model
    for step in place[:-1]:
        if isinstance(step, str):
            inside = _model_in(inside.model_fields[step].annotation)
    return ", ".join(inside.model_fields)


def _model_in(annotation: Any) -> type[BaseModel]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    return _model_in(annotation.__args__[0])
