"""The keys of ``study.yaml``. Descriptions are the manual: ``config/README.md`` is made from them."""

from __future__ import annotations

from typing import Literal, Self

from pydantic import Field, model_validator

from perdure.border.model_types import (
    Compliance,
    Name,
    RawQuantity,
    RelativeUncertainty,
    Section,
    Share,
    Strain,
    StrainUnit,
    StressUnit,
    Temperature,
    TemperatureDifference,
    TemperatureUnit,
    Time,
    TimeUnit,
    refusal,
)


class MaterialSection(Section):
    """What the specimens are made of."""

    family: Name = Field(description="Family of the handbook that gives the prior ranges: one that ships, or your own in handbook/.")


class LawSection(Section):
    """The rheological law and how its relaxation times are laid."""

    name: Name = Field("maxwell", description="Key of the law; maxwell is the generalised Maxwell law (Prony series).")
    equilibrium: bool = Field(default=True, description="true: some stress stays for ever; false: everything relaxes in the end.")
    relaxation_times: Literal["grid"] | int = Field(
        "grid",
        description="grid: fixed times on a log grid over tests and horizon; a whole number from 1 to 8: so many free ordered times.",
    )
    terms_per_decade: float = Field(1.5, ge=0.5, le=4, description="Density of the grid: terms a decade of time, 0.5 to 4.")

    @model_validator(mode="after")
    def _few_free_times(self) -> Self:
        times = self.relaxation_times
        if isinstance(times, int) and not 1 <= times <= 8:
            raise refusal('"grid" or a whole number from 1 to 8', "Write relaxation times: grid, or a small number.", f"{times} free times")
        return self


class ClockSection(Section):
    """Reduced time of the mechanisms."""

    name: Name = Field("isothermal", description="Key of the clock; isothermal takes all records as made at one temperature.")
    reference_temperature: Temperature = Field(description="Temperature at which reduced time is time, as 23 degC.")


class ScatterSection(Section):
    """What varies between batches and between specimens."""

    modes: tuple[Literal["stiffness", "strength", "pace"], ...] = Field(
        ("stiffness", "strength", "pace"),
        description="Modes that scatter: stiffness (scales all stress), strength (how much relaxes), pace (how fast). May be empty.",
    )

    @model_validator(mode="after")
    def _unique(self) -> Self:
        if len(set(self.modes)) != len(self.modes):
            raise refusal("every mode once", "Remove the repeated mode.", f"modes {', '.join(self.modes)}")
        return self


class RangeSection(Section):
    """A range that holds a quantity with the probability that coverage states."""

    low: RawQuantity = Field(description="Lower end with its unit; for a scatter 0 says that only the upper end is meant.")
    high: RawQuantity = Field(description="Upper end with its unit.")
    coverage: Share = Field(0.9, description="Probability that the range holds the quantity.")
    source: str = Field(
        min_length=3, max_length=500, description='Where the range comes from: a publication, own records, or "from memory".'
    )


class ColumnSection(Section):
    """One column of an export."""

    column: Name = Field(description="Heading of the column exactly as the export has it.")
    unit: Name = Field(description="Unit of the numbers in this column; 1 for a pure ratio.")


class ColumnsSection(Section):
    """Which column of an export holds what. Declare time, one observed quantity, and strain or displacement."""

    time: ColumnSection = Field(description="Time of the reading.")
    force: ColumnSection | None = Field(None, description="Force; the register then gives the loaded area.")
    stress: ColumnSection | None = Field(None, description="Nominal stress: force by initial area.")
    ratio: ColumnSection | None = Field(None, description="Stress divided by the stress at the reference time of the register.")
    percent_lost: ColumnSection | None = Field(
        None, description="Share of the stress at the reference time that is lost; with unit %, ratio = 1 - lost/100."
    )
    strain: ColumnSection | None = Field(None, description="Engineering strain on the initial length.")
    displacement: ColumnSection | None = Field(None, description="Displacement; the register then gives the length.")

    @model_validator(mode="after")
    def _one_of_each(self) -> Self:
        observed = [key for key in ("force", "stress", "ratio", "percent_lost") if getattr(self, key) is not None]
        if len(observed) != 1:
            found = " and ".join(observed).replace("_", " ") if observed else "no observed quantity"
            raise refusal("exactly one of force, stress, ratio, percent lost", "Declare the one column to use.", found)
        if self.strain is not None and self.displacement is not None:
            raise refusal("strain or displacement", "Declare the one to use.", "strain and displacement")
        return self


class StrainSourceSection(Section):
    """How strain was measured."""

    kind: Literal["extensometer", "crosshead"] = Field(
        description="extensometer: on the specimen itself; crosshead: with the frame's own compliance in it, which is subtracted."
    )
    frame_compliance: Compliance | None = Field(None, description="Crosshead only: displacement of frame, grips and load cell by force.")
    standard_uncertainty: Compliance | None = Field(None, description="Crosshead only: standard uncertainty of the frame compliance.")

    @model_validator(mode="after")
    def _complete(self) -> Self:
        given = [self.frame_compliance, self.standard_uncertainty]
        if self.kind == "crosshead" and None in given:
            raise refusal(
                "frame compliance and its standard uncertainty",
                "Measure them with a stiff block in the grips; write 0 mm/N only if that is what you found.",
                "a crosshead without them",
            )
        if self.kind == "extensometer" and given != [None, None]:
            raise refusal("no frame compliance", "Remove it: an extensometer doesn't see the frame.", "a frame compliance")
        return self


