"""Templates of the page; every value that is put into them is escaped unless it is markup already."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from perdure.report import palette


@cache
def _environment() -> Environment:
    environment = Environment(
        loader=PackageLoader("perdure.report", "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.globals["marks"] = dict(palette.MARKS)
    environment.globals["tones"] = {name: name.replace(" ", "-") for name in palette.TONES}
    environment.globals["palette"] = palette
    return environment


def fill(template: str, values: Mapping[str, Any]) -> Markup:
    """Fill a template of ``perdure/report/templates``.

    Args:
        template: file name.
        values: names that the template uses; one that is missing is an error.
    """
    return Markup(_environment().get_template(template).render(values))  # noqa: S704 - the environment escapes
