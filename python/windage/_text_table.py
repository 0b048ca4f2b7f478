"""Tables as plain text that fits a terminal, and as HTML for notebooks."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

WIDTH = 80
#: The first column, which holds names, is never narrower than this.
NARROWEST = 12


def text_table(header: Sequence[str], rows: Sequence[Sequence[str]], width: int = WIDTH, indent: int = 2) -> list[str]:
    """Return the lines of a table whose first column wraps, so that no line is longer than `width`.

    Parameters
    ----------
    header : sequence of str
        Titles of the columns; the first is set to the left, the others to the right.
    rows : sequence of sequences of str
        Cells, as many a row as titles.
    width : int
        Longest line; only where the other columns leave the first one less than `NARROWEST` is it exceeded.
    indent : int
        Blanks before each line.
    """
    cells = [header, *rows]
    widths = [max(len(row[column]) for row in cells) for column in range(1, len(header))]
    rest = sum(widths) + 2 * len(widths)
    first = max(NARROWEST, width - indent - rest)
    broken = [wrapped_name(row[0], first) for row in cells]
    first = max(len(line) for lines in broken for line in lines)
    lines = []
    for row, (head, *tail) in zip(cells, broken, strict=True):
        right = "".join(f"  {cell:>{wide}}" for cell, wide in zip(row[1:], widths, strict=True))
        lines += [f"{head:<{first}}{right}", *(f"  {line}" for line in tail)]
    return [f"{'':{indent}}{line}".rstrip() for line in lines]


def plainly_grouped(count: int) -> str:
    """Write a count in groups of three digits, `10 000`, where no line can be broken inside it."""
    return f"{count:,}".replace(",", " ")


def wrapped_name(name: str, width: int) -> list[str]:
    """Break a name into lines; those after the first are to be indented by 2. Longer words are cut."""
    lines = textwrap.wrap(name, width - 2, break_on_hyphens=False)
    return lines or [""]


def html_table(header: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """Return a table in HTML."""
    import html  # costs import time and is seldom needed

    def line(cells: Sequence[str], tag: str) -> str:
        left, right = "style='text-align:left'", "style='text-align:right'"
        written = [f"<{tag} {right if i else left}>{html.escape(cell)}</{tag}>" for i, cell in enumerate(cells)]
        return f"<tr>{''.join(written)}</tr>"

    body = "".join(line(row, "td") for row in rows)
    return f"<table><thead>{line(header, 'th')}</thead><tbody>{body}</tbody></table>"
