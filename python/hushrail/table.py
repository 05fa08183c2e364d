"""Plain-text tables that fit a terminal and lose nothing: long words wrap, wide tables split."""

from __future__ import annotations

import re
import textwrap
import unicodedata
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

__all__ = ["Column", "render", "width_of"]

GAP = "  "
GLUE = "\u00a0"
NUMBER_AND_UNIT = re.compile(r"(?<=\d) (?=[^\s\d]{1,2}(?: |$))")


@dataclass(frozen=True)
class Column:
    """A column: its title, and the side its cells lean to.

    Titles break at spaces to keep the column narrow, but not between a number and its unit.
    """

    title: str
    align: Literal["left", "right"] = "right"


def width_of(text: str) -> int:
    """Count the terminal columns a text takes: wide characters two, combining marks none."""
    return sum(
        0 if unicodedata.combining(c) else 2 if unicodedata.east_asian_width(c) in "WF" else 1 for c in text
    )


def render(columns: Sequence[Column], rows: Sequence[Sequence[str]], width: int, fixed: int = 1) -> str:
    """Lay out a table.

    Parameters
    ----------
    columns : sequence of Column, length C
        Titles and sides.
    rows : sequence of sequence of str, each of length C
        Cells.
    width : int
        Columns of the terminal; a table that is wider goes on below, its first ``fixed`` columns repeated.
    fixed : int
        Leading columns that stay.

    Returns
    -------
    str
        Lines without trailing spaces, no newline at the end.

    Examples
    --------
    >>> columns = [Column("scheme", "left"), Column("power in standby")]
    >>> print(render(columns, [["powered", "9.71 µW"], ["header", "1.29 nW"]], 80))
               power
                  in
    scheme   standby
    -------  -------
    powered  9.71 µW
    header   1.29 nW
    """
    heads: list[list[str]] = []
    body: list[list[list[str]]] = [[] for _ in rows]
    sizes: list[int] = []
    for i, column in enumerate(columns):
        # leading columns get two fifths of the width among them, others what is left beside those
        used = sum(sizes[:fixed]) + len(GAP) * fixed
        room = max(8, 2 * width // (5 * fixed) if i < fixed else width - used)
        cells = [_lines("".join(c if c.isprintable() else " " for c in row[i]), room) for row in rows]
        head = _title(column, [line for cell in cells for line in cell], room)
        for lines, cell in zip(body, cells, strict=True):
            lines.append(cell)
        heads.append(head)
        sizes.append(max(map(width_of, [*head, *(line for cell in cells for line in cell)]), default=0))
    parts = []
    for chosen in _split(sizes, width, fixed):
        shown = _row(columns, sizes, heads, chosen, from_below=True)
        shown.append(GAP.join("-" * sizes[i] for i in chosen))
        for row in body:
            shown += _row(columns, sizes, row, chosen)
        parts.append("\n".join(line.rstrip() for line in shown))
    return "\n\n".join(parts).replace(GLUE, " ")


def _title(column: Column, cells: Sequence[str], room: int) -> list[str]:
    """Break a title at spaces so that it is no wider than the cells below it need."""
    title = NUMBER_AND_UNIT.sub(GLUE, column.title)
    needed = max(map(width_of, [*cells, *title.split(" ")]))
    return _lines(title, max(min(needed, room), 1))


def _lines(text: str, room: int) -> list[str]:
    if width_of(text) <= room:
        return [text]
    if width_of(text) > len(text):
        room = max(1, room // 2)  # textwrap counts characters
    return textwrap.wrap(text, room, break_long_words=True, break_on_hyphens=False) or [""]


def _split(sizes: Sequence[int], width: int, fixed: int) -> list[list[int]]:
    """Column numbers of each part of the table."""
    lead = list(range(min(fixed, len(sizes))))
    used = sum(sizes[i] + len(GAP) for i in lead)
    parts: list[list[int]] = []
    room = -1
    for i in range(len(lead), len(sizes)):
        if not parts or room < sizes[i]:
            parts.append([*lead, i])
            room = width - used - sizes[i] - len(GAP)
        else:
            parts[-1].append(i)
            room -= sizes[i] + len(GAP)
    return parts or [lead]


def _row(
    columns: Sequence[Column],
    sizes: Sequence[int],
    cells: Sequence[Sequence[str]],
    chosen: Sequence[int],
    from_below: bool = False,
) -> list[str]:
    height = max(len(cells[i]) for i in chosen)
    lines = []
    for k in range(height):
        words = []
        for i in chosen:
            at = k - (height - len(cells[i])) if from_below else k
            text = cells[i][at] if 0 <= at < len(cells[i]) else ""
            space = " " * (sizes[i] - width_of(text))
            words.append(text + space if columns[i].align == "left" else space + text)
        lines.append(GAP.join(words))
    return lines
