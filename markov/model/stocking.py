"""Checks of spares against the units that draw them."""

from __future__ import annotations

from collections.abc import Iterator

from markov.model.faults import Fault, Path, quote
from markov.model.partial import Partial, unknown


def stock_faults(partial: Partial) -> Iterator[Fault]:
    """Yield what is wrong between pools of spares and units."""
    yield from _kind_faults(partial)
    yield from _batch_faults(partial)
    yield from _delay_faults(partial)


def _kind_faults(partial: Partial) -> Iterator[Fault]:
    units, groups = partial.names("units"), partial.names("groups")
    pools: dict[str, str] = {}
    for name, path, unit in partial.listed("spares", "for"):
        if unit in groups and unit not in units:
            yield Fault(path, f"{quote(unit)} is a group", "units", "name the units of the group")
        elif unit not in units and partial.is_readable("units"):
            yield unknown(path, unit, units, "a unit of `units`")
        elif unit in pools:
            twice = pools[unit] == name
            found = f"{quote(unit)} stands twice" if twice else f"{quote(unit)} has spares in {quote(pools[unit])}, too"
            yield Fault(path, found, "each unit in one pool at most, once", "remove one of them")
        pools.setdefault(unit, name)
        kind = partial.content.units.get(unit)
        if kind is not None and kind.repaired_at_once:
            found = f"spares for {quote(unit)}, which is renewed at once (`repair_time: 0 h`)"
            fix = "remove `repair_time: 0 h` there: the exchange takes its place"
            yield Fault(path, found, "units that wait for a spare", fix)


def _batch_faults(partial: Partial) -> Iterator[Fault]:
    """An order that is placed at every b-th draw is never placed where fewer than b spares can ever be drawn."""
    for name, pool in partial.content.spares.items():
        kinds = [partial.content.units.get(unit) for unit in pool.for_]
        if any(kind is None or kind.ever_repaired for kind in kinds):
            continue
        if pool.order == "when_drawn" and pool.batch > pool.stock:
            path: Path = ("spares", name, "batch")
            found = f"an order at every {pool.batch} draws, and {pool.stock} in stock: none would ever be placed"
            yield Fault(path, found, "a `batch` up to the `stock`", "lower it, raise `stock`, or order `when_failed`")


def _delay_faults(partial: Partial) -> Iterator[Fault]:
    """What passes before a repair needs a repair, or a spare, that it passes before."""
    drawing = {unit for _, _, unit in partial.listed("spares", "for")}
    for name, unit in partial.content.units.items():
        written = any(mode.repair is not None for mode in unit.modes())
        if unit.is_said("logistic_delay") and not written and name not in drawing:
            yield Fault(
                ("units", name, "logistic_delay"),
                "`logistic_delay` for a unit that is never repaired",
                "`repair_time`, `repair_rate` or spares beside it",
                "add one of them, or remove `logistic_delay`",
                on_key=True,
            )
