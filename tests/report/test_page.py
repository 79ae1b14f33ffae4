"""The page: complete, self-contained, escaped, the same bytes every time, and silent where nothing was released."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import matplotlib as mpl
import pytest

from perdure.report.page import page, render
from perdure.report.results import ResultsFolder
from perdure.report.sections import SECTIONS

Build = Callable[[Any], Path]

HOSTILE = "<img src=http://evil.invalid/x onerror=alert(1)> \"'&$\\frac{1}$"
VOID = {"meta", "link", "br", "img", "input", "hr"}


class Outline(HTMLParser):
    """Collects tags, ids, text and table cells; checks that tags are closed in order."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.open: list[str] = []
        self.text: list[str] = []
        self.rows: list[list[str]] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)
        if tag == "tr":
            self.rows.append([])
        if tag in {"td", "th"}:
            self.rows[-1].append("")

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.text.append(data)
        if self.open and {"td", "th"} & set(self.open) and self.rows[-1]:
            self.rows[-1][-1] += data

    def attributes(self, tag: str) -> list[dict[str, str | None]]:
        """Attributes of every element called ``tag``."""
        return [attributes for name, attributes in self.tags if name == tag]


def outline(text: str) -> Outline:
    parser = Outline()
    parser.feed(text)
    parser.close()
    assert parser.open == []
    return parser


@dataclass(frozen=True)
class Case:
    """A results folder and its page."""

    results: ResultsFolder
    text: str


@pytest.fixture(
    scope="module",
    params=[(True, True), (True, False), (False, True), (False, False)],
    ids=lambda pair: f"released={pair[0]}-holdout={pair[1]}",
)
def case(request: pytest.FixtureRequest, build: Build, make_recipe: Any) -> Case:
    released, holdout = request.param
    results = ResultsFolder.read(build(make_recipe(released=released, holdout=holdout, specimens=4, readings=15)))
    return Case(results, page(results))


def test_page_is_complete_accessible_and_self_contained(case: Case) -> None:
    results, text = case.results, case.text
    seen = outline(text)
    sections = [attributes["id"] for attributes in seen.attributes("section")]
    assert sections == [name for name in SECTIONS if name != "holdout" or results.holdout is not None]

    # nothing is fetched and nothing runs
    assert not re.search(r"https?:|\bsrc\s*=|<script|<link|@import|<iframe|javascript:", text)
    assert set(re.findall(r"url\(([^)]*)\)", text)) <= {f"#{attributes['id']}" for _, attributes in seen.tags if "id" in attributes}

    # every finding is there with its remedy
    words = "".join(seen.text).replace("\u00a0", " ")
    for finding in results.findings:
        assert finding.message in words
        assert finding.remedy in words

    # ids are unique and every reference within the page has its target
    ids = [attributes["id"] for _, attributes in seen.tags if "id" in attributes]
    assert len(ids) == len(set(ids))
    targets = {attributes["href"] for tag, attributes in seen.tags if tag in {"a", "use"}}
    assert targets <= {f"#{name}" for name in ids}

    # figures speak, table headings have a scope
    pictures = seen.attributes("svg")
    assert pictures
    assert all(attributes["role"] == "img" and attributes["aria-label"] for attributes in pictures)
    assert all(attributes.get("scope") in {"col", "row"} for attributes in seen.attributes("th"))


def test_cautions_are_always_there(case: Case) -> None:
    words = "".join(outline(case.text).text)
    for caution in (
        "For parts made as the specimens were",
        "Rupture, fatigue and environmental cracking",
        "no new mechanism",
        "licensed",
        "Reviewer",
    ):
        assert caution in words


def test_nothing_is_stated_where_nothing_was_released(case: Case) -> None:
    results, text = case.results, case.text
    seen = outline(text)
    levels = ("Next specimen", "Population median")
    margins = [row for row in seen.rows if len(row) == 10 and row[0].startswith(levels)]
    assert len(margins) == len(results.margins)
    gauges = text.count('<li class="gauge')
    assert gauges == len(results.margins)
    if results.released:
        assert all(all(cell for cell in row) for row in margins)
        assert "NOT RELEASED" not in text
        assert '<div class="banner' not in text
        assert len(re.findall(r'<span class="figures">reserve factor', text)) == gauges
    else:
        assert all(row[2:] == [""] * 8 for row in margins)
        assert text.count('<li class="gauge tone-not-released"') == gauges
        assert 'class="figures"' not in text
        assert '<div class="banner' in text
        assert "R-hat reached 1.034" in text.split("</article>")[0]
        drawn = len({(row.duty, row.level, row.subject) for row in results.bands}) + len(
            {(row.level, row.subject) for row in results.modulus}
        )
        assert text.count(">NOT RELEASED<") == drawn


