"""Compiled kernels are kept apart by the sources of all kernels."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

from perdure.rheology.kernel_cache import VARIABLE, kernel_digest, kernel_files, use_kernel_cache

CALLEE = "import numba as nb\n\n\n@nb.njit(cache=True)\ndef inner(x):\n    return x + {step}.0\n"
CALLER = "import numba as nb\nfrom perdure.rheology.callee import inner\n\n\n@nb.njit(cache=True)\ndef outer(x):\n    return inner(x)\n"


@pytest.fixture
def package(tmp_path: Path) -> Path:
    """A package with a kernel that calls another file's, and the module under test."""
    folder = tmp_path / "src" / "perdure"
    (folder / "inference").mkdir(parents=True)
    (folder / "rheology").mkdir()
    own = Path(sys.modules[use_kernel_cache.__module__].__file__ or "")
    (folder / "__init__.py").write_text("", encoding="utf-8")
    (folder / "rheology" / "__init__.py").write_text((own.parent / "__init__.py").read_text(encoding="utf-8"), encoding="utf-8")
    (folder / "rheology" / own.name).write_text(own.read_text(encoding="utf-8"), encoding="utf-8")
    (folder / "rheology" / "callee.py").write_text(CALLEE.format(step=1), encoding="utf-8")
    (folder / "rheology" / "caller.py").write_text(CALLER, encoding="utf-8")
    return folder


def call(package: Path, cache: Path) -> float:
    """``outer(1.0)`` in a fresh process that keeps its kernels below ``cache``."""
    script = "from perdure.rheology.caller import outer; print(outer(1.0))"
    environment = os.environ | {"PYTHONPATH": str(package.parent), "XDG_CACHE_HOME": str(cache), VARIABLE: ""}
    done = subprocess.run([sys.executable, "-c", script], env=environment, capture_output=True, text=True, check=True)
    return float(done.stdout)


def test_edit_of_a_called_kernel_is_not_answered_from_the_cache(package: Path, tmp_path: Path) -> None:
    cache = tmp_path / "cache"
    assert call(package, cache) == 2.0
    (package / "rheology" / "callee.py").write_text(CALLEE.format(step=5), encoding="utf-8")
    assert call(package, cache) == 6.0
    folders = list((cache / "perdure").iterdir())
    assert len(folders) == 2
    assert all(any(folder.rglob("*.nbi")) for folder in folders)


@pytest.mark.parametrize("name", ["rheology/callee.py", "inference/new.py", "rheology/laws/new.py"])
def test_digest_changes_with_any_kernel_file(package: Path, name: str) -> None:
    before = kernel_digest(package)
    (package / name).parent.mkdir(exist_ok=True)
    (package / name).write_text("# edited\n", encoding="utf-8")
    assert kernel_digest(package) != before


def test_digest_is_blind_to_other_files(package: Path) -> None:
    before = kernel_digest(package)
    (package / "report.py").write_text("", encoding="utf-8")
    assert kernel_digest(package) == before


def test_real_kernels_are_covered() -> None:
    names = {path.name for path in kernel_files()}
    assert {"maxwell.py", "density.py"} <= names


@pytest.fixture
def without_numba(monkeypatch: pytest.MonkeyPatch) -> None:
    """As if numba were not imported yet: the other tests of this process keep their cache."""
    monkeypatch.delitem(sys.modules, "numba", raising=False)


@pytest.mark.usefixtures("without_numba")
def test_a_folder_that_is_already_set_is_the_parent_and_not_nested(package: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv(VARIABLE, str(tmp_path / "own"))
    first = use_kernel_cache(package)
    assert first.parent == tmp_path / "own"
    (package / "rheology" / "callee.py").write_text("# edited\n", encoding="utf-8")
    second = use_kernel_cache(package)
    assert second.parent == tmp_path / "own"
    assert second != first
    assert os.environ[VARIABLE] == str(second)


@pytest.mark.usefixtures("without_numba")
def test_user_cache_that_cannot_be_used_gives_way_to_the_temporary_folder(
    package: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    blocked = tmp_path / "file"
    blocked.write_text("", encoding="utf-8")
    monkeypatch.setenv(VARIABLE, "")
    monkeypatch.setenv("XDG_CACHE_HOME", str(blocked))
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path / "temporary"))
    assert use_kernel_cache(package).is_relative_to(tmp_path / "temporary")
