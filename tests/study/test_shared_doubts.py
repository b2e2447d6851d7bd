"""Motion passes over organs: one finding names all regions that show it."""

from __future__ import annotations

import numpy as np

from liverfe.outlines import LabelMask, Region
from liverfe.study import Method, assess_study
from tests.scenes import Scene, make_scene


def moved(scene: Scene) -> Scene:
    m = np.array(scene.stack.magnitude)
    m[scene.body, 2:5] *= 0.7
    return scene.with_magnitude(m)


def test_a_doubt_of_several_regions_is_told_once_and_names_them() -> None:
    scene = moved(make_scene(200.0, snr=100.0))
    grid = scene.stack.grid
    other = np.zeros(grid.shape, dtype=bool)
    other[14:28, 26:46] = True
    spleen = Region(name="spleen", organ="spleen", shape=LabelMask(mask=other, grid=grid))
    result = assess_study(scene.stack, [spleen, scene.region()], Method())
    (told,) = [finding for finding in result.findings if finding.code == "echoes-disagree"]
    assert told.text.startswith("Region liver:")
    assert told.text.endswith("other regions too: spleen.")
    for region in result.regions:
        assert "echoes-disagree" in {finding.code for finding in region.summary.findings}


def test_a_doubt_of_one_region_stays_as_it_is() -> None:
    scene = moved(make_scene(200.0, snr=100.0))
    result = assess_study(scene.stack, [scene.region()], Method())
    (told,) = [finding for finding in result.findings if finding.code == "echoes-disagree"]
    assert told in result.regions[0].summary.findings
