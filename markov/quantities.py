"""Quantities as an engineer writes them, held exactly: times, rates, shares.

A `Quantity` is read from text once and keeps three things: the text as written, its exact value as a rational number
(times in hours, rates per hour, shares plain) and the expression behind it.  No float is formed here.

Grammar
-------
::

    expression = term {("+" | "-") term}
    term       = factor {("*" | "/") factor}
    factor     = ["+" | "-"] (literal | name | "(" expression ")")
    literal    = number ["%"] [[scale] time-unit | "FIT" | ("/" | "per") [number] [scale] time-unit]
    scale      = "hundred" | "thousand" | "million" | "billion"

The unit of measure binds tighter than any sign: ``1 / 2 h`` is one divided by two hours.
"""

from __future__ import annotations

import re
from collections.abc import Collection, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal, NoReturn

from markov.errors import MarkovError

Dimension = Literal["time", "rate", "share"]

#: Length of a year where a model does not say it, in hours.
COMMON_YEAR = Fraction(8760)

#: Longest text that is read as a quantity, in characters.
LONGEST_TEXT = 2000
#: Deepest nesting of parentheses.
DEEPEST = 50
#: Largest power of ten, up and down, of a number and of a value.
LARGEST_EXPONENT = 300
#: Longest exact numerator or denominator, in binary digits.
LONGEST_EXACT = 8192

_EXPONENT: dict[Dimension, int] = {"rate": -1, "share": 0, "time": 1}
_DIMENSION: dict[int, Dimension] = {-1: "rate", 0: "share", 1: "time"}
_CALLED: dict[Dimension, str] = {"rate": "a rate", "share": "a plain number", "time": "a time"}

_SECOND = Fraction(1, 3600)
_MINUTE = Fraction(1, 60)
_FIXED_UNITS: dict[str, Fraction] = {
    **dict.fromkeys(("s", "sec", "second", "seconds"), _SECOND),
    **dict.fromkeys(("min", "minute", "minutes"), _MINUTE),
    **dict.fromkeys(("h", "hr", "hrs", "hour", "hours"), Fraction(1)),
    **dict.fromkeys(("d", "day", "days"), Fraction(24)),
    **dict.fromkeys(("week", "weeks"), Fraction(168)),
}
_MONTH_WORDS = frozenset({"month", "months"})
_YEAR_WORDS = frozenset({"y", "yr", "yrs", "year", "years"})
_SCALES: dict[str, Fraction] = {
    "hundred": Fraction(100),
    "thousand": Fraction(1000),
    "million": Fraction(10**6),
    "billion": Fraction(10**9),
}
_FIT = Fraction(1, 10**9)

#: Every word that stands for a unit of measure.
UNIT_WORDS: frozenset[str] = frozenset({*_FIXED_UNITS, *_MONTH_WORDS, *_YEAR_WORDS, "FIT"})

_NOT_NUMBERS = frozenset({"nan", "inf", "infinity", "null", "none", "true", "false", "yes", "no", "on", "off"})
_NUMBER = re.compile(r"(?:[0-9][0-9_]*(?:\.[0-9_]*)?|\.[0-9][0-9_]*)(?:[eE][+-]?[0-9]+)?")
_NUMBER_PARTS = re.compile(r"([0-9_]*)(?:\.([0-9_]*))?(?:[eE]([+-]?[0-9]+))?")
_WORD = re.compile(r"[^\W\d]\w*")
_SIGNS = frozenset("+-*/()%")
_LOOK_ALIKES = {"×": "*", "·": "*", "−": "-", "–": "-", "÷": "/"}


class QuantityError(MarkovError):
    """A text that is not a quantity: what was found, what was expected, a fix.

    `position` counts characters of the text from 1; `unknown` is the name that no parameter has, or empty.
    """

    def __init__(self, found: str, expected: str, fix: str, *, position: int = 0, unknown: str = "") -> None:
        self.found = found
        self.expected = expected
        self.fix = fix
        self.position = position
        self.unknown = unknown
        super().__init__(f"{found}; {expected}; {fix}")


# --------------------------------------------------------------------------------------------------- expressions


