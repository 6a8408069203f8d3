"""Choose parts by id or by a small expression such as ``700 <= peak_nm <= 1000 and price < 12``.

The language has the field names of the part, numbers, text, lists, ``and or not``, comparisons (also
chained), ``in``, ``match(id, "nir-*")`` and ``has(tags, "white")``. It is parsed, never evaluated as
program code. A field the part does not state makes any comparison with it false.
"""

from __future__ import annotations

import ast
import operator
from collections.abc import Callable, Iterable, Mapping, Sequence
from fnmatch import fnmatchcase
from typing import Any, TypeVar

from codesign.catalog.common import Part
from codesign.errors import CatalogError, nearest

PartType = TypeVar("PartType", bound=Part)

COMPARISONS: Mapping[type[ast.cmpop], tuple[str, Callable[[Any, Any], bool]]] = {
    ast.Lt: ("<", operator.lt),
    ast.LtE: ("<=", operator.le),
    ast.Gt: (">", operator.gt),
    ast.GtE: (">=", operator.ge),
    ast.Eq: ("==", operator.eq),
    ast.NotEq: ("!=", operator.ne),
    ast.In: ("in", lambda a, b: a in b),
    ast.NotIn: ("not in", lambda a, b: a not in b),
}
ORDERINGS = (ast.Lt, ast.LtE, ast.Gt, ast.GtE)


def _has(values: Any, word: Any) -> bool:
    return values is not None and word in values


def _match(text: Any, pattern: Any) -> bool:
    return text is not None and fnmatchcase(str(text), str(pattern))


FUNCTIONS: Mapping[str, Callable[[Any, Any], bool]] = {"has": _has, "match": _match}


def select(
    parts: Mapping[str, PartType] | Iterable[PartType],
    expression: str | Sequence[str],
    *,
    allow_empty: bool = False,
) -> tuple[PartType, ...]:
    """Return the parts named or described, in catalogue order (a list: in its own order).

    Parameters
    ----------
    parts : mapping of id to part, or parts
        All of one kind.
    expression : str or list of str
        One id, ``"all"``, an expression, or a list of ids and patterns such as ``"nir-*"``.
    allow_empty : bool
        Whether choosing nothing is fine rather than an error.

    Raises
    ------
    CatalogError
        Unknown id or name with the nearest known one, a construct outside the language, or no part left.

    Examples
    --------
    >>> from codesign.catalog import load_catalog
    >>> leds = load_catalog("demo").leds
    >>> [led.id for led in select(leds, "peak_nm < 380")]
    ['uv-365-a']
    """
    pool = dict(parts) if isinstance(parts, Mapping) else {part.id: part for part in parts}
    chosen = _by_expression(pool, expression) if isinstance(expression, str) else _by_ids(pool, expression)
    if not chosen and not allow_empty:
        raise CatalogError(f"{expression!r} selects none of {len(pool)} {_noun(pool)}; loosen it")
    return chosen


def _noun(pool: Mapping[str, Part]) -> str:
    return f"{next(iter(pool.values())).table_name}s" if pool else "parts"


def _by_ids(pool: Mapping[str, PartType], names: Sequence[str]) -> tuple[PartType, ...]:
    chosen: dict[str, PartType] = {}
    for name in names:
        found = [known for known in pool if fnmatchcase(known, name)]
        if not found:
            raise CatalogError(f"no {_noun(pool).removesuffix('s')} {name!r}, {nearest(name, pool)}")
        chosen |= {known: pool[known] for known in found}
    return tuple(chosen.values())


def _by_expression(pool: Mapping[str, PartType], expression: str) -> tuple[PartType, ...]:
    text = expression.strip()
    if text in pool:
        return (pool[text],)
    if text in ("all", "*"):
        return tuple(pool.values())
    tree = _parse(text, pool)
    return tuple(part for part in pool.values() if _Evaluation(text, part.selectable()).test(tree))


