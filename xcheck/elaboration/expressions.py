"""Expressions of parameters and behavioural sources: text to a tree, a tree to a value or to a linear form.

Operators and their order are those of the ngspice manual's chapters on `.param` and on B sources, checked
against ngspice itself. The two are two languages with different functions: in parameters, `pow` knows signs and
`1mil` is a thousandth; in sources, `pwr` knows signs, and braces and quotes within are as good as blanks.
Nothing recurses deeper than DEEPEST, so no expression can exhaust the stack.
"""

import math
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from xcheck.circuit.trees import Binary, Call, Choice, Constant, Name, Node, Unary
from xcheck.deck.numbers import read_number

DEEPEST = 60
"""Nesting of parentheses, signs and functions; an engineer's expression stays far below."""


class ExpressionError(Exception):
    """What is wrong with an expression, and the half-open range of offsets where it is; unknown: the name of a
    parameter, function: of a function, that nobody defines."""

    def __init__(self, message: str, start: int = 0, end: int = 0, unknown: str = "", function: str = "") -> None:
        super().__init__(message)
        self.start, self.end, self.unknown, self.function = start, end, unknown, function


_TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?[^\W\d_]*)"
    r"|(?P<name>[a-zA-Z_$\\][\w.$#\[\]\\]*)"
    r"|(?P<operator>\*\*|==|!=|<>|<=|>=|&&|\|\||[-+*/^%<>=!&|?:(),~]))"
)
_ORDER = (
    ("||", "|"),
    ("&&", "&"),
    ("==", "!=", "<>", "="),
    ("<", ">", "<=", ">="),
    ("+", "-"),
    ("*", "/", "%"),
)
_PROBE = re.compile(r"\s*\(([^()]*)\)")


@dataclass(frozen=True, slots=True)
class Token:
    kind: str
    text: str
    start: int
    end: int


def tokens_of(text: str) -> list[Token]:
    """Tokens of an expression, an end token last. Raises ExpressionError at a character of no meaning."""
    found: list[Token] = []
    position = 0
    while True:
        match = _TOKEN.match(text, position)
        if match is None:
            rest = text[position:].strip()
            if rest:
                at = position + len(text[position:]) - len(text[position:].lstrip())
                raise ExpressionError(f"`{rest[0]}` has no meaning here", at, at + 1)
            break
        kind = match.lastgroup or ""
        start = match.start(kind)
        position = match.end()
        word = match.group(kind).lower()
        found.append(Token(kind, word, start, position))
        if kind == "name" and word in ("v", "i") and (probe := _PROBE.match(text, position)):
            found[-1] = Token("probe", f"{word} {probe.group(1).strip().lower()}", start, probe.end())
            position = probe.end()
    found.append(Token("end", "", len(text), len(text)))
    return found


def parse(text: str, *, source: bool = False) -> Node:
    """The tree of an expression, of a parameter or of a source. Raises ExpressionError."""
    if source:
        text = re.sub("[{}']", " ", text)
    parser = _Parser(tokens_of(text), source=source)
    try:
        tree = parser.choice()
    except RecursionError:
        raise ExpressionError(f"nested deeper than {DEEPEST}") from None
    rest = parser.peek()
    if rest.kind != "end":
        raise ExpressionError(f"`{rest.text}` was not expected", rest.start, rest.end)
    return tree


