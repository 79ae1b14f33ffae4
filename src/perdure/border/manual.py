"""The manual of a study folder and its JSON schema, made from the models: ``python -m perdure.border.manual`` writes both."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any, Literal, get_args, get_origin

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from perdure.border.handbook import shipped_families
from perdure.border.readers import READERS
from perdure.border.register import COLUMNS
from perdure.border.shipped import shipped
from perdure.border.store import atomic_path
from perdure.border.study_models import HandbookSection, StudySection
from perdure.border.units import EXAMPLES, INTERNAL, Dimension
from perdure.inference.priors import QUANTITIES
from perdure.study.methods import METHODS


def schema() -> str:
    """The JSON schema of ``study.yaml``, as text."""
    content = {"$schema": "https://json-schema.org/draft/2020-12/schema", **StudySection.model_json_schema(by_alias=True)}
    return json.dumps(content, indent=1, ensure_ascii=False, sort_keys=True) + "\n"


def _models(annotation: Any) -> Iterator[tuple[type[BaseModel], str]]:
    """Models inside an annotation, with what stands before their keys: nothing, a name, or a number in a list."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation, ""
        return
    between = {dict: " > NAME", tuple: " > (each)"}.get(get_origin(annotation), "")
    for argument in get_args(annotation):
        for model, inner in _models(argument):
            yield model, between + inner


def _values(annotation: Any) -> str:
    """Words to choose from, where a key takes only some."""
    if get_origin(annotation) is Literal:
        return ", ".join(f"`{item}`" for item in get_args(annotation))
    words = [_values(argument) for argument in get_args(annotation) if get_origin(argument) is Literal]
    return ", ".join(words)


def _default(field: FieldInfo) -> str:
    if field.is_required():
        return "required"
    value = field.get_default(call_default_factory=True)
    if value is None or value == "" or isinstance(value, BaseModel) or value in ((), {}):
        return ""
    if isinstance(value, bool):
        return str(value).lower()
    return ", ".join(map(str, value)) if isinstance(value, tuple) else str(value)


def _escaped(text: str) -> str:
    return text.replace("|", "\\|")


def _keys(model: type[BaseModel], prefix: str = "") -> Iterator[str]:
    """A table row for every key below ``model``."""
    for name, field in model.model_fields.items():
        path = f"{prefix}{field.alias or name}"
        choice = _values(field.annotation)
        about = field.description or ""
        words = f" One of: {choice}." if "," in choice else ""
        yield f"| `{path}` | {_escaped(_default(field))} | {_escaped(about + words)} |"
        for inner, between in _models(field.annotation):
            yield from _keys(inner, f"{path}{between} > ")


def render() -> str:
    """The manual as Markdown."""
    parts = [
        "# What a study folder holds",
        "",
        "This page is generated from the code that reads the files: `python -m perdure.border.manual`.",
        "",
        "A study is a folder with `study.yaml`, `register.csv` and `records/`, optionally `handbook/` and `histories/`.",
        "Nothing is ever written into it. The name of the folder names the results.",
        "",
        "Numbers carry their unit: `12 %`, `0.5 K`, `1.2e-5 mm/N`.",
        "Inside, everything is MPa, s, K and strain as a ratio, tension positive.",
        "YAML is read strictly: every key once, no anchors, only `true` and `false` are yes and no.",
        "",
        "## Units",
        "",
        "| of | inside | such as |",
        "|---|---|---|",
        *(f"| {dimension.value} | {INTERNAL[dimension]} | {EXAMPLES[dimension]} |" for dimension in Dimension),
        "",
        "## study.yaml",
        "",
        "NAME is a name of your own. `config/study.schema.json` holds the same for editors.",
        "",
        "| key | default | meaning |",
        "|---|---|---|",
        *_keys(StudySection),
        "",
        f"Readers: {'; '.join(f'`{reader.name}`: {reader.about}' for reader in READERS.values())}",
        "",
        "## register.csv",
        "",
        "One row a record; commas, UTF-8. Units stand in the heading in square brackets, as `temperature [degC]`, and are free within",
        "what the column measures. Optional columns may be missing.",
        "",
        "| column | measures | needed | meaning |",
        "|---|---|---|---|",
        *(
            f"| `{column.heading}` | {column.dimension.value if column.dimension else 'text'} |"
            f" {'yes' if column.required else ''} | {_escaped(column.about)} |"
            for column in COLUMNS.values()
        ),
        "",
        "Methods:",
        "",
        *(f"* `{method.name}`: {method.about}" for method in METHODS.values()),
        "",
        "A record that starts at rest counts time and strain from its first complete reading, or from the first one at the preload.",
        "In compression readings may come in either sign; inside they are negative, and `intake.csv` says what was reversed.",
        "",
        "## histories/*.csv",
        "",
        "A service history: commas, UTF-8, the columns `time [UNIT]` and `strain [UNIT]`, from the row `0,0` on; linear between rows.",
        "",
        "## handbook/*.yaml",
        "",
        "Families of your own; one of a shipped family's name replaces it.",
        "",
        "| key | default | meaning |",
        "|---|---|---|",
        *_keys(HandbookSection),
        "",
        "Quantities that a range may speak of:",
        "",
        "| quantity | unit inside | meaning |",
        "|---|---|---|",
        *(f"| `{key}` | {quantity.unit} | {quantity.about} |" for key, quantity in QUANTITIES.items()),
        "",
        "Scatter is the standard deviation of a natural logarithm: 10 % means 0.1. Its range is `low: 0` and an upper end.",
        "",
        "Shipped families:",
        "",
        *(f"* `{family.name}`: {family.about}" for family in shipped_families().values()),
        "",
    ]
    return "\n".join(parts)


def write(folder: Path) -> None:
    """Write ``README.md`` and ``study.schema.json`` into ``folder``."""
    for name, text in (("README.md", render()), ("study.schema.json", schema())):
        with atomic_path(folder / name) as temporary:
            temporary.write_text(text, encoding="utf-8")


if __name__ == "__main__":
    write(shipped("config"))
