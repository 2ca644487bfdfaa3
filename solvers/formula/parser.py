"""Tokens -> syntax tree, by recursive descent: one method per rule of the grammar, its docstring is the rule."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from types import MappingProxyType

from solvers.formula.errors import FormulaError
from solvers.formula.nodes import (
    FUNCTIONS,
    At,
    Call,
    Lookup,
    Name,
    Negative,
    Node,
    Number,
    Power,
    Product,
    Relation,
    Span,
    Sum,
    walk,
)  # fmt: skip
from solvers.formula.tokens import Token, tokens
from solvers.tables.table import Table
from solvers.units import PLAIN, Unit

DEPTH_LIMIT = 100
"""Levels of parentheses, signs and powers within each other; keeps every recursion over a tree shallow."""

ORDER_LIMIT = 9
"""Primes on one name."""

SIGNS = ("=", "<=", ">=")
ENDLESS = ("min", "max")
"""Functions that take two or more arguments."""

Tables = Mapping[str, Table]
"""The tables that a formula may use, by name."""

NO_TABLES: Tables = MappingProxyType({})


def parse_expression(text: str, tables: Tables = NO_TABLES) -> Node:
    """The tree of a formula without a sign of relation.  Raises FormulaError."""
    parser = _Parser(text, tables)
    tree = parser.either()
    if isinstance(tree, Relation):
        raise FormulaError(
            f"an expression is expected here, not a relation with '{tree.signs[0]}'",
            text=text, span=parser.signs[0].span, code="relation-unexpected", hint="give the expression alone",
        )  # fmt: skip
    return tree


def parse_relation(text: str, tables: Tables = NO_TABLES) -> Relation:
    """The tree of a formula with at least one of `=`, `<=`, `>=`.  Raises FormulaError."""
    tree = parse_either(text, tables)
    if not isinstance(tree, Relation):
        raise FormulaError(
            "a relation needs '=', '<=' or '>='",
            text=text, span=tree.span, code="relation-missing", hint=f"for example: {text.strip()[:40]} = 0",
        )  # fmt: skip
    return tree


def parse_either(text: str, tables: Tables = NO_TABLES) -> Node | Relation:
    """The tree of any formula: a relation where it has a sign of relation.  Raises FormulaError."""
    return _Parser(text, tables).either()


def slope_of(name: str, tables: Tables) -> tuple[Table, tuple[int, ...]] | None:
    """The table of two arguments and the orders of its derivative that a name stands for: `n_r`, `n_r_z`."""
    for table in tables.values():
        if len(table.arguments) < 2 or not name.startswith(table.name + "_"):
            continue
        orders = _orders(name[len(table.name) :], table.arguments)
        if orders is not None:
            return table, orders
    return None


def _orders(slopes: str, arguments: tuple[str, ...]) -> tuple[int, ...] | None:
    """How often each argument is named in `_r_z_r`; None where something else is."""
    if not slopes:
        return (0,) * len(arguments)
    for index, argument in enumerate(arguments):
        rest = slopes.removeprefix("_" + argument)
        if rest == slopes or (rest and not rest.startswith("_")):
            continue
        others = _orders(rest, arguments)
        if others is not None:
            return (*others[:index], others[index] + 1, *others[index + 1 :])
    return None


def _in_unit(tree: Node, unit: Unit) -> Node:
    """A bare number as the argument of a table is in the unit of that argument."""
    match tree:
        case Number(value=value):
            return tree if unit.factor == 1 else replace(tree, value=value * unit.factor)
        case Negative(operand=Number() as number):
            return replace(tree, operand=_in_unit(number, unit))
    return tree


class _Parser:
    def __init__(self, text: str, tables: Tables) -> None:
        self.text = text
        self.tables = tables
        self.tokens = tokens(text)
        self.place = 0
        self.next = self.tokens[0]
        self.depth = 0
        self.signs: list[Token] = []

    # ---- the grammar ----

    def either(self) -> Node | Relation:
        """either = sum (('=' | '<=' | '>=') sum)*"""
        if self.next.kind == "end":
            raise self.error("the formula is empty", self.next.span, "expected-value")
        start = self.next.span.start
        sides = [self.sum()]
        while self.next.text in SIGNS:
            sign = self.take()
            self.signs.append(sign)
            if {known.text for known in self.signs} >= {"<=", ">="}:
                raise self.error(
                    "a chain runs in one direction",
                    sign.span,
                    "relation-chain",
                    "write two relations, or turn one sign round",
                )
            sides.append(self.sum())
        if self.next.kind != "end":
            raise self.leftover()
        if not self.signs:
            return sides[0]
        return Relation(tuple(sides), tuple(sign.text for sign in self.signs), self.since(start))

    def sum(self) -> Node:
        """sum = signed (('+' | '-') signed)*"""
        start = self.next.span.start
        terms, minus = [self.signed()], [False]
        # A sign just before ')' is the side of a place, as in m(t1-): not ours.
        while self.next.text in ("+", "-") and self.tokens[self.place + 1].text != ")":
            minus.append(self.take().text == "-")
            terms.append(self.signed())
        return Sum(tuple(terms), tuple(minus), self.since(start)) if len(terms) > 1 else terms[0]

    def signed(self) -> Node:
        """signed = '-' signed | product"""
        if self.next.text != "-":
            return self.product()
        sign = self.enter()
        operand = self.signed()
        self.depth -= 1
        return Negative(operand, self.since(sign.span.start))

    def product(self) -> Node:
        """product = factor (('*' | '/') factor)*"""
        start = self.next.span.start
        factors, over = [self.factor()], [False]
        while self.next.text in ("*", "/"):
            over.append(self.take().text == "/")
            factors.append(self.factor())
        if self.next.kind in ("number", "name", "primes") or self.next.text == "(":
            raise self.leftover()
        return Product(tuple(factors), tuple(over), self.since(start)) if len(factors) > 1 else factors[0]

    def factor(self) -> Node:
        """factor = '-' factor | primary ['^' factor]"""
        start = self.next.span.start
        if self.next.text == "-":
            self.enter()
            operand = self.factor()
            self.depth -= 1
            return Negative(operand, self.since(start))
        base = self.primary()
        if self.next.text != "^":
            return base
        self.enter()
        exponent = self.factor()
        self.depth -= 1
        return Power(base, exponent, self.since(start))

    def primary(self) -> Node:
        """primary = number | named | '(' sum ')'"""
        token = self.next
        if token.kind == "number":
            self.take()
            return Number(float(token.text), token.text, token.span)
        if token.kind == "name":
            return self.named()
        if token.text != "(":
            raise self.expected_value()
        self.enter()
        tree = self.sum()
        self.close(token)
        return tree

    def named(self) -> Node:
        """named = name primes? ['(' sum (',' sum)* ['+' | '-'] ')']"""
        name = self.take()
        primes = self.take().text if self.next.kind == "primes" else ""
        span = self.since(name.span.start)
        self.check_primes(name, primes, span)
        if self.next.text != "(":
            if name.text in FUNCTIONS or name.text == "integral":
                raise self.error(
                    f"'{name.text}' is a function and needs its argument",
                    span,
                    "function-name",
                    f"write {name.text}(…)",
                )
            return Name(name.text, len(primes), span)
        found = (self.tables[name.text], ()) if name.text in self.tables else slope_of(name.text, self.tables)
        if found is not None:
            return self.looked_up(*found, len(primes), span)
        opening = self.enter()
        arguments = self.listed()
        function = name.text in FUNCTIONS or name.text == "integral"
        side = self.take().text if not function and len(arguments) == 1 and self.next.text in ("+", "-") else ""
        self.close(opening)
        whole = self.since(name.span.start)
        if function:
            self.check_count(name.text, len(arguments), whole)
            return Call(name.text, tuple(arguments), whole)
        if len(arguments) == 1:
            self.check_place(arguments[0])
            return At(name.text, len(primes), arguments[0], side, whole)
        if primes or not arguments:
            wrong = f"has {len(arguments)} places" if arguments else "has no place in its parentheses"
            raise self.error(
                f"'{name.text}{primes}(…)' {wrong}", whole, "place", f"write one place: {name.text}{primes}(0)"
            )
        return Call(name.text, tuple(arguments), whole)

    def listed(self) -> list[Node]:
        """listed = [sum (',' sum)*]"""
        arguments = [] if self.next.text == ")" else [self.sum()]
        while self.next.text == ",":
            self.take()
            arguments.append(self.sum())
        return arguments

    def looked_up(self, table: Table, orders: tuple[int, ...], primes: int, named: Span) -> Node:
        """looked_up = name primes? '(' listed ')' where the name is that of a table"""
        opening = self.enter()
        arguments = self.listed()
        self.close(opening)
        whole, wanted = self.since(named.start), len(table.arguments)
        if len(arguments) != wanted:
            number = "one argument" if wanted == 1 else "two arguments"
            shown = f"{table.name}({', '.join(table.arguments)})"
            message = f"the table '{table.name}' takes {number}, not {len(arguments) or 'none'}"
            raise self.error(message, whole, "argument-count", f"write {shown}")
        if primes and wanted > 1:
            shown = " or ".join(f"{table.name}_{argument}(…)" for argument in table.arguments)
            raise self.error(
                f"a prime does not say by which argument '{table.name}' is derived", named, "prime", f"write {shown}"
            )
        orders = orders or (primes,) + (0,) * (wanted - 1)
        if sum(orders) > ORDER_LIMIT:
            message = f"a derivative of order {sum(orders)}; the limit is {ORDER_LIMIT}"
            raise self.error(message, named, "order-limit")
        units = table.argument_units or (PLAIN,) * wanted
        measured = tuple(_in_unit(argument, unit) for argument, unit in zip(arguments, units, strict=True))
        return Lookup(table, orders, measured, whole)

    # ---- what the grammar alone cannot say ----

    def check_primes(self, name: Token, primes: str, span: Span) -> None:
        if primes and (name.text in FUNCTIONS or name.text in ("integral", "pi")):
            kind = "a number" if name.text == "pi" else "a function"
            raise self.error(f"'{name.text}' is {kind} and takes no prime", span, "prime", "primes stand on unknowns")
        if len(primes) > ORDER_LIMIT:
            raise self.error(f"{len(primes)} primes on '{name.text}'; the limit is {ORDER_LIMIT}", span, "order-limit")

    def check_count(self, function: str, given: int, span: Span) -> None:
        wanted = FUNCTIONS.get(function, 1)
        if given == wanted or (function in ENDLESS and given > wanted):
            return
        number = {1: "one argument", 2: "two arguments"}[wanted]
        if function in ENDLESS:
            number = "two or more arguments"
        raise self.error(f"'{function}' takes {number}, not {given or 'none'}", span, "argument-count")

    def check_place(self, place: Node) -> None:
        for node in walk(place):
            if isinstance(node, Name | At) and node.order:
                raise self.error(
                    f"a place cannot hold the derivative of '{node.name}'", node.span, "place",
                    "a place is a number, a constant, a parameter or a formula of them",
                )  # fmt: skip

    # ---- reading tokens ----

    def take(self) -> Token:
        """Read a token; nobody reads the one of kind "end"."""
        token = self.next
        self.place += 1
        self.next = self.tokens[self.place]
        return token

    def since(self, start: int) -> Span:
        """From `start` to the end of the token read last."""
        return Span(start, self.tokens[self.place - 1].span.end)

    def enter(self) -> Token:
        """Read the token that begins a deeper level."""
        self.depth += 1
        if self.depth > DEPTH_LIMIT:
            raise self.error(
                f"parentheses, signs and powers are nested more than {DEPTH_LIMIT} deep; the limit is {DEPTH_LIMIT}",
                self.next.span, "depth-limit", "name parts of it in 'where'",
            )  # fmt: skip
        return self.take()

    def close(self, opening: Token) -> None:
        """Read the ')' that belongs to `opening`."""
        if self.next.text != ")":
            if self.next.kind != "end":
                raise self.leftover()
            raise self.error("this '(' is never closed", opening.span, "parenthesis", "add the missing ')'")
        self.take()
        self.depth -= 1

    # ---- complaints ----

    def error(self, message: str, span: Span, code: str, hint: str = "") -> FormulaError:
        return FormulaError(message, text=self.text, span=span, code=code, hint=hint)

    def expected_value(self) -> FormulaError:
        where = f"after '{self.tokens[self.place - 1].text}'" if self.place else "at the start"
        hint = "leave out the '+'" if self.next.text == "+" else ""
        return self.error(f"expected a number, a name or '(' {where}", self.next.span, "expected-value", hint)

    def leftover(self) -> FormulaError:
        """Complain about a token that cannot follow the value just read."""
        before, token = self.tokens[self.place - 1], self.next
        match token.text:
            case ")":
                return self.error(
                    "this ')' closes nothing", token.span, "parenthesis", "remove it, or add the missing '('"
                )
            case ",":
                return self.error(
                    "',' stands only between the arguments of a function",
                    token.span,
                    "sign",
                    "a decimal number has a point: 0.5",
                )
            case "=" | "<=" | ">=":
                return self.error(
                    f"'{token.text}' cannot stand inside parentheses",
                    token.span,
                    "relation-unexpected",
                    "compare whole expressions",
                )
            case "+" | "-":
                self.take()
                return self.expected_value()
        if token.kind == "primes":
            return self.error(
                "a prime can only follow a name", token.span, "prime", "the derivative of y is written y'"
            )
        hint = f"write {before.text}*{token.text}"
        if "(" in token.text or ")" in before.text:
            hint = "write '*' between the two"
        elif before.kind == "number" and token.span.start > before.span.end and token.text not in FUNCTIONS:
            hint += "; a value with its unit goes into 'constants'"
        span = Span(before.span.start, token.span.end)
        return self.error("a sign is missing between two values", span, "missing-operator", hint)
