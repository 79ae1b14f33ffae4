"""What a kind of test is."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Method:
    """A kind of test.

    Attributes:
        name: as written in the register.
        about: one sentence.
        driven, observed: the conjugate quantities.
        hold_thinned: True where long holds are averaged in log time.
        late_start: True where a record may start after its ramp, whose duration and strain are then declared.
    """

    name: str
    about: str
    driven: str
    observed: str
    hold_thinned: bool
    late_start: bool
