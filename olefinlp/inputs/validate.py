"""Validate a document against its model, and say what is wrong in a planner's words."""

from __future__ import annotations

import copy
import difflib
import types
import typing
from dataclasses import replace
from typing import Annotated, Any, TypeVar, get_args, get_origin

from pydantic import BaseModel, ValidationError

from olefinlp.inputs.findings import Findings, near_name, path_text
from olefinlp.inputs.yaml_files import Document, Path_

M = TypeVar("M", bound=BaseModel)
MOST_NAMES = 3
"""How often misspelt names are put right: names inside a misspelt block show only after it."""


def validate(document: Document, model: type[M], findings: Findings) -> M | None:
    """The document as a frozen object; None with a finding for each thing wrong.

    Where all that is wrong are misspelt names, the object is made as if they were spelt right (the
    findings are there all the same), so that what else is wrong is found in the same run.
    """
    try:
        return model.model_validate(document.data)
    except ValidationError as error:
        seen: dict[Path_, list[tuple[str, str]]] = {}
        for item in error.errors(include_url=False, include_input=True):
            if item["type"] == "too_short" and item["input"]:
                continue  # entries are there, but wrong: each has its own finding
            path = _written_path(document, item["loc"])
            if item["type"] in ("missing", "extra_forbidden"):
                path = (*_written_path(document, item["loc"][:-1]), item["loc"][-1])
            found = _message(dict(item), path, model)
            if found not in seen.setdefault(path, []):
                seen[path].append(found)
        for path, messages in seen.items():
            text = " or ".join(message for message, _ in messages)
            hint = next((hint for _, hint in messages if hint), "")
            findings.error(document.place(path), path_text(path), text, hint)
        return _as_if_spelt_right(document, model)


def _as_if_spelt_right(document: Document, model: type[M]) -> M | None:
    """The object with each unknown name read as the nearest known one; None when more is wrong."""
    data = copy.deepcopy(document.data)
    for _ in range(MOST_NAMES):
        try:
            return model.model_validate(data)
        except ValidationError as error:
            unknown = [i["loc"] for i in error.errors(include_url=False) if i["type"] == "extra_forbidden"]
        changed = [_rename(data, _written_path(replace(document, data=data), loc), model) for loc in unknown]
        if not any(changed):
            return None
    return None


def _rename(data: Any, path: Path_, model: type[BaseModel]) -> bool:
    """Give an unknown name the nearest known one that is free; whether there was one."""
    if not path:
        return False
    here = data
    for part in path[:-1]:
        here = here[part]
    known = [name for name in _field_names(_model_at(model, path[:-1])) if name not in here]
    near = difflib.get_close_matches(str(path[-1]), known, n=1, cutoff=0.6)
    if near:
        here[near[0]] = here.pop(path[-1])
    return bool(near)


def _written_path(document: Document, loc: tuple[str | int, ...]) -> Path_:
    """The part of pydantic's location that is written in the file (union branches left out)."""
    path: Path_ = ()
    here: Any = document.data
    for part in loc:
        inside = part in here if isinstance(here, dict) else isinstance(here, list) and part in range(len(here))
        if inside:
            path, here = (*path, part), here[part]
    return path


def _message(item: dict[str, Any], path: Path_, root: type[BaseModel]) -> tuple[str, str]:
    kind, context = item["type"], item.get("ctx", {})
    if kind == "written":
        return context["message"], context["hint"]
    if kind == "extra_forbidden":
        name, takes = str(path[-1]), _field_names(_model_at(root, path[:-1]))
        hint = near_name(name, takes)
        hint = hint if hint.startswith("did") else ""
        return f"unknown name `{name}`; here it takes: {', '.join(takes)}", hint
    if kind == "missing":
        return f"`{path[-1]}` is missing", ""
    if kind == "literal_error":
        expected = str(context.get("expected", "")).replace("'", "`").replace("`unlimited`", "unlimited")
        given = str(item.get("input", ""))
        options = [word.strip("` ") for word in expected.replace(" or ", ",").split(",")]
        return f"`{given}` is not one of: {', '.join(options)}", near_name(given, options)
    if kind in ("dict_type", "model_type", "model_attributes_type"):
        return "`name: value` lines are needed here", ""
    if kind in ("tuple_type", "list_type"):
        return "a list is needed here, one `- …` a line", ""
    if kind in ("too_short", "string_too_short"):
        return "is empty", ""
    if kind in ("int_type", "int_parsing", "int_from_float"):
        return f"`{item.get('input')}` is not a whole number", ""
    if kind in ("float_type", "float_parsing"):
        return f"`{item.get('input')}` is not a number", "write a number without a unit"
    if kind in _BOUNDS:
        words, bound = _BOUNDS[kind]
        return f"`{item.get('input')}` must be {words} {context[bound]:g}", ""
    if kind == "string_type":
        return "a text is needed here", ""
    if kind == "string_pattern_mismatch":
        return f"`{item.get('input')}` is not an ISO currency code", "three capital letters, for example USD"
    return str(item["msg"])[:1].lower() + str(item["msg"])[1:], ""


_BOUNDS = {
    "greater_than": ("above", "gt"),
    "greater_than_equal": ("at least", "ge"),
    "less_than": ("below", "lt"),
    "less_than_equal": ("at most", "le"),
}


def _field_names(model: type[BaseModel] | None) -> list[str]:
    if model is None:
        return []
    return [field.alias or name for name, field in model.model_fields.items()]


def _model_at(root: type[BaseModel], path: Path_) -> type[BaseModel] | None:
    """The model that a path of the document is validated against."""
    here: Any = root
    for part in path:
        model = _as_model(here)
        if model is not None:
            fields = {field.alias or name: field for name, field in model.model_fields.items()}
            if part not in fields:
                return None
            here = fields[str(part)].annotation
        else:
            here = _inside(here)
    return _as_model(here)


def _as_model(kind: Any) -> type[BaseModel] | None:
    for option in _options(kind):
        if isinstance(option, type) and issubclass(option, BaseModel):
            return option
    return None


def _inside(kind: Any) -> Any:
    """What a mapping or list holds."""
    for option in _options(kind):
        arguments = get_args(option)
        if get_origin(option) is dict:
            return arguments[1]
        if get_origin(option) in (tuple, list):
            return arguments[0]
    return None


def _options(kind: Any) -> list[Any]:
    if get_origin(kind) is Annotated:
        return _options(get_args(kind)[0])
    if get_origin(kind) in (typing.Union, types.UnionType):
        return [option for argument in get_args(kind) for option in _options(argument)]
    return [kind]
