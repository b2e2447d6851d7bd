"""A small recipe, its phantom, and the outside programs that judge the files."""

from __future__ import annotations

import os
import shutil
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from liverfe.phantom import Phantom, Recipe, make_phantom, parse_recipe

RECIPE = """
schema = 1
title = "Small (synthetic)"
story = "For tests."
seed = 7
[scanner]
field_strength_t = 1.5
imaging_frequency_mhz = 63.87
repetition_time_ms = 100.0
flip_angle_deg = 20.0
off_resonance_hz = 60.0
[echoes]
times_ms = [1.1, 2.3, 4.0, 7.9]
[geometry]
columns = 80
rows = 64
slices = 5
pixel_size_mm = [4.8, 4.4]
slice_thickness_mm = 8.0
slice_spacing_mm = 10.0
centre_mm = [3.0, -2.0, 4.0]
oblique_axis = "x"
oblique_angle_deg = 12.0
[noise]
sigma = 8.0
[storage]
slope = 0.5
[anatomy]
kind = "abdomen"
[tissues]
fat = { r2star_per_s = 30.0, s0 = 800.0 }
muscle = { r2star_per_s = 35.0, s0 = 360.0 }
bowel = { r2star_per_s = 22.0, s0 = 500.0 }
kidney = { r2star_per_s = 20.0, s0 = 560.0 }
spleen = { r2star_per_s = 90.0, s0 = 480.0 }
liver = { r2star_per_s = 300.0, s0 = 400.0, heterogeneity_cv = 0.2 }
blood = { r2star_per_s = 9.0, s0 = 680.0 }
fluid = { r2star_per_s = 3.0, s0 = 600.0 }
marrow = { r2star_per_s = 110.0, s0 = 430.0 }
[[regions]]
name = "right lobe"
structures = ["liver right"]
margin_mm = 5.0
[[regions]]
name = "spleen"
structures = ["spleen"]
margin_mm = 4.0
[[regions]]
name = "left lobe"
structures = ["liver left", "vessels left"]
"""

Vary = Callable[..., Recipe]


@pytest.fixture(scope="session")
def recipe_text() -> str:
    return RECIPE


@pytest.fixture(scope="session")
def recipe() -> Recipe:
    return parse_recipe(RECIPE, name="small")


@pytest.fixture(scope="session")
def vary() -> Vary:
    """Make the small recipe with some lines replaced: `vary(("sigma = 8.0", "sigma = 3.0"))`."""

    def make(*changes: tuple[str, str]) -> Recipe:
        text = RECIPE
        for old, new in changes:
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        return parse_recipe(text, name="small")

    return make


@pytest.fixture(scope="session")
def phantom(recipe: Recipe) -> Phantom:
    return make_phantom(recipe, np.random.default_rng(recipe.seed), with_phase=True)


@pytest.fixture(scope="session")
def program() -> Callable[[str], str]:
    """Find a program that the tests need: beside this Python, or on the path."""

    def find(name: str) -> str:
        beside = shutil.which(name, path=str(Path(sys.executable).parent))
        found = beside or shutil.which(name)
        if found is not None:
            return found
        reason = f"{name} is not installed"
        if os.environ.get("CI") == "true":
            pytest.fail(reason)
        pytest.skip(reason)

    return find