@dataclass(frozen=True)
class Number:
    """A literal: its exact value in hours, per hour or plain."""

    exact: Fraction
    dimension: Dimension
    position: int = field(default=0, compare=False, repr=False)


@dataclass(frozen=True)
class Name:
    """A parameter."""

    name: str
    position: int = field(default=0, compare=False, repr=False)


@dataclass(frozen=True)
class Negative:
    """Minus a term."""

    term: Expression
    position: int = field(default=0, compare=False, repr=False)


@dataclass(frozen=True)
class Reciprocal:
    """One divided by a term."""

    term: Expression
    position: int = field(default=0, compare=False, repr=False)


@dataclass(frozen=True)
class Sum:
    """A sum of terms; a difference holds a `Negative`."""

    terms: tuple[Expression, ...]
    position: int = field(default=0, compare=False, repr=False)


@dataclass(frozen=True)
class Product:
    """A product of terms; a quotient holds a `Reciprocal`."""

    terms: tuple[Expression, ...]
    position: int = field(default=0, compare=False, repr=False)


Expression = Number | Name | Negative | Reciprocal | Sum | Product


def names(expression: Expression) -> tuple[str, ...]:
    """Return the parameters that an expression names, each once, in the order of their first use."""
    found: dict[str, None] = {}
    pending: list[Expression] = [expression]
    while pending:
        node = pending.pop()
        match node:
            case Name():
                found[node.name] = None
            case Negative() | Reciprocal():
                pending.append(node.term)
            case Sum() | Product():
                pending.extend(reversed(node.terms))
            case Number():
                pass
    return tuple(found)


def evaluate(expression: Expression, values: Mapping[str, Fraction]) -> Fraction:
    """Return the exact value of an expression for given values of its parameters.

    Parameters
    ----------
    expression : Expression
        Taken from `Quantity.expression`; its dimensions have been checked when it was read.
    values : mapping of name to Fraction
        Hours, per hour or plain, one for each of ``names(expression)``.
    """
    match expression:
        case Number():
            return expression.exact
        case Name():
            return values[expression.name]
        case Negative():
            return -evaluate(expression.term, values)
        case Reciprocal():
            return 1 / evaluate(expression.term, values)
        case Sum():
            return sum((evaluate(term, values) for term in expression.terms), Fraction(0))
        case Product():
            value = Fraction(1)
            for term in expression.terms:
                value *= evaluate(term, values)
            return value


# ---------------------------------------------------------------------------------------------------- quantities


@dataclass(frozen=True)
class Quantity:
    """A time, a rate or a share: as written, exact, with the parameters it names.

    Attributes
    ----------
    text : str
        As written.
    dimension : "time", "rate" or "share"
        A plain number counts as a share.
    exact : Fraction
        Hours, per hour, or plain.
    parameters : tuple of str
        Names used directly.
    expression : Expression
        What `text` says, as a tree; `evaluate` gives its value for other values of the parameters.
    """

    text: str
    dimension: Dimension
    exact: Fraction
    parameters: tuple[str, ...]
    expression: Expression

    @property
    def name(self) -> str | None:
        """The parameter's name where the whole text is one."""
        return self.expression.name if isinstance(self.expression, Name) else None

    @property
    def complement(self) -> Fraction:
        """One minus the value, exact; for shares."""
        return 1 - self.exact

    @property
    def is_zero(self) -> bool:
        """Whether the value is zero."""
        return self.exact == 0

    def __str__(self) -> str:
        return self.text


def parse_quantity(
    text: str, *, parameters: Mapping[str, Quantity] | None = None, year: Fraction | None = COMMON_YEAR
) -> Quantity:
    """Read a quantity.

    Parameters
    ----------
    text : str
        Such as ``24 h``, ``200 per million hours``, ``2 %``, ``drive_failures * (1 - coverage)``.
    parameters : mapping of name to Quantity
        The parameters that the text may name.
    year : Fraction or None
        Length of a year in hours; None where years and months cannot be used, as in the length of the year itself.

    Raises
    ------
    QuantityError
        Where the text cannot be read, adds or multiplies what does not go together, or is negative.
    """
    known = parameters if parameters is not None else {}
    expression = parse_expression(text, known, year=year)
    exponent, exact = _value(expression, known, text)
    text = text.strip()
    if exact < 0:
        called = _CALLED[_DIMENSION[exponent]]
        raise QuantityError(f"{quote(text)} is negative", f"{called} of zero or more", "remove the minus sign")
    return Quantity(text, _DIMENSION[exponent], exact, names(expression), expression)


