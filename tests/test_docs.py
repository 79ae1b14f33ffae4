"""README.md and DEVELOPERS.md say what is there: files, commands, registries, results, and an example study that is sound."""

from __future__ import annotations

import importlib
import importlib.util
import re
import shlex
import tomllib
from collections.abc import Iterator, Mapping
from itertools import product
from pathlib import Path

import pytest

import perdure.commands as command_line
from perdure.inference.gate import EBFMI_LIMIT, ESS_LIMIT, RHAT_LIMIT
from perdure.inference.noise import NOISE
from perdure.predictions.draws import LEVELS
from perdure.report.words import VERDICTS
from perdure.rheology.laws import LAWS
from perdure.steps.chain import CHAIN
from perdure.steps.predict import MARGIN_COLUMNS

ROOT = Path(__file__).resolve().parents[1]
PAGES = ("README.md", "DEVELOPERS.md")
EXAMPLE = "feet"
# what the pages may call at a shell besides perdure, pytest and python
OTHER_COMMANDS = {"ruff", "mypy", "lint-imports", "bash", "uv", "snakemake", "."}
TOP = ("src/", "tests/", "config/", "workflow/", ".ci/")
OF_THE_REPOSITORY = (".py", ".smk", ".sh", ".md", ".toml", ".lock")
EXAMPLE_FILE = re.compile(rf"^`({EXAMPLE}/[\w./]+)`:\n\n```\w+\n(.*?)^```$", re.MULTILINE | re.DOTALL)


def page(name: str) -> str:
    return (ROOT / name).read_text(encoding="utf-8")