class _Parser:
    def __init__(self, tokens: list[Token], *, source: bool) -> None:
        self.tokens = tokens
        self.source = source
        self.position = 0
        self.depth = 0

    def peek(self) -> Token:
        return self.tokens[self.position]

    def take(self, *operators: str) -> Token | None:
        token = self.peek()
        if token.kind == "operator" and token.text in operators:
            self.position += 1
            return token
        return None

    def expect(self, operator: str) -> Token:
        token = self.take(operator)
        if token is None:
            seen = self.peek()
            raise ExpressionError(f"expected `{operator}`, read `{seen.text or 'the end'}`", seen.start, seen.end)
        return token

    def deeper(self) -> None:
        self.depth += 1
        if self.depth > DEEPEST:
            token = self.peek()
            raise ExpressionError(f"nested deeper than {DEEPEST}", token.start, token.end)

    def choice(self) -> Node:
        self.deeper()
        condition = self.binary(0)
        if self.take("?"):
            yes = self.choice()
            self.expect(":")
            condition = Choice(condition, yes, self.choice())
        self.depth -= 1
        return condition

    def binary(self, level: int) -> Node:
        if level == len(_ORDER):
            return self.unary()
        left = self.binary(level + 1)
        while operator := self.take(*_ORDER[level]):
            left = Binary(operator.text, left, self.binary(level + 1))
        return left

    def unary(self) -> Node:
        operator = self.take("-", "+", "!", "~")
        if operator is None:
            return self.power()
        self.deeper()
        operand = self.unary()
        self.depth -= 1
        return operand if operator.text == "+" else Unary(operator.text, operand)

    def power(self) -> Node:
        base = self.primary()
        while self.take("**", "^"):
            sign = self.take("-", "+")
            exponent = self.primary()
            if sign and sign.text == "-":
                exponent = Unary("-", exponent)
            base = Binary("**", base, exponent)
        return base

    def primary(self) -> Node:
        token = self.peek()
        if token.kind == "number":
            self.position += 1
            return Constant(_number(token, source=self.source))
        if token.kind == "probe":
            self.position += 1
            kind, _, inside = token.text.partition(" ")
            nodes = tuple(word for word in re.split(r"[\s,]+", inside) if word)
            if not 1 <= len(nodes) <= (2 if kind == "v" else 1):
                raise ExpressionError(f"`{kind}({inside})` names no voltage or current", token.start, token.end)
            return Call(kind, (), nodes, token.start, token.end)
        if token.kind == "name":
            self.position += 1
            if not self.take("("):
                return Name(token.text, token.start, token.end)
            arguments: list[Node] = []
            if not self.take(")"):
                arguments.append(self.choice())
                while self.take(","):
                    arguments.append(self.choice())
                self.expect(")")
            return Call(token.text, tuple(arguments), (), token.start, self.tokens[self.position - 1].end)
        if self.take("("):
            inside_tree = self.choice()
            self.expect(")")
            return inside_tree
        raise ExpressionError(
            f"expected a number, a name or `(`, read `{token.text or 'the end'}`", token.start, token.end
        )


def _number(token: Token, *, source: bool) -> float:
    number = read_number(token.text)
    if number is None:
        raise ExpressionError(f"`{token.text}` is no number", token.start, token.end)
    if any(c.isdigit() for c in number.rest):
        raise ExpressionError(
            f"`{token.text}`: a digit after the scale factor; ngspice refuses it here", token.start, token.end
        )
    if number.scale.lower() == "mil" and not source:
        return float(number.digits) * 1e-3
    return number.value


def _power(a: float, b: float) -> float:
    """`a**b`, of the base's size whatever its sign (seen on ngspice 39)."""
    return float(abs(a) ** b)


_BOTH: Mapping[str, tuple[int, int, Callable[..., float]]] = {
    "sqrt": (1, 1, math.sqrt), "abs": (1, 1, abs), "exp": (1, 1, math.exp), "ln": (1, 1, math.log),
    "log": (1, 1, math.log), "log10": (1, 1, math.log10), "sin": (1, 1, math.sin), "cos": (1, 1, math.cos),
    "tan": (1, 1, math.tan), "asin": (1, 1, math.asin), "acos": (1, 1, math.acos), "atan": (1, 1, math.atan),
    "sinh": (1, 1, math.sinh), "cosh": (1, 1, math.cosh), "tanh": (1, 1, math.tanh),
    "asinh": (1, 1, math.asinh), "acosh": (1, 1, math.acosh), "atanh": (1, 1, math.atanh),
    "min": (2, 2, min), "max": (2, 2, max), "nint": (1, 1, lambda a: float(round(a))),
    "floor": (1, 1, lambda a: float(math.floor(a))), "ceil": (1, 1, lambda a: float(math.ceil(a))),
    "sgn": (1, 1, lambda a: float((a > 0) - (a < 0))), "ternary_fcn": (3, 3, lambda c, a, b: a if c else b),
}  # fmt: skip
FUNCTIONS: Mapping[str, tuple[int, int, Callable[..., float]]] = {
    **_BOTH, "arctan": (1, 1, math.atan), "int": (1, 1, lambda a: float(math.trunc(a))), "sqr": (1, 1, lambda a: a * a),
    "pow": (2, 2, lambda a, b: a**b), "pwr": (2, 2, _power),
}  # fmt: skip
"""Of parameters: name to fewest and most arguments and the function."""
SOURCE_FUNCTIONS: Mapping[str, tuple[int, int, Callable[..., float]]] = {
    **_BOTH, "pow": (2, 2, _power), "pwr": (2, 2, lambda a, b: math.copysign(abs(a) ** b, a)),
    "u": (1, 1, lambda a: 0.5 if a == 0 else float(a > 0)), "u2": (1, 1, lambda a: min(max(a, 0.0), 1.0)),
    "uramp": (1, 1, lambda a: max(a, 0.0)), "eq0": (1, 1, lambda a: float(a == 0)),
    "ne0": (1, 1, lambda a: float(a != 0)), "gt0": (1, 1, lambda a: float(a > 0)),
    "lt0": (1, 1, lambda a: float(a < 0)), "ge0": (1, 1, lambda a: float(a >= 0)),
    "le0": (1, 1, lambda a: float(a <= 0)),
}  # fmt: skip
"""Of sources; beside these there are `pwl` and `ddt`, which have no value of their own."""
NOT_EVALUATED = ("pwl", "ddt")
RANDOM = ("limit", "agauss", "gauss", "aunif", "unif", "rnd", "sunif", "sgauss", "poisson", "exponential")
"""Functions that draw a random value in ngspice: never evaluated here."""


