"""Any delimited table: columns by name, units, separators, decimal comma, times with their zone, in blocks of arrays."""

from __future__ import annotations

from ingest.tables.error import CellRemark, TableError
from ingest.tables.layout import Hints, Layout
from ingest.tables.reading import read, whole
from ingest.tables.table import Chunk, Table

__all__ = ["CellRemark", "Chunk", "Hints", "Layout", "Table", "TableError", "read", "whole"]
