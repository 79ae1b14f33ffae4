"""Validation errors of the models as problems, each with its line in the file."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from typing import Any

from pydantic import BaseModel, ValidationError

from perdure.border.yaml_file import YamlFile
from perdure.errors import Problem, problem


def did_you_mean(word: str, known: tuple[str, ...] | list[str]) -> str:
    """``Did you mean "x"?`` where a known word is close, else the list of known words."""
    close = difflib.get_close_matches(word, known, n=1)
    return f'Did you mean "{close[0]}"?' if close else f"Known are: {', '.join(known)}."


def _path(location: tuple[int | str, ...], content: Mapping[str, object]) -> tuple[str, ...]:
    """The keys that the user wrote; the names of union branches and validators that pydantic adds are left out."""
    path: list[str] = []
    here: object = content
    for part in location:
        if isinstance(part, int) and isinstance(here, list):
            path.append(str(part + 1))
            here = here[part] if part < len(here) else None
        elif isinstance(here, Mapping):
            path.append(str(part))
            here = here.get(str(part))
    return tuple(path)


def _model_at(model: type[BaseModel], path: tuple[int | str, ...]) -> type[BaseModel] | None:
    """The model that governs the mapping at ``path``."""
    here: Any = model
    for part in path:
        if isinstance(here, type) and issubclass(here, BaseModel):
            fields = {field.alias or name: field for name, field in here.model_fields.items()}
            if str(part) not in fields:
                return None
            here = fields[str(part)].annotation
        else:
            arguments = [item for item in getattr(here, "__args__", ()) if item is not type(None) and item is not Ellipsis]
            here = arguments[-1] if arguments else None
        here = _unwrap(here)
    return here if isinstance(here, type) and issubclass(here, BaseModel) else None


def _unwrap(annotation: Any) -> Any:
    """``Model`` out of ``Model | None``; anything else as it is."""
    arguments = [item for item in getattr(annotation, "__args__", ()) if item is not type(None)]
    models = [item for item in arguments if isinstance(item, type) and issubclass(item, BaseModel)]
    has_none = len(arguments) < len(getattr(annotation, "__args__", ()))
    return models[0] if has_none and len(models) == 1 else (arguments[0] if has_none and len(arguments) == 1 else annotation)


def problems_of(error: ValidationError, file: YamlFile, model: type[BaseModel]) -> list[Problem]:
    """Every fault of ``error``, in the words of the file."""
    found: dict[tuple[str, str], Problem] = {}
    for item in error.errors(include_url=False):
        path = _path(item["loc"], file.content)
        entry = _problem(item["type"], item, path, file, model)
        # a union reports one fault a branch: one line each is enough
        found.setdefault((entry.where, item["type"] if item["type"] == "perdure" else ""), entry)
    return list(found.values())


def _problem(kind: str, item: Any, path: tuple[str, ...], file: YamlFile, model: type[BaseModel]) -> Problem:
    where = file.where(path)
    context = item.get("ctx", {})
    if kind == "perdure":
        return problem(where, context.get("got") or _shown(item["input"]), context["expected"], context["remedy"])
    if kind == "missing":
        return problem(where, "nothing", f'the key "{path[-1]}"', f"Add {path[-1]}: … here; config/README.md says what it means.")
    if kind == "extra_forbidden":
        owner = _model_at(model, item["loc"][:-1])
        known = [field.alias or name for name, field in owner.model_fields.items()] if owner is not None else []
        return problem(where, f'the unknown key "{path[-1]}"', "a key that is documented", did_you_mean(path[-1], known))
    message = str(item["msg"]).removeprefix("Input should be ")
    return problem(where, _shown(item["input"]), message, "Write such a value; config/README.md says what the key means.")


def _shown(value: object) -> str:
    if value is None:
        return "nothing"
    if isinstance(value, dict):
        return f"a section with {', '.join(map(str, list(value)[:6]))}" if value else "an empty section"
    if isinstance(value, list | tuple):
        return f"a list of {len(value)}"
    text = str(value).lower() if isinstance(value, bool) else str(value)
    return f'"{text[:80]}"'