def _parse(text: str, pool: Mapping[str, Part]) -> ast.expr:
    try:
        tree = ast.parse(text, mode="eval").body
    except (SyntaxError, ValueError) as error:
        where = f" at column {error.offset}" if isinstance(error, SyntaxError) and error.offset else ""
        raise CatalogError(
            f"selection {text!r}: cannot be read{where}; write e.g. '700 <= peak_nm <= 1000 and price < 12'"
        ) from None
    _check_names(text, tree, pool)
    return tree


def _check_names(text: str, tree: ast.expr, pool: Mapping[str, Part]) -> None:
    """Names are checked before any part is tried: a misspelt one must not hide behind ``and``."""
    known = set(next(iter(pool.values())).selectable()) if pool else None
    functions = {id(node.func) for node in ast.walk(tree) if isinstance(node, ast.Call)}
    for node in ast.walk(tree):
        if not isinstance(node, ast.Name):
            continue
        words = FUNCTIONS if id(node) in functions else known
        if words is not None and node.id not in words:
            raise CatalogError(f"selection {text!r}: unknown name {node.id!r}, {nearest(node.id, words)}")


class _Evaluation:
    """Truth of an expression for one part."""

    def __init__(self, text: str, fields: Mapping[str, Any]) -> None:
        self.text = text
        self.fields = fields

    def test(self, node: ast.expr) -> bool:
        """Return the truth of a condition."""
        if isinstance(node, ast.BoolOp):
            combine = all if isinstance(node.op, ast.And) else any
            return combine(self.test(value) for value in node.values)
        if isinstance(node, ast.UnaryOp) and isinstance(node.op, ast.Not):
            return not self.test(node.operand)
        if isinstance(node, ast.Compare):
            return self._compare(node)
        if isinstance(node, ast.Call):
            return self._call(node)
        value = self.value(node)
        if value is None or isinstance(value, bool):
            return bool(value)
        raise self._error(node, "is not a condition; compare it with something")

    def value(self, node: ast.expr) -> Any:
        """Return the value of a field or literal."""
        if isinstance(node, ast.Name):
            found = self.fields[node.id]
            return found() if callable(found) else found
        if isinstance(node, ast.Constant) and isinstance(node.value, str | int | float):
            return node.value
        if isinstance(node, ast.UnaryOp) and isinstance(node.op, ast.USub):
            inner = self.value(node.operand)
            if isinstance(inner, int | float):
                return -inner
        if isinstance(node, ast.List | ast.Tuple):
            return tuple(self.value(item) for item in node.elts)
        raise self._error(node, "is outside the selection language; use names, numbers, text, lists, comparisons")

    def _compare(self, node: ast.Compare) -> bool:
        values = [self.value(item) for item in (node.left, *node.comparators)]
        steps = zip(node.ops, values, values[1:], strict=False)
        return all(self._holds(node, step, left, right) for step, left, right in steps)

    def _holds(self, node: ast.Compare, step: ast.cmpop, left: Any, right: Any) -> bool:
        if type(step) not in COMPARISONS:
            raise self._error(node, "uses a comparison outside the selection language; use < <= == != in")
        if left is None or right is None:
            return False
        sign, compare = COMPARISONS[type(step)]
        if isinstance(step, ORDERINGS) and isinstance(left, str) != isinstance(right, str):
            raise self._error(node, f"compares {left!r} {sign} {right!r}; compare text with text, numbers with numbers")
        try:
            return bool(compare(left, right))
        except TypeError:
            raise self._error(node, f"cannot compare {left!r} {sign} {right!r}; check the types") from None

    def _call(self, node: ast.Call) -> bool:
        if not isinstance(node.func, ast.Name) or len(node.args) != 2 or node.keywords:
            raise self._error(node, 'must be match(id, "nir-*") or has(tags, "white")')
        try:
            return FUNCTIONS[node.func.id](*(self.value(item) for item in node.args))
        except TypeError:
            raise self._error(node, "looks for a word in something that holds none; use has(tags, ...)") from None

    def _error(self, node: ast.expr, text: str) -> CatalogError:
        return CatalogError(f"selection {self.text!r}: {ast.unparse(node)!r} {text}")
