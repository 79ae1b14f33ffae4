"""Strain history: constant rate, load and unload, cyclic or multi-step, as recorded."""

from perdure.study.methods.method import Method

STRAIN_HISTORY = Method(
    name="strain history",
    about="The strain follows any history (constant rate, load and unload, cycles, steps) and is recorded with the stress.",
    driven="strain",
    observed="stress",
    hold_thinned=False,
    late_start=False,
)
