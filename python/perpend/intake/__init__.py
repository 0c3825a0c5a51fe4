"""Rows as they come: delimited text, compressed or not, from a file or standard input, or Parquet."""

from perpend.intake.clock import Clock, Instant
from perpend.intake.layout import Layout, arrange
from perpend.intake.table import Row, Table, open_table

__all__ = ["Clock", "Instant", "Layout", "Row", "Table", "arrange", "open_table"]