class StandardUncertaintiesSection(Section):
    """Type B standard uncertainties (GUM 4.3) common to everything that the instrument measured. A missing one counts as 0."""

    force: RelativeUncertainty = Field(0.0, description="Relative, of the force or stress calibration, as 0.5 %.")
    strain: RelativeUncertainty = Field(0.0, description="Relative, of the strain or displacement calibration.")
    temperature: TemperatureDifference = Field(0.0, description="Of the temperature, as 0.5 K.")


class NoiseRangeSection(Section):
    """Range of a standard deviation, covering 90 %."""

    low: RawQuantity = Field(description="Lower end, above zero.")
    high: RawQuantity = Field(description="Upper end.")


class NoiseSection(Section):
    """Standard deviation of one reading's noise; where a part is missing the handbook gives it."""

    absolute: NoiseRangeSection | None = Field(
        None, description="The part that doesn't grow with the reading: as a stress, as a force, or as a ratio for normalised responses."
    )
    relative: NoiseRangeSection | None = Field(None, description="The part that grows with the reading, as 0.1 %.")


class InstrumentSection(Section):
    """An instrument and its export."""

    about: str = Field("", max_length=500, description="For the report.")
    reader: Name = Field("delimited", description="Key of the reader; delimited reads text with one reading a line.")
    encoding: Name = Field("utf-8", description="Of the export, as utf-8 (with or without mark), cp1252, utf-16.")
    separator: Literal[",", ";", "|", "tab", "whitespace"] = Field(",", description='Between cells: "," ";" "|" tab or whitespace.')
    decimal: Literal[".", ","] = Field(".", description="Decimal sign of the numbers.")
    units_row: bool = Field(
        default=False, description="true where the line below the headings holds units; they are compared with those declared."
    )
    missing_marks: tuple[Name, ...] = Field((), description="Words that stand for a missing reading besides an empty cell, as [NaN, ---].")
    stop_at: str | None = Field(None, min_length=1, description="Reading ends before the first line that starts with this text.")
    columns: ColumnsSection = Field(description="Which column holds what.")
    strain_source: StrainSourceSection | None = Field(None, description="Needed where displacement is declared.")
    standard_uncertainties: StandardUncertaintiesSection = Field(
        default_factory=StandardUncertaintiesSection, description="Shared by all records of the instrument."
    )
    noise: NoiseSection = Field(default_factory=NoiseSection, description="Ranges for the noise of one reading.")

    @model_validator(mode="after")
    def _consistent(self) -> Self:
        if self.separator == self.decimal:
            raise refusal("a separator that is not the decimal sign", "Look into the export which is which.", f'"{self.decimal}" for both')
        if self.columns.displacement is not None and self.strain_source is None:
            raise refusal(
                "strain source", "Say whether displacement comes from an extensometer or the crosshead.", "displacement without its source"
            )
        crosshead = self.strain_source is not None and self.strain_source.kind == "crosshead"
        if crosshead and self.columns.displacement is None:
            raise refusal("a displacement column", "Declare displacement, or kind: extensometer.", "crosshead without displacement")
        if crosshead and self.columns.force is None:
            raise refusal("a force column", "The frame's share of the displacement needs the force.", "crosshead without force")
        return self


class RampSection(Section):
    """A strain that changes linearly."""

    to: Strain = Field(description="Strain at the end of the ramp; in compression its magnitude.")
    over: Time = Field(description="Duration of the ramp.")


class HoldSection(Section):
    """A strain that stays."""

    for_: Time = Field(description="Duration of the hold.")


class StepSection(Section):
    """One step of a history: a ramp or a hold."""

    ramp: RampSection | None = Field(None, description="Change the strain linearly.")
    hold: HoldSection | None = Field(None, description="Keep the strain.")

    @model_validator(mode="after")
    def _one(self) -> Self:
        if (self.ramp is None) == (self.hold is None):
            raise refusal("ramp or hold", "Write one of the two in each step.", "both" if self.ramp else "neither")
        return self


