"""Noise terms: what a reading adds to the response. One file each, listed in :data:`NOISE`."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from perdure.inference.noise.term import NoiseTerm
from perdure.inference.noise.white import WhiteNoise

NOISE: Mapping[str, NoiseTerm] = MappingProxyType({"white": WhiteNoise()})