def parse_expression(text: str, known: Collection[str], *, year: Fraction | None = COMMON_YEAR) -> Expression:
    """Read the structure of a quantity, given the names of the parameters but not their values.

    Raises
    ------
    QuantityError
        Where the text cannot be read.
    """
    if len(text) > LONGEST_TEXT:
        raise QuantityError(
            f"a quantity of {len(text)} characters",
            f"at most {LONGEST_TEXT}",
            "split it with parameters",
        )
    whole = text.strip()
    if not whole:
        raise QuantityError("nothing is written here", "a quantity", "write one, or take the key out")
    if whole in known:
        if _WORD.fullmatch(whole) is None and _reads_otherwise(text, known, year):
            raise QuantityError(
                f"{quote(whole)} can be read in two ways: as the parameter of that name or as it stands",
                "one meaning",
                "give the parameter a name of letters, digits and _",
            )
        return Name(whole, 1)
    return _Reading(text, known, year).whole()


def _reads_otherwise(text: str, known: Collection[str], year: Fraction | None) -> bool:
    try:
        _Reading(text, known, year).whole()
    except QuantityError:
        return False
    return True


def parse_number(text: str) -> Fraction:
    """Read a plain number, exactly.

    ``1e-6``, ``1e6``, ``1_000``, ``.5``, ``+3`` are numbers; ``010``, ``1:30``, ``1,5``, ``.nan`` are not.

    Raises
    ------
    QuantityError
        Where the text is anything else than one number.
    """
    quantity = parse_quantity(text)
    if not isinstance(quantity.expression, Number) or quantity.dimension != "share" or "%" in text:
        raise QuantityError(f"{quote(text)} is not a plain number", "a plain number", "write it out, such as 3")
    return quantity.exact


