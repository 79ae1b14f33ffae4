"""Problems as text for the terminal."""

from __future__ import annotations

from collections.abc import Iterable

from perdure.errors import Problem


def grouped(problems: Iterable[Problem]) -> str:
    """``problems`` under the file that each belongs to, files in order of first appearance, one block a problem."""
    by_file: dict[str, list[tuple[str, Problem]]] = {}
    for item in problems:
        file, _, place = item.where.partition(", ")
        by_file.setdefault(file, []).append((place, item))
    blocks = []
    for file, entries in by_file.items():
        count = "1 problem" if len(entries) == 1 else f"{len(entries)} problems"
        lines = [f"{file} ({count})"]
        for place, item in entries:
            lines.append(f"  {place or 'whole file'}")
            lines.append(f"    found     {item.got}")
            lines.append(f"    expected  {item.expected}")
            lines.append(f"    remedy    {item.remedy}")
        blocks.append("\n".join(lines))
    return "\n\n".join(blocks)
