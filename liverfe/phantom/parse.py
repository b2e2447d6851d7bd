"""The schema of recipes: which tables and keys there are, and what they may hold."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from datetime import date

from liverfe.errors import UsageError
from liverfe.phantom.abdomen import STRUCTURES, TISSUES
from liverfe.phantom.parse_effects import effects_plan
from liverfe.phantom.reading import RecipeTable
from liverfe.phantom.recipe import (
    AnatomyPlan,
    GeometryPlan,
    NoisePlan,
    Recipe,
    RegionPlan,
    ScannerPlan,
    StoragePlan,
    TissuePlan,
)

__all__ = ["parse_recipe"]

_SCHEMA = 1
_NAME = re.compile(r"[A-Za-z0-9._-]{1,64}")
_LARGEST_SEED = 2**63 - 1
_LARGEST_SIDE = 1024
"""Voxels along any side: a phantom is made in memory."""

_DEFAULT_DATE = date(2031, 4, 2)


def parse_recipe(text: str, *, name: str) -> Recipe:
    """Read a recipe.

    Parameters
    ----------
    text : str
        TOML.
    name : str
        The recipe's name: its file's stem.

    Returns
    -------
    Recipe
        Complete and consistent.

    Raises
    ------
    UsageError
        If it is not TOML, or a key is missing, unknown or holds what it may not; the message
        names the path of the key.
    """
    if not _NAME.fullmatch(name):
        raise UsageError(
            f"recipe {name!r}: a recipe's file name holds letters, digits, hyphens, dots and "
            "underscores, 64 at most: it is written into the files"
        )
    try:
        values = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise UsageError(f"recipe {name}: not valid TOML: {error}") from error
    top = RecipeTable(values, f"recipe {name}: ")
    if top.integer("schema", low=1, high=999) != _SCHEMA:
        raise top.refuse("schema", f"this version reads schema {_SCHEMA}")
    echo_times_ms = _echo_times(top.table("echoes"))
    tissues = _tissues(top.table("tissues"))
    recipe = Recipe(
        name=name,
        title=top.text("title"),
        story=top.text("story"),
        seed=top.integer("seed", low=0, high=_LARGEST_SEED),
        study_date=top.date("study_date", default=_DEFAULT_DATE),
        scanner=_scanner(top.table("scanner")),
        echo_times_ms=echo_times_ms,
        geometry=_geometry(top.table("geometry")),
        noise=_noise(top.table("noise"), tissues),
        storage=_storage(top.table("storage", default={}), len(echo_times_ms)),
        anatomy=_anatomy(top.table("anatomy")),
        tissues=tuple(tissues.values()),
        regions=_regions(top.tables("regions")),
        effects=effects_plan(top.table("effects", default={}), len(echo_times_ms)),
    )
    top.close()
    if recipe.scanner.true_field_t is None and any(t.fat_fraction for t in recipe.tissues):
        raise top.refuse(
            "scanner.imaging_frequency_mhz", "fat needs a field: state it, or field_strength_t"
        )
    return recipe


def _echo_times(table: RecipeTable) -> tuple[float, ...]:
    if "times_ms" in table:
        times = table.numbers("times_ms", above=0.0)
        for i in range(1, len(times)):
            if times[i] <= times[i - 1]:
                raise table.refuse(f"times_ms[{i}]", f"{times[i]:g} ms must exceed the one before")
    else:
        first_ms = table.number("first_ms", above=0.0)
        spacing_ms = table.number("spacing_ms", above=0.0)
        count = table.integer("count", low=1, high=64)
        # Echo times are written to the microsecond, as scanners do.
        times = tuple(round(first_ms + spacing_ms * i, 6) for i in range(count))
    table.close()
    return times


def _scanner(table: RecipeTable) -> ScannerPlan:
    plan = ScannerPlan(
        field_strength_t=table.optional_number("field_strength_t", above=0.0),
        imaging_frequency_mhz=table.optional_number("imaging_frequency_mhz", above=0.0),
        repetition_time_ms=table.number("repetition_time_ms", above=0.0),
        flip_angle_deg=table.number("flip_angle_deg", above=0.0, below=180.0),
        off_resonance_hz=table.number("off_resonance_hz", default=0.0),
    )
    table.close()
    return plan


def _geometry(table: RecipeTable) -> GeometryPlan:
    column_mm, row_mm = table.numbers("pixel_size_mm", count=2, above=0.0)
    x, y, z = table.numbers("centre_mm", count=3, default=(0.0, 0.0, 0.0))
    plan = GeometryPlan(
        columns=table.integer("columns", low=16, high=_LARGEST_SIDE),
        rows=table.integer("rows", low=16, high=_LARGEST_SIDE),
        slices=table.integer("slices", low=1, high=_LARGEST_SIDE),
        pixel_size_mm=(column_mm, row_mm),
        slice_thickness_mm=table.number("slice_thickness_mm", above=0.0),
        slice_spacing_mm=table.number("slice_spacing_mm", above=0.0),
        centre_mm=(x, y, z),
        oblique_axis=table.choice("oblique_axis", ("x", "y", "z"), default="x"),
        oblique_angle_deg=table.number("oblique_angle_deg", above=-45, below=45, default=0.0),
    )
    table.close()
    return plan


def _noise(table: RecipeTable, tissues: Mapping[str, TissuePlan]) -> NoisePlan:
    if ("sigma" in table) == ("snr" in table):
        raise table.refuse("sigma", "give either sigma, or snr (the liver's s0 over sigma)")
    # Sigma 0 is a noise-free study: a reference object for decoding.
    sigma = (
        table.number("sigma", at_least=0.0)
        if "sigma" in table
        else tissues["liver"].s0 / table.number("snr", above=0.0)
    )
    plan = NoisePlan(
        sigma=sigma, n_channels=table.integer("n_channels", low=1, high=256, default=1)
    )
    table.close()
    return plan


def _storage(table: RecipeTable, n_echoes: int) -> StoragePlan:
    if "slope" in table and "slope_per_echo" in table:
        raise table.refuse("slope_per_echo", "give either slope or slope_per_echo")
    slopes = (
        table.numbers("slope_per_echo", count=n_echoes, above=0.0)
        if "slope_per_echo" in table
        else (table.number("slope", above=0.0, default=1.0),) * n_echoes
    )
    plan = StoragePlan(
        slope_per_echo=slopes, bits=table.integer("bits", low=8, high=15, default=12)
    )
    table.close()
    return plan


def _anatomy(table: RecipeTable) -> AnatomyPlan:
    plan = AnatomyPlan(
        kind=table.choice("kind", ("abdomen",)),
        body_half_width_mm=table.number("body_half_width_mm", above=50.0, default=168.0),
        body_half_depth_mm=table.number("body_half_depth_mm", above=50.0, default=116.0),
        fat_layer_mm=table.number("fat_layer_mm", above=0.0, below=45.0, default=14.0),
        body_wall_mm=table.number("body_wall_mm", above=0.0, below=20.0, default=8.0),
    )
    table.close()
    return plan


def _tissues(table: RecipeTable) -> dict[str, TissuePlan]:
    plans = {name: _tissue(table.table(name), name) for name in TISSUES}
    table.close()
    return plans


def _tissue(table: RecipeTable, name: str) -> TissuePlan:
    plan = TissuePlan(
        name=name,
        r2star_per_s=table.number("r2star_per_s", above=0.0),
        heterogeneity_cv=table.number("heterogeneity_cv", at_least=0.0, below=2.0, default=0.0),
        s0=table.number("s0", above=0.0),
        fat_fraction=table.number("fat_fraction", at_least=0.0, below=1.0, default=0.0),
    )
    table.close()
    return plan


def _regions(tables: tuple[RecipeTable, ...]) -> tuple[RegionPlan, ...]:
    plans: list[RegionPlan] = []
    for table in tables:
        name = table.text("name")
        if not name.isprintable() or any(name == plan.name for plan in plans):
            raise table.refuse("name", f"{name!r} is already taken, or cannot be printed")
        structures = table.texts("structures")
        for i, structure in enumerate(structures):
            if structure not in STRUCTURES:
                raise table.refuse(
                    f"structures[{i}]", f"{structure!r} is none of {', '.join(STRUCTURES)}"
                )
        plans.append(
            RegionPlan(
                name=name,
                structures=structures,
                margin_mm=table.number("margin_mm", at_least=0.0, default=0.0),
            )
        )
        table.close()
    return tuple(plans)