def quote(text: str, *, longest: int = 60) -> str:
    """Return text between quotation marks for a message: on one line, shortened, control characters spelled out."""
    shown = text if len(text) <= longest else text[: longest - 1] + "…"
    return "`" + "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in shown) + "`"


# ------------------------------------------------------------------------------------------------------- reading

_EXPECTED = "numbers with units of measure, parameter names, + - * / and parentheses"


@dataclass(frozen=True)
class _Token:
    kind: Literal["number", "word", "sign", "end"]
    text: str
    position: int


class _Reading:
    """One pass over a text, by recursive descent."""

    def __init__(self, text: str, known: Collection[str], year: Fraction | None) -> None:
        self.text = text
        self.known = known
        self.year = year
        self.tokens = self._tokens()
        self.next = 0
        self.depth = 0

    # -- tokens

    def _tokens(self) -> list[_Token]:
        tokens: list[_Token] = []
        text, at = self.text, 0
        while at < len(text):
            character = text[at]
            if character.isspace():
                at += 1
            elif number := _NUMBER.match(text, at):
                self._refuse_number_traps(number)
                tokens.append(_Token("number", number.group(), at + 1))
                at = number.end()
            elif word := _WORD.match(text, at):
                tokens.append(_Token("word", word.group(), at + 1))
                at = word.end()
            elif character in _SIGNS:
                if text.startswith("**", at):
                    self.fail(at + 1, "`**` is written", _EXPECTED, "multiply the term with itself")
                tokens.append(_Token("sign", character, at + 1))
                at += 1
            else:
                self._refuse_character(at)
        tokens.append(_Token("end", "", len(text) + 1))
        return tokens

    def _refuse_number_traps(self, match: re.Match[str]) -> None:
        number, end, position = match.group(), match.end(), match.start() + 1
        rest = self.text[end:]
        if rest[:1] == "," and rest[1:2].isdigit():
            tail = re.match(r"[0-9]+", rest[1:])
            decimal = f"{number}.{tail.group()}" if tail and number.isdigit() else "1.5"
            self.fail(position, f"{quote(number + rest[:4])} has a comma", "decimals after a point", f"write {decimal}")
        if rest[:1] == ":" and rest[1:2].isdigit():
            self.fail(position, f"{quote(number + rest[:3])} has a colon", "a plain number", "write hours as 1.5 h")
        if re.match(r"0[0-9_]", number):
            plain = number.lstrip("0_") or "0"
            plain = plain if plain[0].isdigit() else "0" + plain
            self.fail(
                position, f"{quote(number)} begins with a zero", "a number without leading zeros", f"write {plain}"
            )
        if "__" in number or "_." in number or "._" in number or re.search(r"_(?:[eE]|$)", number):
            self.fail(position, f"{quote(number)} has a stray _", "_ between two digits only", "remove it")

    def _refuse_character(self, at: int) -> NoReturn:
        character, position = self.text[at], at + 1
        if character == "." and (word := _WORD.match(self.text, at + 1)):
            self.fail(position, f"{quote('.' + word.group())} is not a number", "a finite number", "write a number")
        if character == "~":
            self.fail(position, "`~` stands for nothing", "a quantity", "write a number, or take the key out")
        if character == "∞":
            self.fail(position, "`∞` is not a number", "a finite number", "write a number")
        if character == "^":
            self.fail(position, "`^` is written", _EXPECTED, "multiply the term with itself")
        fix = f"write {_LOOK_ALIKES[character]}" if character in _LOOK_ALIKES else "remove it"
        self.fail(position, f"{quote(character)} is written", _EXPECTED, fix)

    def fail(self, position: int, found: str, expected: str, fix: str, *, unknown: str = "") -> NoReturn:
        """Raise the error, naming the place inside the text where that helps."""
        if position > 1:
            found += f" at character {position} of {quote(self.text)}"
        raise QuantityError(found, expected, fix, position=position, unknown=unknown)

    def peek(self, ahead: int = 0) -> _Token:
        return self.tokens[min(self.next + ahead, len(self.tokens) - 1)]

    def take(self) -> _Token:
        token = self.peek()
        self.next += 1
        return token

    def at_sign(self, signs: str, ahead: int = 0) -> bool:
        token = self.peek(ahead)
        return token.kind == "sign" and token.text in signs

    # -- grammar

    def whole(self) -> Expression:
        expression = self.expression()
        token = self.peek()
        if token.kind != "end":
            self._refuse_leftover(token)
        return expression

    def _refuse_leftover(self, token: _Token) -> NoReturn:
        follows = self.next > 0 and self.tokens[self.next - 1].kind in ("number", "word")
        if token.kind == "word" and follows and token.text not in {*self.known, *UNIT_WORDS, "per"}:
            self._refuse_unit(token)
        if token.text == "%":
            self.fail(token.position, "`%` does not follow a number", "`%` after a number", "multiply by 1 %")
        if token.text == ")":
            self.fail(token.position, "`)` closes nothing", "parentheses in pairs", "remove it or open it before")
        self.fail(token.position, f"{quote(token.text)} follows without a sign", _EXPECTED, "put + - * or / before it")

    def _refuse_unit(self, token: _Token) -> NoReturn:
        fixes = {"m": "write min or month", "a": "write y", "yrs.": "write y", "fit": "write FIT", "fits": "write FIT"}
        fix = fixes.get(token.text.lower())
        if fix is None:
            near = token.text.lower()
            fix = f"write {near}" if near in UNIT_WORDS else "write a unit such as h, or take the word out"
        self.fail(
            token.position,
            f"{quote(token.text)} is no unit of measure",
            "one of s, min, h, d, week, month, y, FIT",
            fix,
        )

    def expression(self) -> Expression:
        start = self.peek().position
        terms = [self.term()]
        while self.at_sign("+-"):
            sign = self.take()
            term = self.term()
            terms.append(Negative(term, sign.position) if sign.text == "-" else term)
        return terms[0] if len(terms) == 1 else Sum(tuple(terms), start)

    def term(self) -> Expression:
        start = self.peek().position
        factors = [self.factor()]
        while self.at_sign("*/"):
            sign = self.take()
            factor = self.factor()
            factors.append(Reciprocal(factor, sign.position) if sign.text == "/" else factor)
        return factors[0] if len(factors) == 1 else Product(tuple(factors), start)

    def factor(self) -> Expression:
        if self.at_sign("+-"):
            sign = self.take()
            inner = self.primary()
            return Negative(inner, sign.position) if sign.text == "-" else inner
        return self.primary()

    def primary(self) -> Expression:
        token = self.take()
        if token.kind == "number":
            return self.literal(token)
        if token.kind == "word":
            return self.name(token)
        if token.text == "(":
            self.depth += 1
            if self.depth > DEEPEST:
                self.fail(token.position, "parentheses are nested too deep", f"at most {DEEPEST}", "use parameters")
            inner = self.expression()
            if not self.at_sign(")"):
                leftover = self.peek()
                if leftover.kind != "end":
                    self._refuse_leftover(leftover)
                self.fail(token.position, "`(` is not closed", "parentheses in pairs", "close it with )")
            self.take()
            self.depth -= 1
            return inner
        if token.kind == "end":
            self.fail(token.position, "the text ends too early", "a number, a name or (", "complete it")
        self.fail(token.position, f"{quote(token.text)} stands here", "a number, a name or (", "complete or remove it")

    def name(self, token: _Token) -> Expression:
        if token.text in self.known:
            return Name(token.text, token.position)
        if token.text in UNIT_WORDS or token.text in _SCALES:
            self.fail(
                token.position,
                f"{quote(token.text)} is a unit of measure without a number",
                "a number before each unit",
                f"write `1 {token.text}`, or `* 1 /{token.text}` for a rate",
            )
        if token.text.lower() in _NOT_NUMBERS:
            self.fail(token.position, f"{quote(token.text)} is not a number", "a number or a name", "write a number")
        self.fail(
            token.position,
            f"{quote(token.text)} is neither a number nor the name of a parameter",
            "a number with its unit, or the name of a parameter",
            "write the number here, or define it under `parameters`",
            unknown=token.text,
        )

    # -- literals

    def literal(self, token: _Token) -> Number:
        value = self.number(token)
        if self.at_sign("%"):
            self.take()
            value /= 100
        following = self.peek()
        if following.kind == "word" and following.text == "FIT":
            self.take()
            return Number(value * _FIT, "rate", token.position)
        if following.kind == "word" and following.text == "per":
            self.take()
            return Number(value / self.span(), "rate", token.position)
        if self.at_sign("/") and self.peek(1).kind == "word" and self._starts_span(self.peek(1)):
            word = self.peek(1)
            if word.text in self.known:
                self.fail(
                    word.position,
                    f"{quote(word.text)} can be read in two ways: as the unit of measure or as the parameter",
                    "one meaning",
                    f"write `per {word.text}` for the unit, or give the parameter another name",
                )
            self.take()
            return Number(value / self.span(), "rate", token.position)
        if following.kind == "word" and self._starts_span(following):
            return Number(value * self.span(), "time", token.position)
        return Number(value, "share", token.position)

    def _starts_span(self, token: _Token) -> bool:
        return token.text in _SCALES or (token.text in UNIT_WORDS and token.text != "FIT")

    def span(self) -> Fraction:
        """Read what a rate is counted per, or what follows the number of a time; return it in hours."""
        value = Fraction(1)
        if self.peek().kind == "number":
            token = self.take()
            value = self.number(token)
            if value == 0:
                self.fail(token.position, "the rate is counted per 0", "a number above zero", "write another number")
        if self.peek().kind == "word" and self.peek().text in _SCALES:
            value *= _SCALES[self.take().text]
        token = self.take()
        if token.kind == "word" and token.text in _FIXED_UNITS:
            return value * _FIXED_UNITS[token.text]
        if token.text in _YEAR_WORDS or token.text in _MONTH_WORDS:
            if self.year is None:
                self.fail(
                    token.position,
                    f"{quote(token.text)} is used before its length is known",
                    "hours or days",
                    "write 8760 h or 365.25 d",
                )
            return value * self.year / (12 if token.text in _MONTH_WORDS else 1)
        if token.kind == "word":
            self._refuse_unit(token)
        self.fail(token.position, "a unit of measure is missing", "one of s, min, h, d, week, month, y", "write it")

    def number(self, token: _Token) -> Fraction:
        parts = _NUMBER_PARTS.fullmatch(token.text)
        assert parts is not None  # the token was cut by a stricter pattern
        whole, decimals, power = (part or "" for part in parts.groups())
        digits = (whole + decimals).replace("_", "")
        exponent = int(power) if power else 0
        if abs(exponent) > LARGEST_EXPONENT or len(digits) > LARGEST_EXPONENT:
            self.fail(
                token.position,
                f"{quote(token.text)} is out of range",
                f"a number between 1e-{LARGEST_EXPONENT} and 1e{LARGEST_EXPONENT}",
                "check the exponent",
            )
        return Fraction(int(digits)) * Fraction(10) ** (exponent - len(decimals.replace("_", "")))


# ---------------------------------------------------------------------------------------------- dimension algebra


def _value(expression: Expression, known: Mapping[str, Quantity], text: str) -> tuple[int, Fraction]:
    """Return the power of time and the exact value of an expression, both checked."""
    match expression:
        case Number():
            exponent, exact = _EXPONENT[expression.dimension], expression.exact
        case Name():
            quantity = known[expression.name]
            exponent, exact = _EXPONENT[quantity.dimension], quantity.exact
        case Negative():
            exponent, exact = _value(expression.term, known, text)
            exact = -exact
        case Reciprocal():
            exponent, exact = _value(expression.term, known, text)
            if exact == 0:
                _refuse(text, expression.position, "a division by zero", "a divisor above zero", "check the divisor")
            exponent, exact = -exponent, 1 / exact
        case Sum():
            exponent, exact = _sum(expression, known, text)
        case Product():
            exponent, exact = _product(expression, known, text)
    limit = 10**LARGEST_EXPONENT
    if exact and not 1 <= abs(exact) * limit <= limit * limit:
        _refuse(text, expression.position, "a value out of range", f"1e-{LARGEST_EXPONENT} to 1e{LARGEST_EXPONENT}", "")
    if max(exact.numerator.bit_length(), exact.denominator.bit_length()) > LONGEST_EXACT:
        _refuse(text, expression.position, "a value of too many digits", f"{LONGEST_EXACT} binary digits", "")
    return exponent, exact


def _sum(expression: Sum, known: Mapping[str, Quantity], text: str) -> tuple[int, Fraction]:
    first, total = _value(expression.terms[0], known, text)
    for term in expression.terms[1:]:
        exponent, exact = _value(term, known, text)
        if exponent != first:
            joined = f"{_CALLED[_DIMENSION[first]]} and {_CALLED[_DIMENSION[exponent]]} are added"
            if isinstance(term, Negative):
                joined = f"{_CALLED[_DIMENSION[exponent]]} is taken from {_CALLED[_DIMENSION[first]]}"
            _refuse(text, term.position, joined, "terms of one kind: rates, times or plain numbers", "")
        total += exact
    return first, total


def _product(expression: Product, known: Mapping[str, Quantity], text: str) -> tuple[int, Fraction]:
    power, product = 0, Fraction(1)
    for term in expression.terms:
        exponent, exact = _value(term, known, text)
        if power + exponent not in _DIMENSION:
            # Seen from the reader: a rate divided by a time is, like a rate times a rate, something per hour squared.
            other = _DIMENSION[-exponent if isinstance(term, Reciprocal) else exponent]
            verb = "divided by" if isinstance(term, Reciprocal) else "multiplied by"
            _refuse(
                text,
                term.position,
                f"{_CALLED[_DIMENSION[power]]} is {verb} {_CALLED[other]}",
                "a result that is a rate, a time or a plain number",
                "",
            )
        power += exponent
        product *= exact
    return power, product


def _refuse(text: str, position: int, found: str, expected: str, fix: str) -> NoReturn:
    place = f" at character {position} of {quote(text)}" if position > 1 else f" in {quote(text)}"
    raise QuantityError(found + place, expected, fix or "check the terms and their units", position=position)