def blocks(name: str, language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```$", page(name), re.MULTILINE | re.DOTALL)


def quoted(name: str) -> list[str]:
    """Everything between backticks outside of fenced blocks."""
    return re.findall(r"`([^`\n]+)`", re.sub(r"^```.*?^```$", "", page(name), flags=re.MULTILINE | re.DOTALL))


def table(name: str, heading: str) -> list[list[str]]:
    """Cells of the rows of the table whose first heading cells are ``heading``."""
    text = page(name)
    found = re.search(rf"^\| {re.escape(heading)} \|.*\n\|[-| ]+\|\n((?:\|.*\n)+)", text, re.MULTILINE)
    if found is None:
        raise LookupError(heading)
    return [[cell.strip() for cell in row.strip("|").split(" | ")] for row in found.group(1).splitlines()]


def shell_lines() -> Iterator[tuple[str, list[str]]]:
    """Page and words of every command line shown, the environment's own part taken off."""
    for name in PAGES:
        lines = [line for block in blocks(name, "sh") for line in block.splitlines()]
        inline = [text for text in quoted(name) if re.match(r"(sh workflow/|perdure |python -m |python tests/|snakemake )", text)]
        for line in lines + inline:
            words = shlex.split(line, comments=True)
            if words[:2] == ["sh", "workflow/env.sh"]:
                words = words[2:]
            # the name of a command, as in "perdure check says ...", is no command line
            if words and not (line in inline and words[0] == "perdure" and len(words) == 2):
                yield name, words


LINES = sorted({(name, tuple(words)) for name, words in shell_lines()})


def paths() -> list[tuple[str, str]]:
    found: set[tuple[str, str]] = set()
    for name in PAGES:
        words = [word for where, line in LINES if where == name for word in line] + quoted(name)
        found.update((name, word) for word in words if word.startswith(TOP) or word in {"Snakefile", "LICENSE", ".python-version", *PAGES})
    return sorted(found)


@pytest.mark.parametrize(("name", "path"), paths())
def test_file_exists(name: str, path: str) -> None:
    if "<" in path:
        # a file that the reader is to make: its folder is there
        assert (ROOT / path.partition("<")[0]).is_dir(), name
    else:
        assert (ROOT / path).exists(), name


@pytest.mark.parametrize("name", PAGES)
def test_files_of_the_repository_are_named_from_its_top(name: str) -> None:
    named = [text for text in quoted(name) if text.endswith(OF_THE_REPOSITORY) and " " not in text]
    assert named
    assert [text for text in named if not text.startswith(TOP) and not (ROOT / text).is_file()] == []


@pytest.mark.parametrize(("name", "words"), LINES, ids=[" ".join(words) for _, words in LINES])
def test_command_line_is_understood(name: str, words: tuple[str, ...]) -> None:
    command, rest = words[0], list(words[1:])
    if command == "perdure":
        own, options = command_line._split(rest)
        parsed = command_line._parser().parse_args(own)
        assert not options or parsed.command == "run"
    elif command == "pytest":
        markers = tomllib.loads(page("pyproject.toml"))["tool"]["pytest"]["ini_options"]["markers"]
        if "-m" in rest:
            assert rest[rest.index("-m") + 1] in {marker.partition(":")[0] for marker in markers}
    elif command == "python" and rest[0] == "-m":
        assert importlib.util.find_spec(rest[1]) is not None
    elif command == "python":
        assert (ROOT / rest[0]).is_file()
    else:
        assert command in OTHER_COMMANDS, name


def test_both_pages_show_commands() -> None:
    assert ("README.md", ("perdure", "run")) in LINES
    assert ("README.md", ("pytest",)) in LINES
    assert {words[0] for name, words in LINES if name == "DEVELOPERS.md"} >= {"pytest", "ruff", "mypy", "lint-imports", "python", "uv"}


REGISTRIES = [re.fullmatch(r"`(\w+)` in `src/([\w/]+)\.py`", row[2]) for row in table("DEVELOPERS.md", "to add")]


def test_every_row_names_a_registry() -> None:
    assert None not in REGISTRIES
    named = {found[1] for found in REGISTRIES if found}
    assert named == {"LAWS", "CLOCKS", "METHODS", "READERS", "NOISE", "READINGS", "QUANTITIES", "BEFORE", "AFTER", "SECTIONS", "CHAIN"}


@pytest.mark.parametrize(("registry", "file"), [(found[1], found[2]) for found in REGISTRIES if found])
def test_registry_is_where_the_page_says(registry: str, file: str) -> None:
    # not only to be imported from there: the line to change is in that file
    assert re.search(rf"^{registry}: Mapping\[", (ROOT / "src" / f"{file}.py").read_text(encoding="utf-8"), re.MULTILINE)
    found = getattr(importlib.import_module(file.replace("/", ".").removesuffix(".__init__")), registry)
    assert isinstance(found, Mapping)
    assert found


def test_table_of_the_fast_face_covers_every_law_and_noise_term() -> None:
    rows = [tuple(cell.strip("`") for cell in row) for row in table("DEVELOPERS.md", "law")]
    assert sorted(row[:3] for row in rows) == sorted(product(LAWS, ("free", "grid"), NOISE))
    assert {row[3] for row in rows} <= {"yes", "no"}


def test_layers_are_those_of_the_contract() -> None:
    contracts = tomllib.loads(page("pyproject.toml"))["tool"]["importlinter"]["contracts"]
    (layers,) = [contract["layers"] for contract in contracts if contract["type"] == "layers"]
    named = [row[0].strip("`/").removeprefix("src/perdure/").removesuffix(".py") for row in table("DEVELOPERS.md", "layer")]
    assert named == layers


def test_every_result_is_explained() -> None:
    explained = [row[0].strip("`") for row in table("README.md", "file")]
    made = {file for step in CHAIN.values() for file in step.makes if not file.startswith("evidence/")}
    assert len(explained) == len(set(explained))
    assert set(explained) == made


def test_margin_is_explained_in_the_words_of_the_table() -> None:
    columns = [column for row in table("README.md", "column of `margins.csv`") for column in re.findall(r"`([^`]+)`", row[0])]
    assert columns
    assert [column for column in columns if column not in MARGIN_COLUMNS] == []
    assert [row[0] for row in table("README.md", "verdict")] == list(VERDICTS)
    assert [row[0] for row in table("README.md", "level")] == list(LEVELS)


def test_limits_of_the_gate_are_those_of_the_code() -> None:
    said = " ".join(page("README.md").split())
    for words in (f"R-hat is at most {RHAT_LIMIT:g},", f"sample sizes are at least {ESS_LIMIT:g},", f"E-BFMI is at least {EBFMI_LIMIT:g}."):
        assert words in said


@pytest.fixture
def example(tmp_path: Path) -> Path:
    files = EXAMPLE_FILE.findall(page("README.md"))
    assert sorted(name for name, _ in files) == [f"{EXAMPLE}/records/feet.csv", f"{EXAMPLE}/register.csv", f"{EXAMPLE}/study.yaml"]
    for name, text in files:
        path = tmp_path / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
    return tmp_path / EXAMPLE


def test_example_study_passes_its_check(example: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert command_line.main(["check", str(example)]) == 0
    said = capsys.readouterr()
    assert said.err == ""
    assert "4 records of 4 specimens from 2 batches" in said.out
    assert "36 readings with a time, 0 of them without a response" in said.out
    assert " 0 failed" in said.out
    assert "Files that no row of the register names" not in said.out


@pytest.mark.parametrize("name", PAGES)
def test_page_is_a_top_with_unbroken_tables(name: str) -> None:
    text = page(name)
    assert text.startswith("# ")
    assert text.count("\n```") % 2 == 0
    for lines in re.findall(r"(?:^\|.*\n)+", text, re.MULTILINE):
        assert len({row.count(" | ") for row in lines.splitlines() if not row.startswith("|---")}) == 1, lines.splitlines()[0]
