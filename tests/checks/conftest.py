"""Fits that several tests look at; none is changed by them."""

from __future__ import annotations

import pytest

from perdure.checks.fitted import FittedStudy
from tests.checks.small_study import fit, record_set, study


@pytest.fixture(scope="session")
def clean() -> FittedStudy:
    """A study in which nothing is wrong."""
    return fit(record_set(), study())
