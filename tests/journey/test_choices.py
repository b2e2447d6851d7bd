"""A locked method stays locked, and keys are checked before any work."""

from __future__ import annotations

from pathlib import Path

import pytest

from liverfe.errors import UsageError
from liverfe.journey import choose_method, resolve_settings

OWN_CURVE = """
key = "house_2031"
citation = "Synthetic Clinic, 2031"
field_strength_t = 1.5
form = "linear"
equation = "LIC = 0.03 R2*"
slope = 0.03
intercept = 0.0
published_unit = "mg/g"
cohort = "invented"
fit_model_of_origin = "Rician maximum likelihood"
noise_handling = "corrected"
reference_method = "invented"
example = { r2star_per_s = 300.0, lic_mg_per_g = 9.0 }
"""


def choose(tmp_path: Path, *, project: str = "", **flags: object) -> tuple[object, ...]:
    (tmp_path / "liverfe.toml").write_text(project, encoding="utf-8")
    settings = resolve_settings(
        flags, environment={"LIVERFE_CONFIG_DIR": str(tmp_path)}, working_folder=tmp_path
    )
    return choose_method(settings)


def method_file(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "method.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_the_house_method_takes_curve_and_bands_from_the_call(tmp_path: Path) -> None:
    method, _ = choose(tmp_path, curve="garbowski2014", bands="pmc8528353")
    assert (method.curve, method.bands) == ("garbowski2014", "pmc8528353")
    plain, _ = choose(tmp_path)
    assert plain.curve is None
    assert plain.id != method.id


def test_a_flag_cannot_contradict_a_locked_method(tmp_path: Path) -> None:
    locked = method_file(tmp_path, 'name = "site"\ncurve = "garbowski2014"\n')
    method, _ = choose(tmp_path, method=locked)
    assert method.curve == "garbowski2014"
    same, _ = choose(tmp_path, method=locked, curve="garbowski2014")
    assert same == method
    with pytest.raises(UsageError, match="fixes curve = 'garbowski2014'"):
        choose(tmp_path, method=locked, curve="hernando2023_1p5")


def test_a_weaker_setting_gives_way_to_a_locked_method(tmp_path: Path) -> None:
    locked = method_file(tmp_path, 'curve = "garbowski2014"\n')
    method, _ = choose(tmp_path, method=locked, project='curve = "hernando2023_1p5"')
    assert method.curve == "garbowski2014"


def test_what_a_method_file_leaves_open_may_be_chosen(tmp_path: Path) -> None:
    method, _ = choose(
        tmp_path, method=method_file(tmp_path, "interval = 0.9\n"), curve="garbowski2014"
    )
    assert (method.interval, method.curve) == (0.9, "garbowski2014")


@pytest.mark.parametrize(
    ("flags", "proposed"),
    [({"curve": "hernando2023_1p"}, "hernando2023_1p5"), ({"bands": "pmc852835"}, "pmc8528353")],
)
def test_a_misspelt_key_is_answered_with_the_nearest(
    tmp_path: Path, flags: dict[str, object], proposed: str
) -> None:
    with pytest.raises(UsageError, match=f"Did you mean '{proposed}'"):
        choose(tmp_path, **flags)


@pytest.mark.parametrize("text", ["not toml", 'estimater = "offset"', "interval = 2.0"])
def test_a_method_file_that_cannot_be_is_refused(tmp_path: Path, text: str) -> None:
    with pytest.raises(UsageError, match="method"):
        choose(tmp_path, method=method_file(tmp_path, text))


def test_a_sites_own_curve_applies_only_by_name(tmp_path: Path) -> None:
    own = tmp_path / "own.toml"
    own.write_text(OWN_CURVE, encoding="utf-8")
    with pytest.raises(UsageError, match="--curve house_2031"):
        choose(tmp_path, curve_file=[own])
    method, curves = choose(tmp_path, curve_file=[own], curve="house_2031")
    assert method.curve == "house_2031"
    assert [curve.is_local for curve in curves] == [True]
    # Named in a settings file it may lie ready without being used.
    method, curves = choose(tmp_path, project='curve_file = "own.toml"')
    assert method.curve is None
    assert len(curves) == 1