def test_numbers_in_a_table_that_says_released_stay_hidden_when_the_gate_failed(build: Build, make_recipe: Any) -> None:
    folder = build(make_recipe(specimens=2, readings=10))
    path = folder / "evidence" / "fit.json"
    path.write_text(path.read_text(encoding="utf-8").replace('"released": true', '"released": false'), encoding="utf-8")
    text = page(ResultsFolder.read(folder))
    assert "0.9312" not in text
    assert any(row.probability == 0.9312 for row in ResultsFolder.read(folder).margins)


def test_holdout_is_reported_as_it_is(case: Case) -> None:
    told = "the 50\u00a0% band holds 21\u00a0% and the 90\u00a0% band 39\u00a0%, interval score 0.0457 MPa"
    assert (told in case.text) is (case.results.holdout is not None)


def test_texts_of_users_are_escaped_everywhere(build: Build, make_recipe: Any) -> None:
    recipe = make_recipe(title=HOSTILE, batch=HOSTILE, source=HOSTILE, specimens=4, readings=10, holdout=True)
    text = page(ResultsFolder.read(build(recipe)))
    seen = outline(text)
    assert "img" not in {tag for tag, _ in seen.tags}
    assert not any(name.startswith("on") for _, attributes in seen.tags for name in attributes)
    assert HOSTILE in "".join(seen.text)


def test_same_results_give_the_same_bytes_in_another_process(build: Build, make_recipe: Any, tmp_path: Path) -> None:
    folder = build(make_recipe(specimens=3, readings=10, holdout=True))
    first, second = tmp_path / "first.html", tmp_path / "second.html"
    render(ResultsFolder.read(folder), first)
    script = (
        "import sys; from pathlib import Path; from perdure.report.page import render; from perdure.report.results import ResultsFolder; "
        "render(ResultsFolder.read(Path(sys.argv[1])), Path(sys.argv[2]))"
    )
    subprocess.run([sys.executable, "-c", script, str(folder), str(second)], check=True, env={"PYTHONHASHSEED": "7"})
    assert first.read_bytes() == second.read_bytes()


def test_fourteen_specimens_of_150_readings_fit_into_five_megabytes(build: Build, make_recipe: Any, tmp_path: Path) -> None:
    out = tmp_path / "report.html"
    render(ResultsFolder.read(build(make_recipe(specimens=14, readings=150, holdout=True))), out)
    assert 100_000 < out.stat().st_size < 5_000_000


def test_intake_shows_reasons_and_groups_conversions(case: Case) -> None:
    rows = outline(case.text).rows
    assert any(row[0] == "R30" and "left out" in row[5] and row[6] == "slipped in the grips" for row in rows if len(row) == 7)
    assert any(row[0] == "R31" and "refused" in row[5] and row[6] == "time runs back" for row in rows if len(row) == 7)
    assert ["force in N over area in mm2 to MPa", "R01, R02, R03, R04"] in rows
    assert ["compression entered positive, sign turned", "R01, R02, R03, R04"] in rows


def test_units_of_the_user(build: Build, make_recipe: Any) -> None:
    text = page(ResultsFolder.read(build(make_recipe(stress="kPa", specimens=2, readings=10))))
    assert "at least 250 kPa" in text
    assert "stress / kPa" in text
    assert not re.search(r"\d MPa", text)


def test_settings_of_matplotlib_are_left_alone(build: Build, make_recipe: Any) -> None:
    before = dict(mpl.rcParams)
    page(ResultsFolder.read(build(make_recipe(specimens=2, readings=10))))
    assert dict(mpl.rcParams) == before


def test_importing_the_package_is_light() -> None:
    script = "import sys, perdure.report; print(sorted({'matplotlib', 'jinja2', 'numpy', 'pint'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", script], check=True, capture_output=True, text=True)
    assert done.stdout.strip() == "[]"


def test_empty_tables_still_give_a_page_that_says_so(build: Build, make_recipe: Any) -> None:
    folder = build(make_recipe(specimens=1, readings=5))
    for path in [*folder.glob("*.csv"), *folder.glob("evidence/*.csv")]:
        path.write_text(path.read_text(encoding="utf-8").splitlines()[0] + "\n", encoding="utf-8")
    words = "".join(outline(page(ResultsFolder.read(folder))).text)
    for said in (
        "hold no verdict",
        "hold no limit",
        "hold no band",
        "hold no relaxation modulus",
        "hold no scatter",
        "nothing was looked at",
    ):
        assert said in words


def test_banner_names_a_blocking_check_when_the_gate_was_passed(build: Build, make_recipe: Any) -> None:
    folder = build(make_recipe(specimens=1, readings=5))
    path = folder / "findings.csv"
    path.write_text(path.read_text(encoding="utf-8").replace("Look at its mounting.,no", "Look at its mounting.,yes"), encoding="utf-8")
    text = page(ResultsFolder.read(folder))
    banner = text[text.index('<div class="banner') : text.index('<p class="lead">')]
    assert "A check that stops all verdicts has failed" in banner
    assert "The 90\u00a0% band of S07 holds 62\u00a0% of its readings." in banner
    assert "The gate was passed." in text
