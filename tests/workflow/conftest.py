"""Two small studies, run for real once, and copies of them to change."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from perdure.commands.new import new
from tests.workflow.bench import SECOND_DUTY, STUDIES, Bench, Finished, digest_of, small


@pytest.fixture(scope="session")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Finished:
    bench = Bench(tmp_path_factory.mktemp("bench"))
    for name in STUDIES:
        new(bench.study(name), None)
        small(bench.study(name))
    bench.edit("one", "study.yaml", "duties:\n", SECOND_DUTY)
    before = {name: digest_of(bench.study(name)) for name in STUDIES}
    return Finished(bench, bench.run(), before)


@pytest.fixture
def bench(finished: Finished, tmp_path: Path) -> Bench:
    """A copy of the finished bench; dates are kept, as Snakemake looks at them."""
    copy = Bench(tmp_path / "bench")
    shutil.copytree(finished.bench.folder, copy.folder)
    return copy
