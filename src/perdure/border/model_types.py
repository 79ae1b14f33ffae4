"""Types of values in the YAML files: quantities with units, turned into internal units while they are validated."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, WithJsonSchema
from pydantic_core import PydanticCustomError

from perdure.border.units import EXAMPLES, Dimension, parse_quantity, unit_conversion
from perdure.errors import StudyError


def refusal(expected: str, remedy: str, got: str | None = None) -> PydanticCustomError:
    """An error that carries what :class:`perdure.errors.Problem` needs."""
    context: dict[str, Any] = {"expected": expected, "remedy": remedy}
    if got is not None:
        context["got"] = got
    return PydanticCustomError("perdure", "expected {expected}", context)


class Section(BaseModel):
    """A mapping in a YAML file: no unknown keys, underscores written as spaces."""

    model_config = ConfigDict(
        extra="forbid",
        frozen=True,
        alias_generator=lambda name: name.rstrip("_").replace("_", " "),
        allow_inf_nan=False,
    )


def _quantity(dimension: Dimension, *, above_zero: bool = False, not_negative: bool = False) -> BeforeValidator:
    def validate(value: object) -> float:
        if not isinstance(value, str | int | float):
            raise refusal(f"a number with a unit of {dimension.value}", f"Write it with a unit such as {EXAMPLES[dimension]}.")
        try:
            number = parse_quantity(value, dimension)
        except StudyError as error:
            fault = error.problems[0]
            raise refusal(fault.expected, fault.remedy, fault.got) from None
        if above_zero and number <= 0:
            raise refusal(f"a {dimension.value} above zero", "Write a value above zero.")
        if not_negative and number < 0:
            raise refusal(f"a {dimension.value} of zero or more", "Write the magnitude.")
        return number

    return BeforeValidator(validate)


def _schema(dimension: Dimension) -> WithJsonSchema:
    kind: list[str] | str = ["string", "number"] if dimension is Dimension.RATIO else "string"
    return WithJsonSchema({"type": kind, "description": f"{dimension.value} with its unit: {EXAMPLES[dimension]}"})


Time = Annotated[float, _quantity(Dimension.TIME, above_zero=True), _schema(Dimension.TIME)]
Temperature = Annotated[float, _quantity(Dimension.TEMPERATURE, above_zero=True), _schema(Dimension.TEMPERATURE)]
TemperatureDifference = Annotated[
    float, _quantity(Dimension.TEMPERATURE_DIFFERENCE, not_negative=True), _schema(Dimension.TEMPERATURE_DIFFERENCE)
]
Strain = Annotated[float, _quantity(Dimension.RATIO), _schema(Dimension.RATIO)]
RelativeUncertainty = Annotated[float, _quantity(Dimension.RATIO, not_negative=True), _schema(Dimension.RATIO)]
Compliance = Annotated[float, _quantity(Dimension.COMPLIANCE, not_negative=True), _schema(Dimension.COMPLIANCE)]


def _share(value: object) -> object:
    if isinstance(value, str | int | float) and not isinstance(value, bool):
        try:
            number = parse_quantity(value, Dimension.RATIO)
        except StudyError as error:
            fault = error.problems[0]
            raise refusal(fault.expected, fault.remedy, fault.got) from None
        if 0 < number < 1:
            return number
    raise refusal("a share between 0 and 1, both excluded", "Write it as 90 % or 0.9.")


Share = Annotated[float, BeforeValidator(_share), _schema(Dimension.RATIO)]


def _raw(value: object) -> object:
    """A quantity whose dimension depends on a neighbour: kept as text, parsed by the section."""
    if isinstance(value, bool) or not isinstance(value, str | int | float):
        raise refusal("a number with its unit", "Write a number and a unit, as 0.25 MPa.")
    return str(value)


RawQuantity = Annotated[str, BeforeValidator(_raw), WithJsonSchema({"type": ["string", "number"]})]


def _unit_of(dimension: Dimension) -> BeforeValidator:
    def validate(value: object) -> str:
        try:
            unit_conversion(str(value), dimension)
        except StudyError as error:
            fault = error.problems[0]
            raise refusal(fault.expected, fault.remedy, fault.got) from None
        return str(value)

    return BeforeValidator(validate)


StressUnit = Annotated[str, _unit_of(Dimension.STRESS)]
TimeUnit = Annotated[str, _unit_of(Dimension.TIME)]
TemperatureUnit = Annotated[str, _unit_of(Dimension.TEMPERATURE)]
StrainUnit = Annotated[str, _unit_of(Dimension.RATIO)]


def _name(value: object) -> object:
    """A name: text without line breaks or control characters; a bare number in YAML is taken as text."""
    text = str(value).strip() if isinstance(value, str | int | float) and not isinstance(value, bool) else ""
    if not text or not text.isprintable() or len(text) > 200:
        raise refusal("a name of 1 to 200 printable characters", "Write a plain name.")
    return text


Name = Annotated[str, BeforeValidator(_name), WithJsonSchema({"type": "string"})]
