"""Checks of common causes against the units that they strike."""

from __future__ import annotations

from collections.abc import Iterator
from decimal import Decimal, localcontext
from fractions import Fraction

from markov.model.common_causes import CommonCause
from markov.model.content import Content
from markov.model.faults import Fault, Path, choices, quote
from markov.model.partial import Partial, unknown
from markov.model.starts import Placement

#: Digits of a geometric mean, and by how much a sum of shares may exceed 1 for them.
_DIGITS = 60
_ROUNDING = Fraction(1, 10**50)


def cause_faults(partial: Partial) -> Iterator[Fault]:
    """Yield what is wrong between common causes and units."""
    yield from _member_faults(partial)
    if not partial.knows_places:
        return
    for name, cause in partial.content.common_causes.items():
        struck = partial.content.placements_struck(cause)
        if all(_means_something(partial.content, member) for member in cause.members):
            yield from _number_faults(name, cause, struck)
            yield from _rate_faults(partial.content, name, cause, struck)
    if partial.is_whole("common_causes"):
        yield from _sum_faults(partial.content)


def _means_something(content: Content, member: str) -> bool:
    return member in content.groups or bool(content.placements_meant(member))


def _member_faults(partial: Partial) -> Iterator[Fault]:
    content = partial.content
    known = partial.names("units") | partial.names("groups")
    taken: dict[tuple[str, Placement], str] = {}
    for cause, path, member in partial.listed("common_causes", "members"):
        meant = content.placements_in(member) if member in content.groups else content.placements_meant(member)
        if not meant and member not in known and partial.knows_places:
            keys = [place.key for place in content.placements]
            yield unknown(path, member, sorted(known | set(keys)), "a unit, `GROUP.UNIT` or a group")
        for place in meant:
            first = taken.setdefault((cause, place), member)
            if first != member:
                found = f"{quote(member)} means units that {quote(first)} means, too"
                yield Fault(path, found, "each unit once in a cause", "remove one of them")
                break


def _number_faults(name: str, cause: CommonCause, struck: tuple[Placement, ...]) -> Iterator[Fault]:
    size = sum(place.count for place in struck)
    path: Path = ("common_causes", name)
    if size < 2:
        found = f"a common cause of {size or 'no'} unit{'' if size == 1 else 's'}"
        yield Fault((*path, "members"), found, "at least two units", "add members, or remove the cause")
        return
    if cause.levels is None or cause.levels == size:
        return
    key, least = ("greek_letters", size - 1) if cause.greek_letters is not None else ("alpha_factors", size)
    given = len(cause.greek_letters or cause.alpha_factors or ())
    words = f"{given} {'letter' if key == 'greek_letters' else 'factor'}{'' if given == 1 else 's'}"
    fix = f"write {least}; a share that does not occur is 0"
    yield Fault((*path, key), f"{words} for {size} units", f"{least} of them", fix)


def _rate_faults(content: Content, name: str, cause: CommonCause, struck: tuple[Placement, ...]) -> Iterator[Fault]:
    rates = {place.unit: content.units[place.unit].failure_hourly for place in struck if place.unit in content.units}
    if len(set(rates.values())) > 1 and cause.rate is None and cause.basis is None:
        found = f"unequal failure rates of {choices(list(rates), 'and', most=4)}"
        expected = "`rate`, or `basis: lowest` or `geometric_mean`, to take the shares of"
        yield Fault(("common_causes", name), found, expected, "add one of them", on_key=True)


def _sum_faults(content: Content) -> Iterator[Fault]:
    """What the causes take of the rate of one unit may not be more than there is."""
    striking: dict[Placement, list[tuple[str, tuple[Fraction, Fraction]]]] = {}
    for name, cause in content.common_causes.items():
        struck = content.placements_struck(cause)
        size = sum(place.count for place in struck)
        basic = basic_rate(content, cause)
        if basic is None or size < 2 or cause.levels not in (None, size):
            continue  # told above
        taken = (cause.shared_share(size) * basic, cause.shared_share(size, detected=True) * basic)
        for place in struck:
            striking.setdefault(place, []).append((name, taken))
    told: set[str] = set()
    for place, causes in striking.items():
        unit = content.units.get(place.unit)
        if unit is None or place.unit in told:
            continue
        rate = unit.failure_hourly
        most = max(sum((taken[each] for _, taken in causes), Fraction(0)) for each in (0, 1))
        if most > rate * (1 + _ROUNDING):
            told.add(place.unit)
            names = choices([name for name, _ in causes], "and")
            share = f"{float(most / rate):.6g} of" if rate else "more than"
            found = f"{names} {'take' if len(causes) > 1 else 'takes'} {share} the failure rate of {quote(place.unit)}"
            path: Path = ("common_causes", causes[-1][0])
            yield Fault(path, found, "at most all of it, all causes together", "lower the shares, or the `rate`")


def basic_rate(content: Content, cause: CommonCause) -> Fraction | None:
    """Return the failure rate per hour that the shares of a cause are taken of.

    Exact, save for a geometric mean, which is right to 60 digits; None where the spec does not say it.
    """
    if cause.rate is not None:
        return cause.rate.exact
    rates = [
        content.units[place.unit].failure_hourly
        for place in content.placements_struck(cause)
        for _ in range(place.count)
        if place.unit in content.units
    ]
    if not rates:
        return None
    if len(set(rates)) == 1 or cause.basis == "lowest":
        return min(rates)
    if cause.basis is None:
        return None
    product = Fraction(1)
    for each in rates:
        product *= each
    if product == 0:
        return product
    with localcontext() as context:
        context.prec = _DIGITS
        logarithm = (Decimal(product.numerator) / Decimal(product.denominator)).ln()
        return Fraction((logarithm / len(rates)).exp())
