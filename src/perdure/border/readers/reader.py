"""What a reader of exports is."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from perdure.border.instruments import Column, ReaderSettings

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, slots=True, eq=False)
class RawReadings:
    """Numbers as the export has them, in its own units.

    Attributes:
        values: by our word for what a column holds; shape (n,) each, NaN where a cell is blank.
        rows: line of the export behind each reading, 1 = first; shape (n,).
    """

    values: Mapping[str, Array]
    rows: Ints


class Reader(Protocol):
    """Reads one kind of export. One file each, listed in :data:`perdure.border.readers.READERS`."""

    @property
    def name(self) -> str:
        """Key in ``READERS`` and in ``study.yaml``."""
        ...

    @property
    def about(self) -> str:
        """One sentence for the manual."""
        ...

    def read(
        self,
        path: Path,
        label: str,
        columns: Mapping[str, Column],
        conditions: Sequence[tuple[str, str]],
        settings: ReaderSettings,
    ) -> RawReadings:
        """Read the ``columns`` of those rows of ``path`` that meet all ``conditions`` (column heading, value).

        Args:
            path: the export.
            label: how messages call it.
            columns: what to read, by our word for it.
            conditions: rows to take; all rows where empty.
            settings: how its text is to be read.

        Raises:
            StudyError: with every problem of the export.
        """
        ...
