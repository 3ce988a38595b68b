"""Strict models, and the one place where a validation failure becomes a sentence a site can act on."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from datetime import UTC, datetime
from types import UnionType
from typing import Annotated, Any, TypeVar, Union, get_args, get_origin

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, ValidationError, model_validator
from pydantic.config import JsonDict
from pydantic_core import ErrorDetails, PydanticCustomError

from flows.errors import InputError
from flows.study.names import NAME_RULE, did_you_mean, is_name, path_fault

_SHOWN = 20
_CLOCK = re.compile(r"\d{4}-\d\d-\d\d[Tt ]\d\d:\d\d:\d\d(\.\d+)?([Zz]|[+-]\d\d:\d\d)")
_CLOCK_EXAMPLE = "Write it like 2026-03-04T09:12:00+01:00"


class StrictModel(BaseModel):
    """A frozen model that takes no unknown key, no number in quotes and no NaN."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, allow_inf_nan=False)


class DeclaredModel(StrictModel):
    """A strict model of what a site declares: keys that begin with ``x_`` are the site's own and are passed over."""

    model_config = ConfigDict(json_schema_extra={"patternProperties": {"^x_": {}}})

    @model_validator(mode="before")
    @classmethod
    def _pass_over_own_keys(cls, data: object) -> object:
        if not isinstance(data, dict):
            return data
        return {key: value for key, value in data.items() if not (isinstance(key, str) and key.startswith("x_"))}


def fault(problem: str, remedy: str = "") -> PydanticCustomError:
    """Return an error for use inside a validator that carries its own remedy."""
    return PydanticCustomError("fault", "{problem}", {"problem": problem, "remedy": remedy})


def _checked_name(text: str) -> str:
    if not is_name(text):
        problem = "is not a name that can be used"
        raise fault(problem, f"Use {NAME_RULE}.")
    return text


def _checked_label(text: str) -> str:
    if not text.strip() or text != text.strip() or not text.isprintable() or len(text) > 200:
        problem = "is not a plain label"
        raise fault(problem, "Use 1 to 200 printable characters without blanks at either end.")
    return text


def not_empty(value: object) -> object:
    """Refuse a list or table without an entry; for use as a before-validator, whose verdict no other problem can distort."""
    if isinstance(value, list | tuple | dict) and not value:
        problem = "is empty"
        raise fault(problem, "Add at least one.")
    return value


def _checked_path(text: str) -> str:
    why = path_fault(text)
    if why is not None:
        problem = f"{why}: a file is named by a plain path inside the package"
        raise fault(problem, "Use a relative path with forward slashes, such as rest-1.csv.")
    return text


def instant(value: object) -> datetime:
    """Return an RFC 3339 text as a time in UTC; raises a fault that says how to write it otherwise."""
    if not isinstance(value, str):
        problem = "is not a time"
        raise fault(problem, f"{_CLOCK_EXAMPLE}, in quotes.")
    if not _CLOCK.fullmatch(value):
        naive = _CLOCK.fullmatch(f"{value}Z") is not None
        problem = "is a time without an offset from UTC" if naive else "is not an RFC 3339 time with date, seconds and offset"
        raise fault(problem, f"{_CLOCK_EXAMPLE}; the offset says which moment is meant.")
    try:
        return datetime.fromisoformat(value.upper()).astimezone(UTC)
    except (ValueError, OverflowError):
        problem = "is not a date and time that exists"
        raise fault(problem, f"{_CLOCK_EXAMPLE}.") from None


_DOTS: JsonDict = {"enum": [".", ".."]}

Name = Annotated[str, AfterValidator(_checked_name), Field(json_schema_extra={"pattern": r"^[A-Za-z0-9._-]{1,64}$", "not": _DOTS})]
Label = Annotated[str, AfterValidator(_checked_label), Field(json_schema_extra={"minLength": 1, "maxLength": 200})]
FilePath = Annotated[str, AfterValidator(_checked_path), Field(json_schema_extra={"pattern": r"^[^/\\:][^\\:]*$"})]
Instant = Annotated[datetime, BeforeValidator(instant)]
Positive = Annotated[float, Field(gt=0)]
NotNegative = Annotated[float, Field(ge=0)]

ModelT = TypeVar("ModelT", bound=BaseModel)


def validated(model: type[ModelT], data: object, *, file: str, own_keys: bool = False) -> ModelT:
    """Return ``data`` as ``model``.

    Raises InputError with the first problem as its problem and every further one in its remedy. ``own_keys`` says that keys
    beginning with ``x_`` may be added.
    """
    try:
        return model.model_validate(data)
    except ValidationError as failure:
        problems = [_translated(error, model, file=file, own_keys=own_keys) for error in failure.errors(include_url=False)]
    raise combined(problems)


