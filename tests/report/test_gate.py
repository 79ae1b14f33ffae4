"""The page states the gate that sampling applies."""

from __future__ import annotations

import pytest

from perdure.inference.gate import EBFMI_LIMIT, ESS_LIMIT, RHAT_LIMIT
from perdure.report.sections.sampling import GATE


@pytest.mark.parametrize(("key", "limit"), [("rhat", RHAT_LIMIT), ("ess bulk", ESS_LIMIT), ("ess tail", ESS_LIMIT), ("ebfmi", EBFMI_LIMIT)])
def test_stated_limits_are_those_of_the_sampler(key: str, limit: float) -> None:
    assert GATE[key][1].split()[-1] == f"{limit:g}"
