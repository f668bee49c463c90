"""Tables as aligned text."""

from __future__ import annotations

from collections.abc import Sequence


def aligned(heading: str, columns: Sequence[str], rows: Sequence[Sequence[str]], left: Sequence[str] = ()) -> str:
    """A heading, the names of the columns and the rows; the first column and those of `left` begin at their left."""
    widths = [max(len(row[at]) for row in (columns, *rows)) for at in range(len(columns))]

    def line(cells: Sequence[str]) -> str:
        return "  ".join(
            cell.ljust(width) if name in (columns[0], *left) else cell.rjust(width)
            for name, cell, width in zip(columns, cells, widths, strict=True)
        ).rstrip()

    rule = "  ".join("-" * width for width in widths)
    return "\n".join(["", heading, line(columns), rule, *map(line, rows)])


def duration(seconds: float) -> str:
    """Seconds to three digits."""
    if seconds < 1e-3:
        return f"{seconds * 1e6:.3g} µs"
    return f"{seconds * 1e3:.3g} ms" if seconds < 1.0 else f"{seconds:.3g} s"


def megabytes(size: float) -> str:
    """Bytes in megabytes."""
    return f"{size / 1e6:,.1f}" if size < 1e7 else f"{size / 1e6:,.0f}"
