"""Tables as CSV (RFC 4180): made from the same Table that JSON answers hold."""

from __future__ import annotations

import csv
import io

from schemas.table import Table

RISKY = ("=", "+", "-", "@", "\t", "\r")
"""A text cell that starts so would be run as a formula by a spreadsheet."""


def to_csv(table: Table) -> str:
    """Return the table with one header row; a column's unit stands behind its name."""
    out = io.StringIO()
    writer = csv.writer(out)
    units = table.units
    writer.writerow(
        f"{name} [{units[name]}]" if units.get(name, "1") != "1" else name for name in table.columns
    )
    for row in zip(*table.columns.values(), strict=True):
        writer.writerow(_cell(value) for value in row)
    return out.getvalue()


def _cell(value: str | float | None) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return f"'{value}" if value.startswith(RISKY) else value
    return repr(value)
