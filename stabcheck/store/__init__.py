"""The run file: one SQLite file that holds what was asked and what came out."""

from stabcheck.store.rows import DrawColumn, DrawRow, Draws
from stabcheck.store.run_file import RunFile

__all__ = ["DrawColumn", "DrawRow", "Draws", "RunFile"]