def combined(problems: Sequence[InputError]) -> InputError:
    """Return one error that leads with the first problem and lists the others in its remedy."""
    first, *others = problems
    if not others:
        return first
    listed = " / ".join(str(other).removeprefix(f"{first.file}: ") for other in others[:_SHOWN])
    count = "1 more problem" if len(others) == 1 else f"{len(others)} more problems"
    remedy = f"{first.remedy} {count} in this file: {listed}".strip()
    return InputError(first.problem, file=first.file, field=first.field, value=first.value, remedy=remedy)


def field_path(location: Sequence[int | str]) -> str:
    """Return a location as people write it: ``runs[0].channels.pressure``."""
    text = ""
    for part in location:
        if part == "[key]":
            continue
        text += f"[{part}]" if isinstance(part, int) else f".{part}" if text else str(part)
    return text


_TYPE_WORDS = {
    "float_type": "must be a number",
    "int_type": "must be a whole number",
    "int_from_float": "must be a whole number",
    "string_type": "must be text",
    "bool_type": "must be true or false",
    "tuple_type": "must be a list",
    "list_type": "must be a list",
    "dict_type": "must be a table of keys and values",
    "model_type": "must be a table of keys and values",
    "model_attributes_type": "must be a table of keys and values",
    "finite_number": "must be a finite number",
}


def _translated(error: ErrorDetails, model: type[BaseModel], *, file: str, own_keys: bool) -> InputError:
    kind, location, value = error["type"], error["loc"], error["input"]
    context: Mapping[str, Any] = error.get("ctx", {})
    known = _TRANSLATIONS.get(kind)
    if kind == "extra_forbidden":
        remedy = did_you_mean(str(location[-1]), _keys_at(model, location[:-1]))
        problem = "is not known here"
        remedy += " A key of your own begins with x_." if own_keys else ""
    elif known is not None:
        problem, remedy = known(value, context)
    elif kind in _TYPE_WORDS:
        problem, remedy = _TYPE_WORDS[kind], _type_remedy(kind, value)
    else:
        problem, remedy = error["msg"][:1].lower() + error["msg"][1:], ""
    return InputError(problem, file=file, field=field_path(location) or None, value=_shown(kind, value), remedy=remedy)


def _missing(_value: object, _context: Mapping[str, Any]) -> tuple[str, str]:
    return "is missing", "Add it."


def _literal(value: object, context: Mapping[str, Any]) -> tuple[str, str]:
    words = re.findall(r"'([^']*)'", str(context["expected"]))
    if not words:
        return f"must be {context['expected']}", ""
    return f"is not one of {', '.join(words)}", did_you_mean(str(value), words)


def _own_fault(_value: object, context: Mapping[str, Any]) -> tuple[str, str]:
    return str(context["problem"]), str(context["remedy"])


def _bound(words: str, key: str) -> Callable[[object, Mapping[str, Any]], tuple[str, str]]:
    def translation(_value: object, context: Mapping[str, Any]) -> tuple[str, str]:
        return f"must be {words} {context[key]:g}", ""

    return translation


_TRANSLATIONS: dict[str, Callable[[object, Mapping[str, Any]], tuple[str, str]]] = {
    "missing": _missing,
    "literal_error": _literal,
    "fault": _own_fault,
    "greater_than": _bound("greater than", "gt"),
    "greater_than_equal": _bound("at least", "ge"),
    "less_than": _bound("less than", "lt"),
    "less_than_equal": _bound("at most", "le"),
}


def _type_remedy(kind: str, value: object) -> str:
    if value is None:
        return "Leave the key out when there is nothing to say."
    if kind in {"float_type", "int_type", "bool_type"} and isinstance(value, str):
        return "Write it without quotes."
    if kind == "string_type" and isinstance(value, int | float):
        return "Put it in quotes."
    return ""


def _shown(kind: str, value: object) -> object:
    """Return what of the input stands in the message: nothing where a key is the trouble, or where a whole table or list is."""
    if kind in {"missing", "extra_forbidden"} or isinstance(value, dict | list | tuple | BaseModel):
        return None
    return "null" if value is None else value


def _keys_at(model: object, location: Sequence[int | str]) -> list[str]:
    """Return the keys the model at ``location`` knows, by following annotations down from ``model``."""
    current: Any = model
    for part in location:
        current = _inside(current, part)
    fields = getattr(current, "model_fields", {})
    return list(fields)


def _inside(annotation: Any, part: int | str) -> Any:  # noqa: ANN401  (annotations have no common type)
    fields = getattr(annotation, "model_fields", None)
    if fields is not None:
        return _without_none(fields[part].annotation) if part in fields else None
    arguments = get_args(annotation)
    if get_origin(annotation) is dict:
        return _without_none(arguments[1])
    return _without_none(arguments[0]) if arguments else None


def _without_none(annotation: Any) -> Any:  # noqa: ANN401
    if get_origin(annotation) in {Union, UnionType}:
        return next((choice for choice in get_args(annotation) if choice is not type(None)), None)
    return annotation
