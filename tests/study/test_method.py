"""A method holds every choice, refuses impossible ones and has an id that tells any two apart."""

from __future__ import annotations

from dataclasses import replace

import pytest

from liverfe.errors import UsageError
from liverfe.study import Method


def test_two_methods_that_differ_in_one_choice_have_two_ids() -> None:
    changes = [
        {}, {"estimator": "first-moment"}, {"noise": "residual"}, {"noise": "given", "sigma": 2.0},
        {"noise": "given", "sigma": 2.1}, {"n_channels": 4}, {"voxel_relative_se": 0.2},
        {"trim": "none"}, {"trim_mads": 4.0}, {"interval": 0.9}, {"censored_share": 0.25},
        {"curve": "wood2005"}, {"bands": "olivieri1997"},
    ]  # fmt: skip
    assert len({Method(**change).id for change in changes}) == len(changes)
    assert Method().id == Method().id


@pytest.mark.parametrize(
    "change",
    [
        {"estimator": "best"}, {"noise": "none"}, {"noise": "given"}, {"sigma": 3.0},
        {"noise": "given", "sigma": -1.0}, {"noise": "given", "sigma": float("inf")},
        {"n_channels": 0}, {"n_channels": 65},
        {"voxel_relative_se": 0.0}, {"voxel_relative_se": 0.6}, {"trim": "all"},
        {"trim_mads": 0.5}, {"interval": 1.0}, {"censored_share": 0.6},
    ],
)  # fmt: skip
def test_impossible_choices_are_refused_by_name(change: dict[str, object]) -> None:
    with pytest.raises(UsageError, match=r"method: \w+ = .* wanted: "):
        replace(Method(), **change)


@pytest.mark.parametrize(
    ("settings", "words"),
    [
        ({"estimater": "rician-ml"}, "unknown setting 'estimater'"),
        ({"trim_mads": "three"}, "trim_mads = 'three' is of the wrong kind"),
        ({"n_channels": True}, "n_channels = True is of the wrong kind"),
        ({"curve": 3}, "curve = 3 is of the wrong kind"),
    ],
)
def test_a_method_file_with_a_mistake_is_refused(settings: dict[str, object], words: str) -> None:
    with pytest.raises(UsageError, match=words):
        Method.from_mapping(settings)


def test_a_method_file_changes_what_it_names_and_nothing_else() -> None:
    method = Method.from_mapping({"name": "site", "trim_mads": 4, "curve": "wood2005"})
    assert method == Method(name="site", trim_mads=4, curve="wood2005")