class LimitSection(Section):
    """A limit that the part must keep."""

    at_least: RawQuantity | None = Field(None, description="The response must not fall below this; in compression a magnitude.")
    at_most: RawQuantity | None = Field(None, description="The response must not exceed this; in compression a magnitude.")
    quantity: Literal["stress", "retained"] = Field(
        "stress", description="stress: nominal stress; retained: stress by the stress of the same part at the reference."
    )
    reference: Time | None = Field(None, description="Retained only: time in the history whose stress counts as 1.")
    at: Time | None = Field(None, description="Time in the history at which the limit applies.")
    from_: Time | None = Field(None, description="Start of the interval in which the limit applies; the worst moment counts.")
    until: Time | None = Field(None, description="End of that interval; the end of the history when missing.")
    required_share: Share = Field(description="Share of the parts that must keep the limit (content), as 90 %.")
    confidence: Share = Field(description="Required probability that the share is reached (confidence), as 95 %.")

    @model_validator(mode="after")
    def _one_of_each(self) -> Self:
        if (self.at_least is None) == (self.at_most is None):
            raise refusal("at least or at most", "Write one of the two; a second limit gets a name of its own.", "both or neither")
        if (self.at is None) == (self.from_ is None) or (self.at is not None and self.until is not None):
            raise refusal("at, or from with until", "Give one time, or an interval.", "both or neither")
        if self.from_ is not None and self.until is not None and self.until <= self.from_:
            raise refusal("until later than from", "Exchange them, or write at.", "an interval that ends before it starts")
        if (self.quantity == "retained") != (self.reference is not None):
            raise refusal("reference exactly where quantity is retained", "Add reference: 1 h, or remove it.", f"quantity {self.quantity}")
        return self


class DutySection(Section):
    """A service history with its limits."""

    about: str = Field("", max_length=500, description="One line for the report.")
    state: Name = Field("virgin", description="State of the part, in the words of the register.")
    sense: Literal["tension", "compression", "shear"] = Field(
        description="How the part is strained; in compression everything is a magnitude."
    )
    temperature: Temperature = Field(description="Service temperature.")
    history: tuple[StepSection, ...] | None = Field(None, min_length=1, description="Steps from rest: ramps and holds.")
    history_file: Name | None = Field(
        None, description='Instead of history: a CSV in histories/ with columns such as "time [h]", "strain [%]".'
    )
    limits: dict[Name, LimitSection] = Field(min_length=1, description="Limits by name.")

    @model_validator(mode="after")
    def _one_history(self) -> Self:
        if (self.history is None) == (self.history_file is None):
            raise refusal("history or history file", "Write one of the two.", "both or neither")
        return self


class HoldOutSection(Section):
    """Readings that the fit must not see, to test predictions against them."""

    after: Time | None = Field(None, description="Readings later than this in their record are held out.")
    specimens: tuple[Name, ...] = Field((), description="Whole specimens held out.")
    batches: tuple[Name, ...] = Field((), description="Whole batches held out.")


class SamplerSection(Section):
    """Settings of the sampler; retries after a failed gate change them and say so."""

    chains: int = Field(4, ge=2, le=16, description="Number of chains.")
    draws: int = Field(1000, ge=100, le=100_000, description="Draws kept from each chain.")
    tune: int = Field(600, ge=100, le=100_000, description="Warm-up draws of each chain.")
    seed: int = Field(20_261, ge=0, le=2**32 - 1, description="Seed: the same seed gives the same draws.")
    target_accept: float = Field(0.95, ge=0.6, lt=1, description="Acceptance that the step size aims at.")


class DisplaySection(Section):
    """Units of the report."""

    stress: StressUnit = Field("MPa", description="As MPa, psi.")
    time: TimeUnit = Field("h", description="As h, d, a.")
    temperature: TemperatureUnit = Field("degC", description="As degC, K.")
    strain: StrainUnit = Field("%", description="As %, 1.")


class StudySection(Section):
    """The whole of ``study.yaml``."""

    format: Literal[1] = Field(description="Version of this file's layout: 1.")
    title: str = Field(min_length=1, max_length=200, description="For the report.")
    about: str = Field("", max_length=2000, description="For the report: what the material and the parts are.")
    material: MaterialSection = Field(description="What the specimens are made of.")
    law: LawSection = Field(default_factory=LawSection, description="The rheological law.")
    clock: ClockSection = Field(description="Reduced time.")
    horizon: Time | None = Field(
        None, description="Longest reduced time that the law is built to reach; three decades beyond the longest record when missing."
    )
    reference_time: Time | None = Field(None, description="Stiffness is the relaxation modulus at this time; 10 s when missing.")
    scatter: ScatterSection = Field(default_factory=ScatterSection, description="What varies between batches and specimens.")
    priors: dict[Name, RangeSection] = Field(
        default_factory=dict, description="Your own ranges by quantity; each replaces the one of the handbook."
    )
    instruments: dict[Name, InstrumentSection] = Field(min_length=1, description="Instruments by name.")
    duties: dict[Name, DutySection] = Field(min_length=1, description="Duties by name.")
    hold_out: HoldOutSection | None = Field(None, description="Readings kept from the fit.")
    sampler: SamplerSection = Field(default_factory=SamplerSection, description="Settings of the sampler.")
    display: DisplaySection = Field(default_factory=DisplaySection, description="Units of the report.")


class HandbookSection(Section):
    """A family of materials in ``handbook/*.yaml``."""

    format: Literal[1] = Field(description="Version of this file's layout: 1.")
    family: Name = Field(description="Name that study.yaml uses.")
    about: str = Field("", max_length=2000, description="What belongs to the family.")
    ranges: dict[Name, RangeSection] = Field(min_length=1, description="Ranges by quantity.")
