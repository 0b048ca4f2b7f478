"""Text from outside, made safe to show.

A name comes out of a file that somebody else wrote, and goes to terminals, reports and plots. A character that
moves the cursor, turns the direction of writing or starts a line could make one verdict look like another.
Such a character is refused in a name and, as a last line of defence, escaped wherever text goes out.
"""

from __future__ import annotations

import itertools
import re
import reprlib

#: Longest name of anything.
LONGEST_NAME = 200

#: Letters and marks that show as nothing although Unicode counts them as printable: joiners and fillers of
#: scripts, variation selectors, blank Braille (property Default_Ignorable_Code_Point of Unicode 15, from memory).
_INVISIBLE = re.compile(
    "[\u034f\u115f\u1160\u17b4\u17b5\u180b-\u180f\u2800\u3164\ufe00-\ufe0f\uffa0\U000e0100-\U000e01ef]"
)
#: Items of a container that are looked at; the rest would not be shown anyway.
_MOST_ITEMS = 40


def hidden_character(text: str) -> str | None:
    """Return the first character that does not show as itself, or None.

    Those are control characters, line breaks, marks of direction, characters of no width, halves of pairs,
    unassigned characters and every blank except the plain one.
    """
    if text.isascii() and text.isprintable():
        return None
    return next((c for c in text if not c.isprintable() or _INVISIBLE.match(c)), None)


def one_line(text: str, limit: int | None = None) -> str:
    """Return a text whose every character shows as itself: others are escaped, and what is too long is cut."""
    if limit is not None and len(text) > limit:
        text = f"{text[: limit - 30]}... ({len(text)} characters)"
    if hidden_character(text) is None:
        return text
    return "".join(c if hidden_character(c) is None else _escape(c) for c in text)


def lines(text: str) -> str:
    """Return a text whose line breaks are kept and whose other hidden characters are escaped."""
    return "\n".join(one_line(line) for line in text.split("\n"))


def plot_text(name: str) -> str:
    """Return a text that Matplotlib shows as it is: no mathematics, and no label that a legend leaves out."""
    shown = lines(name).replace("$", r"\$")
    return f" {shown}" if shown.startswith("_") else shown


def shorten(value: object, limit: int = 80) -> str:
    """Show a value in one line of at most `limit` characters, however large it is and whatever it does.

    Parameters
    ----------
    value : object
        Anything; text longer than `limit` is cut before it is quoted.
    limit : int
        Largest number of characters shown.
    """
    if type(value) is str and len(value) > limit:
        # Quoting may make several characters of one.
        return f"{_cut(one_line(repr(value[: limit - 20])), limit + 10)}... ({len(value)} characters)"
    try:
        text = _Short().repr(value)[: 10 * limit]
        text = one_line(" ".join(text.split()) if "\n" in text else text)
    except Exception:  # whatever a foreign __repr__ raises
        text = f"<{type(value).__name__} that cannot be shown>"
    return _cut(text, limit)


class _Short(reprlib.Repr):
    """`repr` that does not look at more of a container than can be shown, nor at every digit of a number."""

    def __init__(self) -> None:
        super().__init__()
        self.maxlevel = 12
        self.maxlist = self.maxtuple = self.maxset = self.maxfrozenset = self.maxarray = self.maxdeque = _MOST_ITEMS
        self.maxdict = _MOST_ITEMS

    def repr_str(self, x: str, level: int) -> str:  # noqa: ARG002
        """Quote a text."""
        return repr(x[: _MOST_ITEMS * 10])

    def repr_int(self, x: int, level: int) -> str:  # noqa: ARG002
        """Write a whole number, of a very large one its size: Python refuses to write it."""
        return repr(x) if x.bit_length() < 1000 else f"a whole number of {x.bit_length()} bits"

    def repr_dict(self, x: dict[object, object], level: int) -> str:
        """Write a mapping in its own order, which the class above sorts."""
        if level <= 0:
            return "{...}"
        shown = [
            f"{self.repr1(k, level - 1)}: {self.repr1(v, level - 1)}"
            for k, v in itertools.islice(x.items(), _MOST_ITEMS)
        ]
        return "{" + ", ".join(shown + (["..."] if len(x) > _MOST_ITEMS else [])) + "}"

    def repr_instance(self, x: object, level: int) -> str:  # noqa: ARG002
        """Write anything else as it wishes."""
        return repr(x)


def _cut(text: str, limit: int) -> str:
    return text if len(text) <= limit else f"{text[: limit - 3]}..."


def _escape(character: str) -> str:
    code = ord(character)
    return f"\\x{code:02x}" if code < 0x100 else f"\\u{code:04x}" if code < 0x10000 else f"\\U{code:08x}"
