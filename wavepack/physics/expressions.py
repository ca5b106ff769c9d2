"""The expressions of a scenario: arithmetic in x, y, t, and nothing else.

A text is parsed, every node of its tree is held against a short list, and the
tree is then walked; no text is ever executed. Numbers are doubles throughout,
comparisons and logic give 1 and 0.
"""

import ast
import difflib
import keyword
import math
import unicodedata
import warnings
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any, Final

import numpy as np

from wavepack.arrays import RealArray

#: Longest text, deepest nesting, most nodes, largest exponent written as a number.
LONGEST: Final = 2000
DEEPEST: Final = 50
MOST_NODES: Final = 1000
LARGEST_EXPONENT: Final = 1000.0

_CHARACTERS: Final = frozenset(
    "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789_ .,()+-*/<>=!"
)
_CONSTANTS: Final[Mapping[str, float]] = {"pi": math.pi}


class ExpressionError(ValueError):
    """A text that is no expression; ``column`` counts from 1."""

    def __init__(self, message: str, column: int) -> None:
        self.column = column
        super().__init__(f"column {column}: {message}")


def _erf(x: RealArray) -> RealArray:
    from scipy.special import erf  # noqa: PLC0415 - slow to import, needed here alone

    return np.asarray(erf(x))


def _erfc(x: RealArray) -> RealArray:
    from scipy.special import erfc  # noqa: PLC0415 - slow to import, needed here alone

    return np.asarray(erfc(x))


def _where(condition: RealArray, yes: RealArray, no: RealArray) -> RealArray:
    return np.where(condition != 0, yes, no)


#: Every function, with how many numbers it takes.
_FUNCTIONS: Final[Mapping[str, tuple[int, Callable[..., Any]]]] = {
    "where": (3, _where),
    "sqrt": (1, np.sqrt),
    "cbrt": (1, np.cbrt),
    "exp": (1, np.exp),
    "expm1": (1, np.expm1),
    "log": (1, np.log),
    "log1p": (1, np.log1p),
    "log2": (1, np.log2),
    "log10": (1, np.log10),
    "sin": (1, np.sin),
    "cos": (1, np.cos),
    "tan": (1, np.tan),
    "asin": (1, np.arcsin),
    "acos": (1, np.arccos),
    "atan": (1, np.arctan),
    "arcsin": (1, np.arcsin),
    "arccos": (1, np.arccos),
    "arctan": (1, np.arctan),
    "sinh": (1, np.sinh),
    "cosh": (1, np.cosh),
    "tanh": (1, np.tanh),
    "asinh": (1, np.arcsinh),
    "acosh": (1, np.arccosh),
    "atanh": (1, np.arctanh),
    "arcsinh": (1, np.arcsinh),
    "arccosh": (1, np.arccosh),
    "arctanh": (1, np.arctanh),
    "abs": (1, np.abs),
    "sign": (1, np.sign),
    "floor": (1, np.floor),
    "ceil": (1, np.ceil),
    "round": (1, np.rint),
    "erf": (1, _erf),
    "erfc": (1, _erfc),
    "min": (2, np.minimum),
    "max": (2, np.maximum),
    "atan2": (2, np.arctan2),
    "arctan2": (2, np.arctan2),
    "hypot": (2, np.hypot),
}
#: Names of the functions, in the order of the reference page.
FUNCTIONS: Final = tuple(_FUNCTIONS)

#: Functions that jump.
_JUMPING: Final = frozenset({"where", "sign", "floor", "ceil", "round"})