@dataclass(frozen=True, slots=True)
class Function:
    """A user function: parameter names and body."""

    parameters: tuple[str, ...]
    body: Node


Lookup = Callable[[str], float]


@dataclass(frozen=True)
class Evaluator:
    """Values of trees: `lookup` gives a parameter's value or raises KeyError; functions by name; source: whether the
    tree is of a source's expression."""

    lookup: Lookup
    functions: Mapping[str, Function]
    source: bool = False

    def value(self, tree: Node, depth: int = 0) -> float:
        """The value of a tree. Raises ExpressionError (unknown name, no real value, too deep)."""
        try:
            result = self._value(tree, depth)
        except RecursionError:
            raise ExpressionError("nested too deep, or defined by itself") from None
        except (ValueError, OverflowError, ZeroDivisionError, TypeError) as error:
            raise ExpressionError(f"it has no value ({error})") from error
        if isinstance(result, complex) or not math.isfinite(result):
            raise ExpressionError("it has no finite real value")
        return result

    def _value(self, tree: Node, depth: int) -> float:
        if depth > DEEPEST * 4:
            raise ExpressionError("nested too deep, or a function that calls itself")
        depth += 1
        if isinstance(tree, Constant):
            return tree.value
        if isinstance(tree, Name):
            try:
                return self.lookup(tree.name)
            except KeyError:
                raise ExpressionError(
                    f"`{tree.name}` is no known parameter", tree.start, tree.end, unknown=tree.name
                ) from None
        if isinstance(tree, Unary):
            operand = self._value(tree.operand, depth)
            return -operand if tree.operator == "-" else float(not operand)
        if isinstance(tree, Choice):
            return self._value(tree.yes if self._value(tree.condition, depth) else tree.no, depth)
        if isinstance(tree, Binary):
            return _OPERATIONS[tree.operator](self._value(tree.left, depth), self._value(tree.right, depth))
        return self._call(tree, depth)

    def _call(self, tree: Call, depth: int) -> float:
        name = tree.function
        if tree.words:
            raise ExpressionError(f"`{name}(...)` is no constant", tree.start, tree.end)
        arguments = [self._value(argument, depth) for argument in tree.arguments]
        function = self.functions.get(name)
        if function is not None:
            if len(arguments) != len(function.parameters):
                raise ExpressionError(
                    f"`{name}` takes {len(function.parameters)} arguments, given {len(arguments)}",
                    tree.start, tree.end,
                )  # fmt: skip
            own = dict(zip(function.parameters, arguments, strict=True))
            inner = Evaluator(lambda n: own[n] if n in own else self.lookup(n), self.functions, self.source)
            return inner._value(function.body, depth)
        if name in RANDOM:
            raise ExpressionError(f"`{name}` draws a random value in ngspice", tree.start, tree.end)
        known = SOURCE_FUNCTIONS if self.source else FUNCTIONS
        if name not in known:
            raise ExpressionError(f"`{name}` is no known function", tree.start, tree.end, function=name)
        least, most, operation = known[name]
        if not least <= len(arguments) <= most:
            raise ExpressionError(f"`{name}` takes {least} arguments, given {len(arguments)}", tree.start, tree.end)
        return float(operation(*arguments))


_OPERATIONS: Mapping[str, Callable[[float, float], float]] = {
    "+": lambda a, b: a + b, "-": lambda a, b: a - b, "*": lambda a, b: a * b, "/": lambda a, b: a / b,
    "%": math.fmod, "**": _power, "==": lambda a, b: float(a == b),
    "=": lambda a, b: float(a == b), "!=": lambda a, b: float(a != b),
    "<>": lambda a, b: float(a != b), "<": lambda a, b: float(a < b), ">": lambda a, b: float(a > b),
    "<=": lambda a, b: float(a <= b), ">=": lambda a, b: float(a >= b),
    "&&": lambda a, b: float(bool(a) and bool(b)), "&": lambda a, b: float(bool(a) and bool(b)),
    "||": lambda a, b: float(bool(a) or bool(b)), "|": lambda a, b: float(bool(a) or bool(b)),
}  # fmt: skip
