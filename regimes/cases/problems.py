"""Problems of a case in words: where, what was got, what is allowed, what may have been meant."""

import difflib
from collections.abc import Iterable
from typing import Any, get_args

from pydantic import BaseModel, ValidationError

_BOUNDS = {
    "greater_than": (">", "gt"),
    "greater_than_equal": (">=", "ge"),
    "less_than": ("<", "lt"),
    "less_than_equal": ("<=", "le"),
}
_WANTED = {
    "float_type": "a number",
    "int_type": "a whole number",
    "int_from_float": "a whole number",
    "string_type": "a text in quotes",
    "string_too_short": "a text of at least one character",
    "tuple_type": "a list",
    "dict_type": "a table of keys",
    "finite_number": "a finite number",
    "model_type": "a table of keys",
    "model_attributes_type": "a table of keys",
}


def show(value: Any) -> str:
    """A value as it would stand in the case file, shortened to 60 characters."""
    if isinstance(value, bool):
        text = str(value).lower()
    elif isinstance(value, str):
        text = f'"{value}"'
    elif isinstance(value, (list, tuple)):
        text = f"[{', '.join(show(item) for item in value)}]"
    elif isinstance(value, dict):
        text = f"{{ {', '.join(f'{key} = {show(item)}' for key, item in value.items())} }}"
    else:
        text = str(value)
    return text if len(text) <= 60 else text[:57] + "..."


def meant(word: Any, known: Iterable[str]) -> str:
    """``; did you mean ...?`` if a known word is close, else nothing."""
    close = difflib.get_close_matches(str(word).lower(), list(known), n=1)
    return f"; did you mean {close[0]}?" if close else ""


def describe(error: ValidationError, model: type[BaseModel]) -> list[str]:
    """One line per problem, in the order of the file's sections."""
    return [f"{_place(item)}: {_words(item, model)}" for item in error.errors(include_url=False)]


def headed(source: str, problems: list[str]) -> str:
    """The problems under a line that counts them."""
    count = "1 problem" if len(problems) == 1 else f"{len(problems)} problems"
    return "\n  ".join([f"{source} has {count}", *problems])


def _place(item: dict[str, Any]) -> str:
    return ".".join(str(part) for part in item["loc"] if isinstance(part, str)) or "case"


def _words(item: dict[str, Any], model: type[BaseModel]) -> str:
    kind, got, context = item["type"], item["input"], item.get("ctx", {})
    if kind == "rule":
        return item["msg"]
    if kind == "missing":
        allowed = _length_of_pair(item, got)
        return allowed or "missing; must be given"
    if kind == "extra_forbidden":
        keys = list(_section(model, item["loc"][:-1]).model_fields)
        return f"unknown key; known: {', '.join(keys)}{meant(item['loc'][-1], keys)}"
    if kind == "literal_error":
        known = context["expected"].replace(" or ", ", ").replace("'", "").split(", ")
        return f"got {show(got)}; known: {', '.join(known)}{meant(got, known)}"
    if kind in _BOUNDS:
        sign, key = _BOUNDS[kind]
        return f"got {show(got)}; must be {sign} {context[key]:g}"
    if kind == "too_long":
        return f"got {show(got)}; must be a list of {context['max_length']}"
    if kind in _WANTED:
        return f"got {show(got)}; must be {_WANTED[kind]}"
    return f"got {show(got)}; {item['msg']}"


def _length_of_pair(item: dict[str, Any], got: Any) -> str | None:
    """A list that is too short is reported as a missing element."""
    if isinstance(item["loc"][-1], int):
        return f"got {show(got)}; must be a list of 2"
    return None


def _section(model: type[BaseModel], place: tuple[int | str, ...]) -> type[BaseModel]:
    """The model at a place inside another."""
    for part in place:
        annotation = model.model_fields[str(part)].annotation
        model = next(kind for kind in (annotation, *get_args(annotation)) if isinstance(kind, type))
    return model