_OPERATIONS: Final[Mapping[type[ast.operator], Callable[..., Any]]] = {
    ast.Add: lambda a, b: a + b,
    ast.Sub: lambda a, b: a - b,
    ast.Mult: lambda a, b: a * b,
    ast.Div: lambda a, b: a / b,
    ast.Pow: lambda a, b: a**b,
}
_COMPARISONS: Final[Mapping[type[ast.cmpop], Callable[..., Any]]] = {
    ast.Lt: lambda a, b: a < b,
    ast.LtE: lambda a, b: a <= b,
    ast.Gt: lambda a, b: a > b,
    ast.GtE: lambda a, b: a >= b,
    ast.Eq: lambda a, b: a == b,
    ast.NotEq: lambda a, b: a != b,
}
_SIGNS: Final[Mapping[type[ast.unaryop], Callable[..., Any]]] = {
    ast.UAdd: lambda a: a,
    ast.USub: lambda a: -a,
    ast.Not: lambda a: a == 0,
}
#: What stands for nodes that are refused, and what to write instead.
_REFUSED: Final[Mapping[type[ast.AST], str]] = {
    ast.Attribute: "a dot after a name",
    ast.Subscript: "brackets",
    ast.IfExp: "if and else; write where(condition, yes, no)",
    ast.Lambda: "lambda",
    ast.Tuple: "a list of values",
    ast.Starred: "a star before a name",
    ast.GeneratorExp: "for",
    ast.FloorDiv: "//",
    ast.NamedExpr: ":=",
    ast.In: "in",
    ast.NotIn: "not in",
    ast.Is: "is",
    ast.IsNot: "is not",
}
_ALLOWED: Final = (
    "numbers, names, + - * / **, comparisons, and, or, not, where(c, a, b) and functions"
)


#: Names that a parameter cannot take.
RESERVED: Final = frozenset({*_FUNCTIONS, *_CONSTANTS, "x", "y", "t", *keyword.kwlist})


@dataclass(frozen=True)
class Expression:
    """A checked expression; make one with `compile_expression`.

    Attributes
    ----------
    text : str
        As written.
    parameters : tuple of (name, value)
        The parameters it uses.
    names : frozenset of str
        The variables it uses.
    """

    text: str
    parameters: tuple[tuple[str, float], ...] = ()
    names: frozenset[str] = field(default=frozenset(), compare=False)

    def __str__(self) -> str:
        return self.text

    @cached_property
    def _tree(self) -> ast.expr:
        return _parsed(self.text)

    @cached_property
    def _constants(self) -> dict[str, RealArray]:
        values = dict(_CONSTANTS) | dict(self.parameters)
        return {name: np.asarray(value) for name, value in values.items()}

    @cached_property
    def sharp(self) -> bool:
        """Whether it may jump: it holds a comparison, logic or a function that jumps."""
        return any(
            isinstance(node, ast.Compare | ast.BoolOp | ast.Not)
            or (isinstance(node, ast.Call) and _called(node) in _JUMPING)
            for node in ast.walk(self._tree)
        )

    @property
    def logical(self) -> bool:
        """Whether it is a condition: a comparison, or conditions joined or denied."""
        match self._tree:
            case ast.Compare() | ast.BoolOp() | ast.UnaryOp(op=ast.Not()):
                return True
        return False

    def evaluate(self, **variables: RealArray | float) -> RealArray:
        """Return its value where the variables have the given values.

        Parameters
        ----------
        **variables : float or real array
            At least those in `names`; they broadcast against each other.

        Returns
        -------
        real array
            Of no more dimensions than the variables it uses; not finite where
            the expression has no value. A condition gives 1 or 0.

        Raises
        ------
        KeyError
            If a variable it uses is missing.
        """
        values = {name: np.asarray(variables[name], dtype=float) for name in self.names}
        with np.errstate(all="ignore"):
            return np.asarray(_value(self._tree, values | self._constants), dtype=float)


def compile_expression(
    text: str,
    variables: tuple[str, ...] = ("x", "y", "t"),
    parameters: Mapping[str, float] | None = None,
) -> Expression:
    """Check a text and return its expression.

    Parameters
    ----------
    text : str
        What the user wrote.
    variables : tuple of str
        Names that get their value at each evaluation.
    parameters : mapping of name to float
        Names whose value is fixed here.

    Raises
    ------
    ExpressionError
        If it holds anything but the allowed, is too long, too deep or too large.
    """
    given = parameters or {}
    tree = _parsed(text)
    known = (*variables, *given, *_CONSTANTS)
    used = set()
    for number, node in enumerate(ast.walk(tree)):
        if number >= MOST_NODES:
            raise ExpressionError(f"need at most {MOST_NODES} parts, got more", 1)
        _check(node)
    for name in _names(tree):
        if name.id not in known:
            raise ExpressionError(_unknown_name(name.id, known), name.col_offset + 1)
        used.add(name.id)
    fixed = tuple((name, float(given[name])) for name in sorted(used & given.keys()))
    return Expression(text, fixed, frozenset(used & set(variables)))


