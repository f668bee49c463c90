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


def critical(success: Success, parts: Mapping[str, Share], name: str) -> Enclosure:
    """Return the probability that a structure delivers if and only if one of its parts does.

    Every part is named once.  This is the derivative of the structure's availability by that of the part (Z. W.
    Birnbaum, On the importance of different components in a multicomponent system, 1969; cited from memory), taken
    without a difference: along the way from the part to the top, the parts beside it leave the decision to it.
    """
    found = _critical(success, parts, name)
    if found is None:
        raise AssertionError(f"{name} is not named in the structure")
    return found.capped()


def _critical(success: Success, parts: Mapping[str, Share], name: str) -> Enclosure | None:
    if isinstance(success, Named):
        return _ONE if success.name == name else None
    for number, part in enumerate(success.of):
        inside = _critical(part, parts, name)
        if inside is not None:
            beside = [_tree(other, parts) for at, other in enumerate(success.of) if at != number]
            return inside * _counts(beside)[_needed(success) - 1]
    return None


@dataclass(frozen=True)
class Thirds:
    """Probabilities that a part is down, up and safe, or up while one more fault would bring it down."""

    down: Enclosure
    safe: Enclosure
    exposed: Enclosure


def exposed(success: Success, parts: Mapping[str, Thirds]) -> Thirds:
    """Return how a structure of independent parts, each named once, stands against one more fault anywhere.

    Of a structure that needs k parts, exactly k of which are up, one more fault is fatal if it is fatal to one of
    these; with more than k up it never is, as one fault is in one part.
    """
    if isinstance(success, Named):
        return parts[success.name]
    needed = _needed(success)
    # safe[k], open_[k]: k parts are up so far, none of them, or some of them, exposed.
    safe, open_ = [_ONE], [_ZERO]
    for part in (exposed(each, parts) for each in success.of):
        more_safe = [each * part.down for each in safe] + [_ZERO]
        more_open = [each * part.down for each in open_] + [_ZERO]
        for count in range(len(safe)):
            more_safe[count + 1] = more_safe[count + 1] + safe[count] * part.safe
            up = open_[count] * (part.safe + part.exposed) + safe[count] * part.exposed
            more_open[count + 1] = more_open[count + 1] + up
        safe, open_ = more_safe, more_open
    down, robust = _ZERO, safe[needed]
    for count in range(needed):
        down = down + safe[count] + open_[count]
    for count in range(needed + 1, len(safe)):
        robust = robust + safe[count] + open_[count]
    return Thirds(down.capped(), robust.capped(), open_[needed].capped())


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
    needed = _needed(success)
    up, down = _ZERO, _ZERO
    for count, chance in enumerate(_counts([_tree(part, parts) for part in success.of])):
        if count >= needed:
            up = up + chance
        else:
            down = down + chance
    return Share(up.capped(), down.capped())


def _needed(success: Success) -> int:
    """Return how many parts must deliver."""
    if isinstance(success, Named):
        return 1
    if isinstance(success, AllOf):
        return len(success.of)
    return 1 if isinstance(success, AnyOf) else success.count


def _counts(shares: list[Share]) -> list[Enclosure]:
    """Return the probabilities that none, one, two … of independent parts deliver."""
    chances = [_ONE]
    for share in shares:
        grown = [each * share.down for each in chances] + [_ZERO]
        for count, each in enumerate(chances):
            grown[count + 1] = grown[count + 1] + each * share.up
        chances = grown
    return chances
