"""Where the parts that travel with the package are: from a checkout and from an installed wheel."""

from __future__ import annotations

from pathlib import Path

from perdure.errors import ResultError, problem

PARTS = ("workflow", "config")


def shipped(part: str) -> Path:
    """The folder ``part`` ("workflow" or "config").

    A wheel carries it inside the package as ``perdure/shipped/<part>``; a checkout has it at its top.

    Raises:
        ResultError: ``part`` is no shipped part, or the installation lacks it.
    """
    package = Path(__file__).resolve().parents[1]
    if part in PARTS:
        candidates = (package / "shipped" / part, package.parents[1] / part)
        for folder in candidates:
            if folder.is_dir():
                return folder
    raise ResultError(
        [problem("installed package", f'no folder "{part}"', f"one of {', '.join(PARTS)} beside the code", "Install perdure again.")]
    )