def _parsed(text: str) -> ast.expr:
    """Return the tree of a text, its characters and nesting checked first."""
    if len(text) > LONGEST:
        raise ExpressionError(f"need at most {LONGEST} characters, got {len(text)}", LONGEST + 1)
    # Lines of a long expression are joined; each character keeps its column.
    line = "".join(" " if character in "\t\r\n" else character for character in text)
    _check_characters(line)
    shift = len(line) - len(line.lstrip(" "))
    if shift == len(line):
        raise ExpressionError("need an expression, got nothing", 1)
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # "1if x" only warns; it is refused below
            tree = ast.parse(line[shift:], mode="eval").body
    except SyntaxError as error:
        # Offset 0 stands for the end of the text.
        column = min(shift + error.offset if error.offset else len(line), len(line))
        raise ExpressionError(f"need an expression, {_complaint(line, column)}", column) from None
    except (ValueError, MemoryError, RecursionError):
        raise ExpressionError("need an expression less long or deep", shift + 1) from None
    if _depth(tree) > DEEPEST:
        raise ExpressionError(f"need at most {DEEPEST} levels of nesting, got more", shift + 1)
    for node in ast.walk(tree):
        if isinstance(node, ast.expr):
            node.col_offset += shift
    return tree


def _check_characters(line: str) -> None:
    open_at: list[int] = []
    for column, character in enumerate(line, start=1):
        if character not in _CHARACTERS:
            raise ExpressionError(_strange(character), column)
        if character == "(":
            open_at.append(column)
        elif character == ")":
            if not open_at:
                raise ExpressionError("found ) without a (", column)
            open_at.pop()
        if len(open_at) > DEEPEST:
            raise ExpressionError(f"need at most {DEEPEST} levels of parentheses, got more", column)
    if open_at:
        raise ExpressionError("the ( here is never closed: a ) is missing", open_at[-1])


def _strange(character: str) -> str:
    if character == "^":
        return "found ^; write ** for a power"
    if character in "&|~":
        return f"found {character}; write and, or, not"
    if character in "'\"":
        return f"found a text in quotes; allowed are {_ALLOWED}"
    if character.isascii() and character.isprintable():
        return f"found {character}; allowed are {_ALLOWED}"
    name = unicodedata.name(character, "unnamed").lower()
    return f"found U+{ord(character):04X} ({name}); need plain letters, digits and operators"


def _complaint(line: str, column: int) -> str:
    if line[:column].rstrip() == line.rstrip():
        return f"got {line.strip()[-20:]!r} and no more"
    rest = line[column - 1 : column + 19].strip()
    hint = "; write == to compare" if rest.startswith("=") else ""
    return f"got {rest!r}{hint}"


def _depth(tree: ast.AST) -> int:
    """Return the levels of a tree, one level of it at a time."""
    depth, level = 0, [tree]
    while level:
        depth += 1
        level = [
            child for node in level for child in ast.iter_child_nodes(node)
            if isinstance(child, ast.expr)
        ]  # fmt: skip
    return depth


def _check(node: ast.AST) -> None:
    """Hold one node of a tree against the list of what is allowed."""
    match node:
        case ast.Constant():
            _check_number(node)
        case ast.BinOp():
            _check_operator(node.op, _OPERATIONS, node)
            if isinstance(node.op, ast.Pow):
                _check_exponent(node.right)
        case ast.UnaryOp():
            _check_operator(node.op, _SIGNS, node)
        case ast.Compare():
            for operator in node.ops:
                _check_operator(operator, _COMPARISONS, node)
        case ast.Call():
            _check_call(node)
        case ast.BoolOp() | ast.Name():
            pass
        case ast.expr():
            raise _refusal(node, node)


def _check_operator(operator: ast.AST, known: Mapping[Any, Any], node: ast.expr) -> None:
    if type(operator) not in known:
        raise _refusal(operator, node)


def _refusal(node: ast.AST, place: ast.expr) -> ExpressionError:
    found = _REFUSED.get(type(node), type(node).__name__)
    return ExpressionError(f"found {found}; allowed are {_ALLOWED}", place.col_offset + 1)


