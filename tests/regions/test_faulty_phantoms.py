"""Phantoms with a fault each: what the whole assessment says of them, against their expected file.

The phantom makes its signal with its own equations; the expected R2* of the faulty signal is a
plain least-squares fit (SciPy) of the noise-free curve, done outside.
"""

from __future__ import annotations

import json
from functools import cache

import numpy as np
import pytest

from liverfe.errors import StudyRefused
from liverfe.outlines import LabelMask, Region
from liverfe.phantom import expected_values, load_recipe, make_phantom
from liverfe.study import Method, StudyResult, assess_study, refused_result

pytestmark = pytest.mark.slow

FAULTY = ("fatty-liver-1p5t", "moving-1p5t", "field-gradient-1p5t", "swapped-echoes-1p5t")


@cache
def assessed(name: str) -> StudyResult:
    recipe = load_recipe(name)
    phantom = make_phantom(recipe, np.random.default_rng(recipe.seed))
    liver = LabelMask(mask=phantom.regions == 1, grid=phantom.grid)
    region = Region(name="right lobe", organ="liver", shape=liver)
    try:
        return assess_study(phantom.stack(), [region], Method())
    except StudyRefused as refusal:
        return refused_result(refusal.findings, Method())


@pytest.mark.parametrize("name", FAULTY)
def test_a_faulty_phantom_gives_what_its_expected_file_states(name: str) -> None:
    result = assessed(name)
    entries = json.loads(expected_values(name) or "")["expected"]
    wanted = [entry for entry in entries if entry["where"] == "result.json"]
    assert wanted
    for entry in wanted:
        if entry["quantity"] == "outcome":
            assert result.outcome == entry["value"]
        elif entry["quantity"] == "findings":
            assert entry["contains"] in {finding.code for finding in result.findings}
        else:
            assert entry["quantity"] == "r2star_per_s"
            found = result.regions[0].summary.r2star.value
            assert found == pytest.approx(entry["value"], abs=entry["tolerance"])


@pytest.mark.parametrize("name", FAULTY[:3])
def test_the_caution_of_a_faulty_phantom_leads_back_to_its_truth(name: str) -> None:
    """R2* times one plus the stated shift is the recipe's, within 3 %."""
    result = assessed(name)
    (caution,) = [finding for finding in result.findings if finding.level == "caution"]
    shift = float(caution.text.split("would change by ")[1].split(" %")[0]) / 100.0
    truth = load_recipe(name).tissue("liver").r2star_per_s
    corrected = result.regions[0].summary.r2star.value * (1.0 + shift)
    assert corrected == pytest.approx(truth, rel=0.03)
