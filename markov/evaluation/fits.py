"""What stages fitted to a spread, or to a fixed time, do to the chain: how well they fit, how many states they add."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TypeVar

from markov.model import Model, TimeShape
from markov.model.durations import ShapedTime
from markov.model.part import Part
from markov.quantities import Quantity
from markov.states import prepare
from markov.states.fitting import Fit, fit_stages

_Value = TypeVar("_Value")

#: The states with and without the stages are counted up to this many.
_COUNTED_UP_TO = 50_000


def fitted_times(model: Model) -> tuple[str, ...]:
    """Say of every time with a spread, and of every fixed time, which stages stand for it and how well they fit."""
    shapes = dict(_shapes(model))
    if not shapes:
        return ()
    told = [_told(where, shape, fit_stages(shape)) for where, shape in shapes.items()]
    with_stages = prepare(model).most_states
    if with_stages <= _COUNTED_UP_TO:
        without = prepare(_without_shapes(model)).most_states
        told.append(f"stages in place of exponential times: {with_stages:,} states at most in place of {without:,}")
    return tuple(told)


def _told(where: str, shape: TimeShape, fit: Fit) -> str:
    stages = f"{fit.stages} stage{'s' if fit.stages > 1 else ''}"
    if shape.is_fixed:
        return (
            f"{where}: a fixed time, approximated by {stages} of equal mean; the mean is exact, "
            f"the standard deviation {100 * fit.spread:.3g} % of it and not 0"
        )
    third = ""
    if abs(fit.skewness_gap) > 1e-9:
        third = (
            f", the third moment about the mean off by {fit.skewness_gap:+.2g} of the cube of the mean from that of a "
            "gamma law"
        )
    return (
        f"{where}: {stages} fitted to the mean and the standard deviation; the mean is exact, the standard deviation "
        f"{100 * fit.spread:.6g} % of it{third}"
    )


def _shapes(model: Model) -> Iterator[tuple[str, TimeShape]]:
    """Yield where a time with a shape stands, and the shape."""
    found: dict[str, TimeShape | None] = {}
    for name, unit in model.units.items():
        found[f"units.{name}.repair_time"] = unit.repair_time_shape
        found[f"units.{name}.logistic_delay"] = unit.logistic_delay_shape
        for mode, given in unit.failure_modes.items():
            found[f"units.{name}.failure_modes.{mode}.repair_time"] = given.repair_time_shape
    for name, group in model.groups.items():
        found[f"groups.{name}.switchover.time"] = group.takeover_shape
        found[f"groups.{name}.switchover.uncovered.time"] = group.outcome_shape
        if group.switch is not None:
            found[f"groups.{name}.switchover.switch.repair_time"] = group.switch.repair_time_shape
    for name, pool in model.spares.items():
        found[f"spares.{name}.lead_time"] = pool.lead_time_shape
        found[f"spares.{name}.swap_time"] = pool.swap_time_shape
    return ((where, shape) for where, shape in found.items() if shape is not None)


def _without_shapes(value: _Value) -> _Value:
    """Return the same with exponential times of the same means."""
    plain: object = value
    if isinstance(value, ShapedTime):
        plain = Quantity(value.text, value.dimension, value.exact, value.parameters, value.expression)
    elif isinstance(value, Part):
        fields = {name: getattr(value, name) for name in type(value).model_fields}
        update = {name: changed for name, each in fields.items() if (changed := _without_shapes(each)) is not each}
        plain = value.model_copy(update=update) if update else value
    elif isinstance(value, Mapping):
        items = {key: _without_shapes(each) for key, each in value.items()}
        plain = items if any(items[key] is not value[key] for key in items) else value
    elif isinstance(value, tuple):
        parts = tuple(_without_shapes(each) for each in value)
        plain = parts if any(new is not old for new, old in zip(parts, value, strict=True)) else value
    return plain  # type: ignore[return-value]
