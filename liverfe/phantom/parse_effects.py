"""The part of a recipe's schema that says what went wrong in the scan."""

from __future__ import annotations

from liverfe.phantom.effects import EffectsPlan, MotionPlan
from liverfe.phantom.reading import RecipeTable

__all__ = ["effects_plan"]

_LARGEST_SHIFT = 512


def effects_plan(table: RecipeTable, n_echoes: int) -> EffectsPlan:
    """Read the table ``[effects]``.

    Parameters
    ----------
    table : RecipeTable
        Empty where a recipe has none.
    n_echoes : int
        How many images the recipe makes of each slice.

    Returns
    -------
    EffectsPlan
        By default nothing.

    Raises
    ------
    UsageError
        If a key is unknown or holds what it may not.
    """
    order = table.integers("order", low=1, high=n_echoes, default=())
    if order and sorted(order) != list(range(1, n_echoes + 1)):
        raise table.refuse("order", f"must hold each number from 1 to {n_echoes} once")
    plan = EffectsPlan(
        field_gradient_ut_per_m=table.number("field_gradient_ut_per_m", at_least=0.0, default=0.0),
        alternating_scale=table.number("alternating_scale", above=0.0, default=1.0),
        motion=tuple(_motion(one, n_echoes) for one in table.tables("motion", default=[])),
        lost_echo=table.optional_integer("lost_echo", low=2, high=n_echoes),
        order=order,
        saturation=table.optional_number("saturation", above=0.0),
    )
    table.close()
    return plan


def _motion(table: RecipeTable, n_echoes: int) -> MotionPlan:
    plan = MotionPlan(
        echoes=table.integers("echoes", low=1, high=n_echoes),
        scale=table.number("scale", at_least=0.0, default=1.0),
        ghost=table.number("ghost", above=-1.0, below=1.0, default=0.0),
        shift_rows=table.integer("shift_rows", low=1, high=_LARGEST_SHIFT, default=16),
    )
    table.close()
    return plan
