"""Tables of numbers as machines, cameras and spreadsheets export them, in text or in a workbook."""

from dic.tables.reading import read_table
from dic.tables.table import Break, Table

__all__ = ["Break", "Table", "read_table"]
