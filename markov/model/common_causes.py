"""Common causes: what makes several units fail in one event."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from fractions import Fraction
from math import comb
from typing import Any, ClassVar, Literal

from pydantic import ConfigDict, Field

from markov.model.faults import Fault, quote
from markov.model.part import Part, at_most_one, exactly_one
from markov.model.readers import MaybeRate, MaybeShare, Names
from markov.model.switchovers import Coverage
from markov.quantities import Quantity

_MODELS = ("beta", "greek_letters", "alpha_factors")
_ONE_MODEL: dict[str, Any] = {"oneOf": [{"required": [key]} for key in _MODELS]}


class CommonCause(Part):
    """A cause that makes several units fail in one event."""

    model_config = ConfigDict(json_schema_extra=_ONE_MODEL)

    kind = "common cause"
    example = "{members: [fan], beta: 5 %}"
    habits: ClassVar[Mapping[str, str]] = {
        "of": "write `members`",
        "units": "write `members`",
        "groups": "write `members`",
        "for": "write `members`",
        "share": "write `beta`",
        "beta_d": "write `beta_detected`",
        "mgl": "write `greek_letters`",
        "gamma": "write `greek_letters: [β, γ, …]`",
        "alpha": "write `alpha_factors`",
        "failure_rate": "write `rate`",
        "tested": "write `testing`",
    }

    members: Names = Field(
        description="What the cause can strike: kinds of unit, each meaning all its items, `GROUP.unit`, or groups."
    )
    exposed: Literal["all", "on_duty"] = Field(
        "all", description="`all`: waiting units are struck, too; `on_duty`: only units that carry duty."
    )
    beta: MaybeShare = Field(
        None,
        description="Share of the failure rate that strikes all members at once. Exactly one of this, "
        "`greek_letters` and `alpha_factors`.",
    )
    beta_detected: MaybeShare = Field(
        None,
        description="The same share for faults that are known at once, where it is another; beside `beta`.",
        json_schema_extra={"unsaid": "`beta`"},
    )
    greek_letters: Coverage = Field(
        None,
        description="List β, γ, δ …, one fewer than members: β is the share of a unit's rate that strikes others, "
        "too, γ the share of those events that strikes a third unit, and so on.",
    )
    alpha_factors: Coverage = Field(
        None,
        description="List with one entry for each number of units struck: share of the events that strikes so many; "
        "sums to 1.",
    )
    testing: Literal["staggered", "simultaneous"] | None = Field(
        None, description="How the units behind `alpha_factors` were tested; needed there, refused elsewhere."
    )
    rate: MaybeRate = Field(
        None, description="Failure rate that the shares are taken of, where the members have unequal rates."
    )
    basis: Literal["lowest", "geometric_mean"] | None = Field(
        None, description="The same by a rule: the lowest failure rate of the members, or their geometric mean."
    )

    @classmethod
    def _key_faults(cls, keys: Collection[str]) -> Iterable[Fault]:
        yield from exactly_one(cls, keys, *_MODELS)
        yield from at_most_one(cls, keys, "rate", "basis")
        if "beta_detected" in keys and "beta" not in keys:
            fix = "remove it, or write `beta`"
            yield Fault(("beta_detected",), "`beta_detected` without `beta`", "both", fix, on_key=True)
        if "testing" in keys and "alpha_factors" not in keys:
            expected = "`testing` with `alpha_factors` only"
            yield Fault(("testing",), "`testing` without `alpha_factors`", expected, "remove it", on_key=True)
        if "alpha_factors" in keys and "testing" not in keys:
            expected = "`testing: staggered` or `simultaneous`, for they mean different shares"
            yield Fault((), "`testing` is missing", expected, "add `testing: …`", on_key=True)

    def _faults(self, unread: Collection[str]) -> Iterable[Fault]:
        for position, name in enumerate(self.members):
            if name in self.members[:position]:
                yield Fault(("members", position), f"{quote(name)} stands twice", "each once", "remove one of them")
        factors = self.alpha_factors
        if factors:
            total = sum((each.exact for each in factors), Fraction(0))
            if total != 1:
                found = f"the factors sum to {float(total):.12g}"
                yield Fault(("alpha_factors",), found, "factors that sum to exactly 1", "correct them")

    @property
    def levels(self) -> int | None:
        """Number of members that a list of letters or factors is written for; None with `beta`."""
        if self.greek_letters is not None:
            return len(self.greek_letters) + 1
        return None if self.alpha_factors is None else len(self.alpha_factors)

    def struck_shares(self, size: int, beta: Quantity | None = None) -> dict[int, Fraction]:
        """Return the share of the basic failure rate that strikes each set of so many units, of `size` in all.

        Sets of one are left out: they follow from what is left of a unit's own rate.

        Notes
        -----
        Greek letters: Q_k = (1/C(m-1, k-1)) * prod(ρ_1 .. ρ_k) * (1 - ρ_(k+1)), with ρ_1 = 1, ρ_2 = β, ρ_(m+1) = 0.
        Alpha factors: Q_k = α_k/C(m-1, k-1) with staggered tests, k α_k/(α_t C(m-1, k-1)) with simultaneous ones,
        α_t = Σ k α_k (A. Mosleh and others, Procedures for Treating Common Cause Failures in Safety and Reliability
        Studies, NUREG/CR-4780, 1988; NUREG/CR-5485, 1998; cited from memory).
        """
        if self.beta is not None:
            return {size: (self.beta if beta is None else beta).exact}
        shares: dict[int, Fraction] = {}
        if self.greek_letters is not None:
            letters = [Fraction(1), *(each.exact for each in self.greek_letters), Fraction(0)]
            product = Fraction(1)
            for number in range(2, size + 1):
                product *= letters[number - 1]
                shares[number] = product * (1 - letters[number]) / comb(size - 1, number - 1)
            return shares
        factors = [each.exact for each in self.alpha_factors or ()]
        mean = sum((number * each for number, each in enumerate(factors, start=1)), Fraction(0))
        for number in range(2, size + 1):
            weight = Fraction(1) if self.testing == "staggered" else number / mean
            shares[number] = weight * factors[number - 1] / comb(size - 1, number - 1)
        return shares

    def shared_share(self, size: int, *, detected: bool = False) -> Fraction:
        """Return the share of the basic failure rate that one unit has from this cause, sets of all sizes together."""
        beta = self.beta_detected if detected and self.beta_detected is not None else None
        shares = self.struck_shares(size, beta)
        return sum((comb(size - 1, number - 1) * each for number, each in shares.items()), Fraction(0))
