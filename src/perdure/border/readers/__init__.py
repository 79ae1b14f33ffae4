"""Readers of exports, one file each, listed in :data:`READERS`."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from perdure.border.readers.delimited import DELIMITED
from perdure.border.readers.reader import Reader

READERS: Mapping[str, Reader] = MappingProxyType({reader.name: reader for reader in (DELIMITED,)})
