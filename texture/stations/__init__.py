"""Any spreadsheet of grab samples → one clean table of stations, with an account of every row.

The way of the data: `files` (raw cells) → `tables` (where the table is) → `columns` (which role each column plays) →
`cells`, `positions`, `dates`, `fractions` (what the cells say) → `rows` (the fate of each row) → `repeats` → `account`.
"""

from texture.stations.account import Stations
from texture.stations.reading import read_samples
from texture.stations.writing import write_tables

__all__ = ["Stations", "read_samples", "write_tables"]
