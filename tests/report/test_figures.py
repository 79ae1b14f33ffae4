"""What figures show, taken from what they draw and say."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from perdure.report.figures.axes import decade_label
from perdure.report.figures.canvas import house_style, picture, single_axes
from perdure.report.figures.forest import on_prior_scale
from perdure.report.figures.records import record_panel, sign_shown
from perdure.report.palette import INK, OCHRE, PAPER, QUIET, RUST, TONES, WASH, contrast
from perdure.report.results import ResultsFolder
from perdure.report.rows import Parameter

WIDE = Parameter("modulus", "modulus", "population", "", "MPa", 4.0, 2.0, 8.0, 4.0, 2.0, 8.0, 0.0, "no")


@pytest.mark.parametrize(
    ("text", "ground"),
    [
        (INK, PAPER),
        (QUIET, PAPER),
        (QUIET, WASH),
        (RUST, PAPER),
        (OCHRE, PAPER),
        *TONES.values(),
        *((tone, PAPER) for tone, _ in TONES.values()),
    ],
)
def test_text_keeps_its_contrast(text: str, ground: str) -> None:
    assert contrast(text, ground) >= 4.5


def test_contrast_of_black_and_white() -> None:
    assert contrast("#000000", "#ffffff") == pytest.approx(21)


@pytest.mark.parametrize(("exponent", "label"), [(-5, "10\u207b\u2075"), (-2, "0.01"), (0, "1"), (3, "1000"), (6, "10\u2076")])
def test_decades_are_labelled_without_mathematical_markup(exponent: int, label: str) -> None:
    assert decade_label(exponent) == label


def test_posterior_as_wide_as_its_prior_fills_its_bar() -> None:
    place = on_prior_scale(WIDE)
    assert place is not None
    assert (place.low, place.median, place.high) == pytest.approx((0.0, 0.5, 1.0))


def test_prior_that_crosses_zero_is_drawn_on_the_natural_scale() -> None:
    place = on_prior_scale(replace(WIDE, median=0.0, low=-0.5, high=0.5, prior_low=-1.0, prior_high=1.0))
    assert place is not None
    assert (place.low, place.median, place.high) == pytest.approx((0.25, 0.5, 0.75))


def test_parameter_without_a_prior_has_no_place() -> None:
    assert on_prior_scale(replace(WIDE, prior_low=None)) is None


def test_compression_is_shown_as_magnitude() -> None:
    assert sign_shown([0.001, -0.4, -0.3]) == -1
    assert sign_shown([0.0, 0.4]) == 1


def test_record_panel_counts_residuals_and_readings_at_time_zero(build: Any, make_recipe: Any) -> None:
    folder: Path = build(make_recipe(specimens=1, readings=12))
    results = ResultsFolder.read(folder)
    rows = [replace(row, z=3.0 if index < 2 else 0.1, time=0.0 if index == 5 else row.time) for index, row in enumerate(results.fitted)]
    panel = record_panel(rows, results.display, key="one")
    assert "2 standardised residuals beyond" in panel.label
    assert "1 at time 0 not drawn" in panel.caption
    assert "compressive stress / MPa" in panel.svg


def test_strain_history_is_drawn_over_time_itself(build: Any, make_recipe: Any) -> None:
    results = ResultsFolder.read(build(make_recipe(specimens=1, readings=12)))
    rows = [replace(row, method="strain history", time=3600.0 * index) for index, row in enumerate(results.fitted)]
    panel = record_panel(rows, results.display, key="one")
    assert "not drawn" not in panel.caption
    assert ">1 min<" not in panel.svg
    assert "time / h" in panel.svg


def test_picture_is_inline_and_its_ids_are_its_own() -> None:
    def draw(figure: Any) -> None:
        single_axes(figure).plot([0, 1], [0, 1], marker="o", label="$x<y$")

    with house_style():
        shown = picture(draw, key="mine", size=(2, 2), label='a "quoted" label')
    assert shown.svg.startswith("<svg viewBox=")
    assert "xmlns" not in shown.svg
    assert "<metadata" not in shown.svg
    assert "&quot;quoted&quot;" in shown.svg
    assert 'id="mine-' in shown.svg
    assert 'href="#mine-' in shown.svg


def test_text_in_a_script_that_the_measuring_font_lacks_is_no_warning() -> None:
    def draw(figure: Any) -> None:
        figure.text(0.5, 0.5, "\u8bd5\u6837")

    assert "\u8bd5\u6837" in picture(draw, key="glyph", size=(2, 2), label="glyphs").svg
