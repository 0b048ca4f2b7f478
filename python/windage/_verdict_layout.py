"""How a verdict is laid out: lines that fit a terminal, and HTML for notebooks."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

from ._text_table import WIDTH


def wrapped(text: str, indent: int, first: str = "") -> list[str]:
    """Break a text into lines; those after the first are indented."""
    return textwrap.wrap(text, WIDTH, initial_indent=first, subsequent_indent=" " * indent, break_on_hyphens=False)


def labelled(label: str, text: str) -> list[str]:
    """Return the lines of a text behind its label."""
    return wrapped(text, indent=15, first=f"  {label:<13}")


def aligned(cells: Sequence[Sequence[str]]) -> list[str]:
    """Return the lines of a table."""
    widths = [max(len(row[column]) for row in cells) for column in range(len(cells[0]))]
    return [("  " + "  ".join(c.ljust(w) for c, w in zip(row, widths, strict=True))).rstrip() for row in cells]


def cautions_as_text(cautions: Sequence[str]) -> list[str]:
    """Return the lines of the cautions."""
    lines = ["Read with care:"]
    for caution in cautions:
        lines += wrapped(caution, indent=4, first="  - ")
    return lines


def plain(text: str) -> str:
    """Replace the no-break spaces, which have done their work once the lines are broken."""
    return text.replace("\u00a0", " ")


def finished(lines: Sequence[str]) -> str:
    """Join lines into a text."""
    return plain("\n".join(lines))


def html_of_rows(head: str, rows: Sequence[tuple[str, str]], cautions: Sequence[str]) -> str:
    """Return a headline, labelled lines and cautions in HTML."""
    left = "style='text-align:left'"
    body = "".join(f"<tr><th {left}>{_escaped(a)}</th><td {left}>{_escaped(b)}</td></tr>" for a, b in rows)
    return f"<div>{_strong(head)}<table>{body}</table>{_cautions_as_html(cautions)}</div>"


def html_of_table(head: str, cells: Sequence[Sequence[str]], cautions: Sequence[str]) -> str:
    """Return a headline, a table whose first row are its titles, and cautions in HTML."""

    def line(row: Sequence[str], tag: str) -> str:
        return "<tr>" + "".join(f"<{tag} style='text-align:left'>{_escaped(c)}</{tag}>" for c in row) + "</tr>"

    body = "".join(line(row, "td") for row in cells[1:])
    table = f"<table><thead>{line(cells[0], 'th')}</thead><tbody>{body}</tbody></table>"
    return f"<div>{_strong(head)}{table}{_cautions_as_html(cautions)}</div>"


def _strong(text: str) -> str:
    return f"<p><strong>{_escaped(text)}</strong></p>"


def _cautions_as_html(cautions: Sequence[str]) -> str:
    items = "".join(f"<li>{_escaped(line)}</li>" for line in cautions)
    return f"<p>Read with care:</p><ul>{items}</ul>"


def _escaped(text: str) -> str:
    import html  # costs import time and is seldom needed

    return html.escape(text, quote=True)
