"""From a body of notation to statements: split, tell apart, read the formulas, complain in the trade's words."""

from __future__ import annotations

from fractions import Fraction
from functools import cache
from importlib.resources import files
from typing import Any

from quarterturn.errors import NotationError
from quarterturn.notation.complaints import unexpected
from quarterturn.notation.oddities import refuse_oddities
from quarterturn.notation.tokens import Lexeme, Source, Vocabulary, lexemes
from quarterturn.notation.tree import (
    Array,
    Average,
    Call,
    Component,
    Derivative,
    Dot,
    Factorial,
    Gradient,
    Mean,
    Name,
    Negative,
    Neighbour,
    Node,
    Number,
    Prime,
    Product,
    Quotient,
    Raised,
    Sum,
    SumOver,
    Text,
)

DEEPEST = 60  # brackets inside brackets
MOST_TOKENS = 4000  # in one formula


@cache
def _parser() -> Any:
    from lark import Lark
    from lark.lexer import Lexer, Token

    class Feed(Lexer):
        """Hands tokens on; the reading has been done."""

        def __init__(self, conf: Any) -> None:
            pass

        def lex(self, data: Any, parser_state: Any = None) -> Any:
            for number, lexeme in enumerate(data):
                yield Token(lexeme.kind, lexeme.value, start_pos=number, end_pos=number + 1)

    grammar = files("quarterturn.notation").joinpath("grammar.lark").read_text(encoding="utf-8")
    return Lark(grammar, parser="lalr", lexer=Feed, start="formula", propagate_positions=True)


def read_formula(source: Source, start: int, end: int, names: Vocabulary) -> Node:
    """The syntax tree of source.text[start:end]. Raises NotationError with the place."""
    from lark.exceptions import UnexpectedInput

    refuse_oddities(source, start, end, names)
    tokens = lexemes(source, start, end, names)
    if not tokens:
        raise source.error("a formula is missing here", max(start, end - 1), end)
    _check_size(source, tokens)
    try:
        tree = _parser().parse(tokens)
    except UnexpectedInput as trouble:
        position = getattr(getattr(trouble, "token", None), "start_pos", None)
        kind = getattr(getattr(trouble, "token", None), "type", "$END")
        place = len(tokens) if kind == "$END" or position is None else position
        raise unexpected(source, tokens, place) from None
    return _Builder(source, tokens, names).node(tree)


def _check_size(source: Source, tokens: list[Lexeme]) -> None:
    if len(tokens) > MOST_TOKENS:
        raise source.error(f"a formula of more than {MOST_TOKENS} signs", tokens[0].start, tokens[0].end)
    depth = 0
    for token in tokens:
        depth += (token.kind.endswith("OPEN")) - (token.kind.endswith("CLOSE") or token.kind == "ANGLE_CONNECTED")
        if depth > DEEPEST:
            raise source.error(f"brackets nested deeper than {DEEPEST}", token.start, token.end)


