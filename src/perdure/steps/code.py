"""Digest of the code that a step uses, so that an edit of it makes the step run again, and no other edit does."""

from __future__ import annotations

import ast
import hashlib
from functools import cache
from pathlib import Path

PACKAGE = Path(__file__).resolve().parent.parent
"""Folder of the package ``perdure``."""

WIRING = frozenset(f"perdure.steps.{name}" for name in ("runner", "plan", "chain", "code"))
"""Modules that carry a step without touching its numbers: an edit of them makes nothing run again."""

IGNORED = frozenset({".pyc", ".nbi", ".nbc"})
"""Endings of compiled files."""


@cache
def code_digest(step: str, package: Path = PACKAGE) -> str:
    """Digest of all files of ``perdure`` that the module ``perdure.steps.<step>`` imports, directly or not.

    Found by reading the sources, so that nothing is imported. Files that a package keeps beside its modules (templates, style
    sheets, tables) count with the package.
    """
    digest = hashlib.sha256()
    for path in sorted(_used(f"perdure.steps.{step}", package)):
        digest.update(path.relative_to(package).as_posix().encode())
        digest.update(hashlib.sha256(path.read_bytes()).digest())
    return digest.hexdigest()[:16]


@cache
def modules_of(step: str, package: Path = PACKAGE) -> tuple[str, ...]:
    """Paths, below ``package``, of the files behind :func:`code_digest`, sorted."""
    return tuple(sorted(path.relative_to(package).as_posix() for path in _used(f"perdure.steps.{step}", package)))


def _used(module: str, package: Path) -> set[Path]:
    found: set[Path] = set()
    waiting = [module]
    seen: set[str] = set()
    while waiting:
        name = waiting.pop()
        if name in seen or name in WIRING:
            continue
        seen.add(name)
        source = _source(name, package)
        if source is None:
            continue  # a name inside a module, as in "from perdure.errors import problem"
        found.add(source)
        if source.name == "__init__.py":
            found.update(_companions(source.parent, package))
        if "." in name:
            waiting.append(name.rpartition(".")[0])
        waiting.extend(_imports(source, name))
    return found


def _source(module: str, package: Path) -> Path | None:
    base = package.joinpath(*module.split(".")[1:])
    for path in (base / "__init__.py", base.with_name(base.name + ".py")):
        if path.is_file():
            return path
    return None


def _companions(folder: Path, package: Path) -> set[Path]:
    found: set[Path] = set()
    for path in folder.iterdir():
        if path.name.startswith("."):
            continue  # caches of tools
        if path.is_file() and path.suffix != ".py" and path.suffix not in IGNORED:
            found.add(path)
        elif path.is_dir() and folder != package and path.name != "__pycache__" and not (path / "__init__.py").is_file():
            found.update(inner for inner in path.rglob("*") if inner.is_file() and inner.suffix not in IGNORED)
    return found


@cache
def _imports(source: Path, module: str) -> tuple[str, ...]:
    names: list[str] = []
    is_package = source.name == "__init__.py"
    for node in ast.walk(ast.parse(source.read_bytes())):
        if isinstance(node, ast.Import):
            names.extend(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            origin = _origin(node, module, is_package=is_package)
            names.append(origin)
            names.extend(f"{origin}.{alias.name}" for alias in node.names)
    return tuple(name for name in names if name == "perdure" or name.startswith("perdure."))


def _origin(node: ast.ImportFrom, module: str, *, is_package: bool) -> str:
    if not node.level:
        return node.module or ""
    parents = module.split(".")
    base = parents[: len(parents) - node.level + (1 if is_package else 0)]
    return ".".join([*base, *([node.module] if node.module else [])])
