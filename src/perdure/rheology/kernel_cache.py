"""Where compiled kernels are kept between processes.

Numba keys a cached function on its own file only: after an edit of a kernel that it calls in *another* file, the old machine code
would be used without a word. The cache folder is therefore named after a digest of all files that hold kernels.
"""

from __future__ import annotations

import hashlib
import os
import sys
import tempfile
from collections.abc import Iterable
from pathlib import Path

PACKAGE = Path(__file__).resolve().parent.parent
KERNEL_FOLDERS = ("rheology", "inference")
"""Folders of the package ``perdure`` that hold compiled functions."""

VARIABLE = "NUMBA_CACHE_DIR"


def kernel_files(package: Path = PACKAGE) -> tuple[Path, ...]:
    """All Python files below the kernel folders of ``package``, sorted."""
    return tuple(sorted(path for folder in KERNEL_FOLDERS for path in (package / folder).rglob("*.py")))


def kernel_digest(package: Path = PACKAGE) -> str:
    """Digest of names and contents of :func:`kernel_files`: sixteen hexadecimal digits."""
    digest = hashlib.sha256()
    for path in kernel_files(package):
        digest.update(path.relative_to(package).as_posix().encode())
        digest.update(hashlib.sha256(path.read_bytes()).digest())
    return digest.hexdigest()[:16]


def use_kernel_cache(package: Path = PACKAGE) -> Path:
    """Point numba's cache at a folder of the present kernels and return it; call it before numba is imported.

    An already set ``NUMBA_CACHE_DIR`` is kept as the parent, else the user's cache folder is (``XDG_CACHE_HOME`` where it is set),
    else, where that cannot be written, the folder for temporary files. Processes started from this one find the same folder.
    """
    leaf = f"kernels-{kernel_digest(package)}"
    set_before = os.environ.get(VARIABLE, "")
    if set_before and Path(set_before).name.startswith("kernels-"):
        parents = [Path(set_before).parent]
    elif set_before:
        parents = [Path(set_before)]
    else:
        parents = [_user_cache() / "perdure", Path(tempfile.gettempdir()) / f"perdure-{_user()}"]
    folder = _first_writable(parent / leaf for parent in parents)
    os.environ[VARIABLE] = str(folder)
    numba = sys.modules.get("numba")
    if numba is not None:
        # numba was imported by someone else and has read the variable already
        numba.config.CACHE_DIR = str(folder)
    return folder


def _first_writable(candidates: Iterable[Path]) -> Path:
    folder = Path()
    for folder in candidates:
        try:
            folder.mkdir(parents=True, exist_ok=True)
        except OSError:
            continue
        if os.access(folder, os.W_OK | os.X_OK):
            return folder
    # numba itself then says that it cannot write there
    return folder


def _user_cache() -> Path:
    named = os.environ.get("XDG_CACHE_HOME", "")
    if named and Path(named).is_absolute():
        return Path(named)
    try:
        return Path.home() / ".cache"
    except RuntimeError:
        return Path(tempfile.gettempdir())


def _user() -> str:
    return str(os.getuid()) if hasattr(os, "getuid") else os.environ.get("USERNAME", "user")
