"""From the text of one equation to a checked syntax tree.

A scan over the tokens comes first (`_equation_scan`); then `ast.parse` reads the text and every node is
compared with a white list. Nothing is ever evaluated here, and nothing recurses.
"""

from __future__ import annotations

import ast
from collections.abc import Iterator
from dataclasses import dataclass

from ._equation_language import CONSTANTS, FUNCTIONS, Source
from ._equation_scan import scan
from ._errors import EquationError, suggestion

_ARITHMETIC = (ast.Add, ast.Sub, ast.Mult, ast.Div, ast.Pow)
_PREFIXES = (ast.UAdd, ast.USub, ast.Not)
_COMPARISONS = (ast.Lt, ast.LtE, ast.Gt, ast.GtE, ast.Eq, ast.NotEq)


@dataclass(frozen=True, slots=True)
class Formula:
    """One expression that passed every check of form.

    `nodes` lists the syntax tree in post-order: each node follows its operands, so a reader needs a stack of
    values and no recursion.
    """

    source: Source
    nodes: tuple[ast.expr, ...]

    def error(self, node: ast.expr, expected: str, mend: str = "") -> EquationError:
        """Describe what is wrong with one node."""
        return _node_error(self.source, node, expected, mend)

    def names(self) -> dict[str, None]:
        """Return the names that the expression reads, in order, without functions and constants."""
        read = (node.id for node in self.nodes if isinstance(node, ast.Name))
        return {name: None for name in read if name not in CONSTANTS}


def parse(text: object, field: str) -> Formula:
    """Check the form of an expression: everything except whether its names are known.

    Parameters
    ----------
    text : object
        The expression; anything but text is an error.
    field : str
        Name of the field, for messages.

    Raises
    ------
    EquationError
        If the text is not one expression of the language.
    """
    if not isinstance(text, str):
        raise EquationError(field, text, "an equation written as text", "Put the expression in quotes.")
    source = Source(text, field)
    scan(source)
    root = _read(source)
    return Formula(source, tuple(_post_order(source, root)))


def _read(source: Source) -> ast.expr:
    # White space becomes blanks and the whole stands in brackets: one line, whose columns are those of the
    # text plus one. The scan has let through only what the tokenizer reads without a warning.
    flat = source.text.translate({ord(c): " " for c in "\t\r\n"})
    end = len(flat)
    try:
        return ast.parse(f"({flat})", mode="eval").body
    except SyntaxError as error:
        start = min(max((error.offset or 2) - 2, 0), end - 1)
        mend = "A choice is written a if condition else b; 'not' after an operator needs brackets around it."
        raise source.error(start, end, "an expression that can be read from here on", mend) from None
    except (ValueError, RecursionError, MemoryError):
        mend = "Move parts of it to named expressions."
        raise source.error(0, end, "an expression short enough to be read", mend) from None


def operands(node: ast.expr) -> list[ast.expr]:
    """Return the operands of a node that passed the checks, in the order written."""
    if isinstance(node, ast.BinOp):
        return [node.left, node.right]
    if isinstance(node, ast.UnaryOp):
        return [node.operand]
    if isinstance(node, ast.BoolOp):
        return node.values
    if isinstance(node, ast.Compare):
        return [node.left, *node.comparators]
    if isinstance(node, ast.IfExp):
        return [node.body, node.test, node.orelse]
    if isinstance(node, ast.Call):
        return node.args
    return []


def _post_order(source: Source, root: ast.expr) -> Iterator[ast.expr]:
    pending: list[tuple[ast.expr, bool]] = [(root, False)]
    while pending:
        node, is_ready = pending.pop()
        if is_ready:
            yield node
            continue
        _check(source, node)
        pending.append((node, True))
        pending.extend((operand, False) for operand in reversed(operands(node)))


def _check(source: Source, node: ast.expr) -> None:
    """Compare one node with the white list."""
    if isinstance(node, ast.Call):
        _check_call(source, node)
        return
    if isinstance(node, ast.Name):
        if node.id in FUNCTIONS:
            mend = f"Write {FUNCTIONS[node.id][0]}."
            raise _node_error(source, node, "a value; this is the name of a function", mend)
        return
    allowed = (
        (isinstance(node, ast.BinOp) and isinstance(node.op, _ARITHMETIC))
        or (isinstance(node, ast.UnaryOp) and isinstance(node.op, _PREFIXES))
        or (isinstance(node, ast.Compare) and all(isinstance(op, _COMPARISONS) for op in node.ops))
        or isinstance(node, ast.BoolOp | ast.IfExp)
        or (isinstance(node, ast.Constant) and type(node.value) in (int, float))
    )
    if not allowed:
        raise _node_error(source, node, "numbers, names, operators and functions of the equation language")


def _check_call(source: Source, call: ast.Call) -> None:
    if not isinstance(call.func, ast.Name):
        raise _node_error(source, call, "the name of a function before the bracket", "Write * for a product.")
    name = call.func.id
    if name not in FUNCTIONS:
        mend = f"{suggestion(name, FUNCTIONS)} For a product write * before the bracket."
        raise _node_error(source, call.func, "the name of a function before a bracket", mend)
    signature, fewest, most = FUNCTIONS[name]
    plain = not call.keywords and not any(isinstance(argument, ast.Starred) for argument in call.args)
    if not plain or not fewest <= len(call.args) <= most:
        count = f"{fewest} or more" if most > fewest else str(fewest)
        noun = "argument" if count == "1" else "arguments"
        raise _node_error(source, call, f"{count} {noun}, written {signature}")


def _node_error(source: Source, node: ast.expr, expected: str, mend: str = "") -> EquationError:
    # Columns of the tree count the bracket put before the text.
    end = node.end_col_offset if node.end_col_offset is not None else len(source.text) + 1
    return source.error(node.col_offset - 1, end - 1, expected, mend)