class _Builder:
    """The parser's tree as nodes with places."""

    def __init__(self, source: Source, tokens: list[Lexeme], names: Vocabulary) -> None:
        self.source, self.tokens, self.names = source, tokens, names

    def node(self, tree: Any) -> Node:
        """Iterative where chains are long (sums, products), recursive in depth, which is bounded."""
        chain: list[Any] = []
        while tree.data in LEFT_CHAINS and len(tree.children) > 1:
            chain.append(tree)
            tree = tree.children[0]
        result = self.single(tree)
        for outer in reversed(chain):
            result = self.extended(outer, result)
        return result

    def span(self, tree: Any) -> Any:
        first = self.tokens[tree.meta.start_pos]
        last = self.tokens[tree.meta.end_pos - 1]
        return self.source.span(first.start, last.end)

    def extended(self, tree: Any, left: Node) -> Node:
        kind, span = str(tree.data), self.span(tree)
        right = self.node(tree.children[-1])
        if kind == "add":
            return Sum((*(left.terms if isinstance(left, Sum) else (left,)), right), span)
        if kind == "subtract":
            minus = Negative(right, right.span)
            return Sum((*(left.terms if isinstance(left, Sum) else (left,)), minus), span)
        if kind == "over":
            return Quotient(left, right, False, span)
        if kind == "dot":
            return Dot(left, right, span)
        if kind == "times_sum_over":
            right = SumOver(str(tree.children[1]), right, self.span_between(tree.children[1], tree))
        if kind == "juxtaposed" and isinstance(left, Quotient):
            left = Quotient(left.left, left.right, True, left.span)
        return Product(left, right, span)

    def single(self, tree: Any) -> Node:
        kind, span, children = str(tree.data), self.span(tree), tree.children
        match kind:
            case "number":
                top, slash, bottom = str(children[0]).partition("/")  # ½ is 1/2
                if slash:
                    return Quotient(Number(Fraction(top), span), Number(Fraction(bottom), span), False, span)
                return Number(self.number(children[0]), span)
            case "name":
                return Name(str(children[0]), span)
            case "call":
                inside = [c for c in children[2].children if hasattr(c, "data")]
                return Call(str(children[0]), tuple(self.node(c) for c in inside), span)
            case "group":
                return self.node(children[1])
            case "positive":
                return self.node(children[1])
            case "negative":
                return Negative(self.node(children[1]), span)
            case "modulus":
                return Call("abs", (self.node(children[1]),), span)
            case "average" | "connected":
                return Average(self.node(children[1]), kind == "connected", span)
            case "mean":
                return Mean(self.node(children[1]), span)
            case "root":
                return Call("sqrt", (self.node(children[1]),), span)
            case "derivative":
                index = str(children[0])
                return Derivative(self.node(children[1]), index[1:], index[0] == "^", span)
            case "gradient":
                return Gradient(self.node(children[1]), span)
            case "conjugate":
                return Call("conj", (self.node(children[0]),), span)
            case "neighbour":
                step = str(children[1])
                return Neighbour(self.node(children[0]), step[1:], 1 if step[0] == "+" else -1, span)
            case "sum_over":
                return SumOver(str(children[0]), self.node(children[1]), span)
            case "functional":
                return Call("log Z", (Name(str(children[2]), span),), span)
            case "array":
                return Array(tuple(self.node(c) for c in children[1].children if hasattr(c, "data")), span)
            case "text":
                return Text(str(children[0]), span)
            case "cases":
                from quarterturn.notation.cases import read_cases

                lexeme = self.tokens[children[0].start_pos]
                return read_cases(self.source, lexeme.start, lexeme.end, self.names)
            case "prime":
                return Prime(self.node(children[0]), span)
            case "factorial":
                return Factorial(self.node(children[0]), span)
            case "component":
                return Component(self.node(children[0]), self.indices(children[2], span), span)
            case "at_time":
                return self.at_time(children, span)
            case "power":
                return Raised(self.node(children[0]), self.node(children[2]), span)
            case "superscript":
                power = Number(Fraction(str(children[1]).lstrip("-")), span)
                exponent = Negative(power, span) if children[1].startswith("-") else power
                return Raised(self.node(children[0]), exponent, span)
        raise AssertionError(kind)

    def at_time(self, children: Any, span: Any) -> Node:
        """r[2](t), psi^*(t): the component, or the conjugate, of the path at a time."""
        inside = tuple(self.node(c) for c in children[2].children if hasattr(c, "data"))
        return self.placed(self.node(children[0]), inside, span)

    def placed(self, part: Node, inside: tuple[Node, ...], span: Any) -> Node:
        match part:
            case Component(base=base, indices=indices):
                return Component(self.placed(base, inside, span), indices, span)
            case Call(name="conj", arguments=(base,)):
                return Call("conj", (self.placed(base, inside, span),), span)
        assert isinstance(part, Name)
        return Call(part.name, inside, part.span)

    def number(self, token: Any) -> Fraction:
        text = str(token)
        lexeme = self.tokens[token.start_pos]
        if "e" in text.lower() and abs(int(text.lower().split("e")[1])) > 300:
            raise self.source.error("an exponent beyond 300", lexeme.start, lexeme.end)
        return Fraction(text)

    def indices(self, tree: Any, span: Any) -> tuple[int | str, ...]:
        tokens = [c for c in tree.children if c.type != "COMMA"]
        return tuple(self.whole(c, span) if c.type == "NUMBER" else str(c) for c in tokens)

    def span_between(self, first: Any, tree: Any) -> Any:
        """From a token to the end of a tree."""
        return self.source.span(self.tokens[first.start_pos].start, self.tokens[tree.meta.end_pos - 1].end)

    def whole(self, token: Any, span: Any) -> int:
        value = self.number(token)
        if value.denominator != 1:
            raise NotationError("a component is a whole number, as in r[2]", span=span, text=self.source.text)
        return int(value)


LEFT_CHAINS = {"add", "subtract", "juxtaposed", "times", "over", "dot", "times_sum_over"}
