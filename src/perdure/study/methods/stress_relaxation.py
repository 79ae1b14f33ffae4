"""Stress relaxation: a ramp to a strain that is then held."""

from perdure.study.methods.method import Method

STRESS_RELAXATION = Method(
    name="stress relaxation",
    about="A strain is applied in a short ramp and held; the stress is read over time.",
    driven="strain",
    observed="stress",
    hold_thinned=True,
    late_start=True,
)
