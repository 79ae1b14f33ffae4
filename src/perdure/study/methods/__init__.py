"""Methods: kinds of test, one file each, listed in :data:`METHODS`."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from perdure.study.methods.method import Method
from perdure.study.methods.strain_history import STRAIN_HISTORY
from perdure.study.methods.stress_relaxation import STRESS_RELAXATION

METHODS: Mapping[str, Method] = MappingProxyType({method.name: method for method in (STRESS_RELAXATION, STRAIN_HISTORY)})
