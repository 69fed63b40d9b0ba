"""Results that go into a paper: one page to read, and tables for print and for machines."""

from ladderfit.report.cells import PaperTable, Quoted, quoted
from ladderfit.report.files import tables_of, write_tables
from ladderfit.report.write import write_report

__all__ = ["PaperTable", "Quoted", "quoted", "tables_of", "write_report", "write_tables"]
