"""Who has a crew: the last instant consequence of every event.

Kinds are served in order of priority, one crew per failed item, and a repair under way is interrupted only for a kind
of higher priority.  Where a kind stands in one group only, who is served follows from the counts: items further on in
their repair first.  Where a kind stands in several groups, items of the same kind are equals that never interrupt
each other, so the state tells who is served, and a free crew draws among them: begun repairs first, the most
advanced stage first, then with the same chance for every item.  If a crew is called away, the least advanced repair
is interrupted.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from markov.states.chart import Chart
from markov.states.plan import Pool, PoolKind

Columns = NDArray[np.int32]
"""Local state numbers, shape (islands, m): one column a state of the whole chain."""

Counts = NDArray[np.int32]


@dataclass(frozen=True)
class Share:
    """Columns that took the same number of draws among equals."""

    row: NDArray[np.int64]  # which of the given columns each one stems from
    columns: Columns
    weight: NDArray[np.int64]  # product of the numbers of alike items that could have been drawn
    choices: int  # product of the numbers of items that the draws were among


class CrewDesk:
    """Looks up who is served, and assigns crews after an event, for all pools of one chain."""

    def __init__(self, charts: tuple[Chart, ...], pools: tuple[Pool, ...]) -> None:
        self._charts = charts
        self.pools = pools
        self._served_rows: dict[tuple[int, int], list[Counts]] = {}
        self._waiting: dict[tuple[int, int], Counts] = {}
        for pool in pools:
            for kind in pool.kinds:
                for island, number in kind.places:
                    chart = charts[island]
                    lane = chart.layout.lanes[number]
                    self._served_rows[island, number] = [
                        chart.digits[row].astype(np.int32) for row in lane.working_rows
                    ]
                    self._waiting[island, number] = lane.calling(chart.digits).astype(np.int32)

    @property
    def assigns(self) -> bool:
        """Whether any pool must tell its queue apart."""
        return any(kind.explicit_queue for pool in self.pools for kind in pool.kinds)

    def served(self, pool: Pool, columns: Columns) -> Iterator[tuple[tuple[int, int, int], Counts]]:
        """Yield (island, lane number, stage) with the number of items that a crew works on, shape (m,)."""
        free = np.full(columns.shape[1], pool.size, np.int32)
        for kind in pool.kinds:
            for island, number in kind.places:
                local = columns[island]
                rows = self._served_rows[island, number]
                for stage in range(len(rows) - 1, -1, -1):
                    here = rows[stage][local]
                    if not kind.explicit_queue:
                        here = np.minimum(here, free)
                    free -= here
                    yield (island, number, stage), here

    def busy(self, pool: Pool, columns: Columns) -> Counts:
        """Count crews at work, shape (m,)."""
        count = np.zeros(columns.shape[1], np.int32)
        for _, served in self.served(pool, columns):
            count += served
        return count

    def calling(self, pool: Pool, columns: Columns) -> Counts:
        """Count items that wait for a crew or have one, shape (m,)."""
        count = np.zeros(columns.shape[1], np.int32)
        for kind in pool.kinds:
            for place in kind.places:
                count += self._waiting[place][columns[place[0]]]
        return count

    def assign(self, columns: Columns) -> list[Share]:
        """Give every crew its next item and call crews away where a kind of higher priority needs them."""
        count = columns.shape[1]
        shares = [Share(np.arange(count), columns, np.ones(count, np.int64), 1)]
        for pool in self.pools:
            for position, kind in enumerate(pool.kinds):
                if kind.explicit_queue:
                    shares = [done for share in shares for done in self._settle(pool, position, share)]
        return shares

    def _settle(self, pool: Pool, position: int, share: Share) -> list[Share]:
        """Bring one kind to the number of crews that the kinds before it leave."""
        kind = pool.kinds[position]
        done: list[Share] = []
        work = [share]
        while work:
            todo = work.pop()
            crews = self._crews_left(pool, position, todo.columns)
            serving = self._count(kind, todo.columns, served=True)
            queued = self._count(kind, todo.columns, served=False) - serving
            over = serving > crews
            under = (serving < crews) & (queued > 0)
            settled = ~over & ~under
            if settled.any():
                done.append(_only(todo, settled))
            if over.any():
                work.extend(self._draw(kind, _only(todo, over), take=False))
            if under.any():
                work.extend(self._draw(kind, _only(todo, under), take=True))
        return done

    def _crews_left(self, pool: Pool, position: int, columns: Columns) -> Counts:
        free = np.full(columns.shape[1], pool.size, np.int32)
        for kind in pool.kinds[:position]:
            if kind.explicit_queue:
                free -= self._count(kind, columns, served=True)
            else:
                free -= np.minimum(free, self._count(kind, columns, served=False))
        return free

    def _count(self, kind: PoolKind, columns: Columns, *, served: bool) -> Counts:
        count = np.zeros(columns.shape[1], np.int32)
        for place in kind.places:
            local = columns[place[0]]
            if served:
                for row in self._served_rows[place]:
                    count += row[local]
            else:
                count += self._waiting[place][local]
        return count

    def _draw(self, kind: PoolKind, share: Share, *, take: bool) -> list[Share]:
        """Draw one item among equals: to be taken, or to lose its crew."""
        done: list[Share] = []
        rest = share
        for stage in self._order(kind, take):
            candidates = [
                (island, reached, self._candidates(island, number, stage, take)[rest.columns[island]])
                for island, number in kind.places
                if (reached := self._moves(island, number, stage, take)) is not None
            ]
            if not candidates:
                continue
            everyone = np.sum([weight for _, _, weight in candidates], axis=0)
            here = everyone > 0
            if not here.any():
                continue
            for island, reached, weight in candidates:
                able = weight > 0
                for choices in np.unique(everyone[able]).tolist():
                    done.append(_drawn(rest, able & (everyone == choices), island, reached, weight, int(choices)))
            rest = _only(rest, ~here)
            if not rest.columns.shape[1]:
                break
        return done

    def _order(self, kind: PoolKind, take: bool) -> list[int]:
        stages = max(len(self._served_rows[place]) for place in kind.places)
        return list(range(stages - 1, -2, -1)) if take else list(range(stages))

    def _moves(self, island: int, number: int, stage: int, take: bool) -> NDArray[np.int32] | None:
        chart = self._charts[island]
        return (chart.takes if take else chart.preempts).get((number, stage))

    def _candidates(self, island: int, number: int, stage: int, take: bool) -> Counts:
        chart = self._charts[island]
        lane = chart.layout.lanes[number]
        if not take:
            row = lane.serve[stage]
        elif stage < 0:
            row = lane.fresh
        else:
            row = lane.held[stage]
        return np.asarray(chart.digits[row], np.int32)


def _only(share: Share, condition: NDArray[np.bool_]) -> Share:
    return Share(share.row[condition], share.columns[:, condition], share.weight[condition], share.choices)


def _drawn(
    share: Share,
    able: NDArray[np.bool_],
    island: int,
    reached: NDArray[np.int32],
    weight: Counts,
    choices: int,
) -> Share:
    """Move one item of an island; `weight` of the `choices` equals are there."""
    part = _only(share, able)
    columns = part.columns.copy()
    columns[island] = reached[columns[island]]
    alike = weight[able].astype(np.int64)
    if (alike == choices).all():  # no real choice: nothing to multiply
        return Share(part.row, columns, part.weight, part.choices)
    return Share(part.row, columns, part.weight * alike, part.choices * choices)
