"""Probabilities of independent parts put together through a structure of success, without subtraction."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass

from markov.chain import Enclosure, point
from markov.errors import NotReached
from markov.model import AllOf, AnyOf, Named, Success

#: Largest number of parts that a structure may name more than once; each doubles the work.
REPEATED_LIMIT = 12

_ZERO = point(0, "")
_ONE = point(1, "")


@dataclass(frozen=True)
class Share:
    """Probability that a part delivers, with its complement; neither is formed from the other."""

    up: Enclosure
    down: Enclosure


_WORKS = Share(_ONE, _ZERO)
_FAILED = Share(_ZERO, _ONE)


def combine(success: Success, parts: Mapping[str, Share]) -> Share:
    """Return the probability that a structure of independent parts delivers.

    A part that is named more than once is held up, then down, and the two results are weighed (total probability);
    what is left is a tree in which every part stands once.

    Raises
    ------
    NotReached
        More than `REPEATED_LIMIT` parts are named more than once.
    """
    counts = Counter(_every_name(success))
    repeated = [name for name, count in counts.items() if count > 1]
    if len(repeated) > REPEATED_LIMIT:
        raise NotReached(f"{len(repeated)} parts are named more than once; at most {REPEATED_LIMIT} are combined")
    return _held(success, dict(parts), repeated)


def _every_name(success: Success) -> tuple[str, ...]:
    if isinstance(success, Named):
        return (success.name,)
    return tuple(name for part in success.of for name in _every_name(part))


def _held(success: Success, parts: dict[str, Share], repeated: list[str]) -> Share:
    if not repeated:
        return _tree(success, parts)
    name, rest = repeated[0], repeated[1:]
    share = parts[name]
    with_it = _held(success, {**parts, name: _WORKS}, rest)
    without = _held(success, {**parts, name: _FAILED}, rest)
    return Share(share.up * with_it.up + share.down * without.up, share.up * with_it.down + share.down * without.down)


def _tree(success: Success, parts: Mapping[str, Share]) -> Share:
    if isinstance(success, Named):
        return parts[success.name]
    shares = [_tree(part, parts) for part in success.of]
    if isinstance(success, AllOf):
        needed = len(shares)
    elif isinstance(success, AnyOf):
        needed = 1
    else:
        needed = success.count
    # chance[k]: k of the parts so far deliver.
    chance = [_ONE]
    for share in shares:
        grown = [each * share.down for each in chance] + [_ZERO]
        for count, each in enumerate(chance):
            grown[count + 1] = grown[count + 1] + each * share.up
        chance = grown
    up, down = _ZERO, _ZERO
    for count, each in enumerate(chance):
        if count >= needed:
            up = up + each
        else:
            down = down + each
    return Share(up.capped(), down.capped())