def _check_number(node: ast.Constant) -> None:
    if isinstance(node.value, bool) or not isinstance(node.value, int | float):
        found = f"found {node.value!r}" if len(repr(node.value)) < 40 else "found a constant"
        raise ExpressionError(f"{found}; allowed are {_ALLOWED}", node.col_offset + 1)
    if not math.isfinite(_number(node)):
        raise ExpressionError("need a number below 1.8e308", node.col_offset + 1)


def _number(node: ast.Constant) -> float:
    try:
        return float(node.value)  # type: ignore[arg-type]  # `_check_number` saw to it
    except OverflowError:
        return math.inf


def _check_exponent(node: ast.expr) -> None:
    inner = node
    while isinstance(inner, ast.UnaryOp):
        inner = inner.operand
    if isinstance(inner, ast.Constant) and isinstance(inner.value, int | float):
        size = _number(inner)
        if size > LARGEST_EXPONENT:
            message = f"need an exponent of at most {LARGEST_EXPONENT:g}, got {size:g}"
            raise ExpressionError(message, inner.col_offset + 1)


def _check_call(node: ast.Call) -> None:
    column = node.col_offset + 1
    if not isinstance(node.func, ast.Name):
        message = f"need the name of a function before (; allowed are {_ALLOWED}"
        raise ExpressionError(message, column)
    name = node.func.id
    if name not in _FUNCTIONS:
        raise ExpressionError(f"no function {name}{_nearest(name, _FUNCTIONS)}", column)
    if node.keywords:
        raise ExpressionError(f"need plain values in {name}(), found a = sign or **", column)
    wanted = _FUNCTIONS[name][0]
    if len(node.args) != wanted:
        values = "value" if wanted == 1 else "values"
        message = f"need {wanted} {values} in {name}(), got {len(node.args)}"
        raise ExpressionError(message, column)


def _called(node: ast.Call) -> str:
    return node.func.id if isinstance(node.func, ast.Name) else ""


def _names(tree: ast.expr) -> Iterator[ast.Name]:
    """Yield every name that stands for a number."""
    functions = {id(node.func) for node in ast.walk(tree) if isinstance(node, ast.Call)}
    for node in ast.walk(tree):
        if isinstance(node, ast.Name) and id(node) not in functions:
            yield node


def _unknown_name(name: str, known: tuple[str, ...]) -> str:
    if name in _FUNCTIONS:
        return f"need values in parentheses after the function {name}"
    return f"no name {name}{_nearest(name, known)}"


def _nearest(name: str, known: tuple[str, ...] | Mapping[str, Any]) -> str:
    near = difflib.get_close_matches(name, known, n=1)
    if near:
        return f"; the nearest known is {near[0]}"
    return f"; known: {', '.join(known)}"


def _value(node: ast.expr, values: Mapping[str, RealArray]) -> Any:  # noqa: ANN401, PLR0911 - one case a node
    """Return the value of a checked node, a number or an array."""
    match node:
        case ast.Constant():
            return np.float64(_number(node))
        case ast.Name():
            return values[node.id]
        case ast.UnaryOp():
            return _as_number(_SIGNS[type(node.op)](_value(node.operand, values)))
        case ast.BinOp():
            operate = _OPERATIONS[type(node.op)]
            return operate(_value(node.left, values), _value(node.right, values))
        case ast.BoolOp():
            parts = [_value(part, values) != 0 for part in node.values]
            joined = np.logical_and if isinstance(node.op, ast.And) else np.logical_or
            return _as_number(_joined(joined, parts))
        case ast.Compare():
            terms = [_value(term, values) for term in (node.left, *node.comparators)]
            pairs = zip(node.ops, terms[:-1], terms[1:], strict=True)
            return _as_number(
                _joined(np.logical_and, [_COMPARISONS[type(op)](a, b) for op, a, b in pairs])
            )
        case ast.Call():
            function = _FUNCTIONS[_called(node)][1]
            return function(*(_value(argument, values) for argument in node.args))
    raise TypeError(f"unchecked node {type(node).__name__}")


def _joined(join: Callable[..., Any], parts: list[Any]) -> Any:  # noqa: ANN401 - number, array
    joined = parts[0]
    for part in parts[1:]:
        joined = join(joined, part)
    return joined


def _as_number(value: Any) -> Any:  # noqa: ANN401 - number, array
    """Return a condition as 1 and 0."""
    return np.asarray(value, dtype=float)
