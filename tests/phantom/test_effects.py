"""What goes wrong in a scan, against closed forms; and nothing goes wrong unasked."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest

from liverfe.errors import UsageError
from liverfe.phantom import Phantom, load_recipe, make_phantom, parse_recipe, truth_document
from liverfe.phantom.effects import EffectsPlan, fat_water, gradient_loss, true_times_ms

TIMES_MS = (1.1, 2.3, 4.0, 7.9)


def with_effects(recipe_text: str, effects: str) -> Phantom:
    recipe = parse_recipe(f"{recipe_text}\n{effects}", name="small")
    return make_phantom(recipe, np.random.default_rng(7), with_phase=True)


# Magnitude and phase of c(TE) for the six liver peaks at 1.5 T: test vector of the methods sheet
# (3.3), computed independently of this project; here fat and water 20 and 80 % at 1.2 ms steps.
def test_fat_turns_against_water_as_tabulated() -> None:
    tabulated = [
        0.055065 - 0.898223j,
        -0.794584 + 0.066783j,
        0.156256 + 0.826183j,
        0.791540 - 0.130326j,
    ]
    for k, c in enumerate(tabulated):
        made = fat_water(0.2, 1.2 * (k + 1), 1.5)
        assert made == pytest.approx(0.8 + 0.2 * c, abs=2e-6)


def test_only_the_fatty_tissue_swings(recipe_text: str, phantom: Phantom) -> None:
    text = recipe_text.replace(
        "liver = { r2star_per_s = 300.0,", "liver = { fat_fraction = 0.3, r2star_per_s = 300.0,"
    )
    fatty = with_effects(text, "")
    ratio = fatty.clean_magnitude() / np.maximum(phantom.clean_magnitude(), 1e-9)
    liver = phantom.structures.mask(("liver right", "liver left"))
    spleen = phantom.structures.mask(("spleen",))
    field_t = 63.87 / 42.577478518
    expected = [abs(fat_water(0.3, time, field_t)) for time in TIMES_MS]
    np.testing.assert_allclose(ratio[liver].mean(axis=0), expected, rtol=1e-4)
    np.testing.assert_allclose(ratio[spleen], 1.0, rtol=1e-6)
    turned = np.angle(fatty.clean_complex()[liver] / phantom.clean_complex()[liver])
    at_23 = np.angle(fat_water(0.3, 2.3, field_t))
    np.testing.assert_allclose(turned[:, 1], at_23, atol=1e-4)
    assert truth_document(fatty)["effects"] == {"fat_fraction": {"liver": 0.3}}


def test_fat_without_a_field_is_refused(recipe_text: str) -> None:
    text = recipe_text.replace("field_strength_t = 1.5\n", "").replace(
        "imaging_frequency_mhz = 63.87\n", ""
    )
    fatty = text.replace("liver = { ", "liver = { fat_fraction = 0.3, ")
    with pytest.raises(UsageError, match=r"imaging_frequency_mhz: fat needs a field"):
        parse_recipe(fatty, name="small")


def test_a_gradient_of_one_turn_leaves_no_signal() -> None:
    # 42.577 MHz/T x 100 uT/m x 8 mm = 34.06 Hz: first zero at 29.36 ms, sinc(1/2) = 2/pi half-way.
    first_zero_ms = 1000.0 / (42.577478518 * 100.0 * 8.0 / 1000.0)
    assert gradient_loss(100.0, 8.0, first_zero_ms) == pytest.approx(0.0, abs=1e-12)
    assert gradient_loss(100.0, 8.0, first_zero_ms / 2) == pytest.approx(2 / math.pi)
    assert gradient_loss(0.0, 8.0, 5.0) == 1.0


def test_a_gradient_dims_each_echo_by_its_sinc(recipe_text: str, phantom: Phantom) -> None:
    dim = with_effects(recipe_text, "[effects]\nfield_gradient_ut_per_m = 100.0")
    inside = phantom.s0 > 0
    ratio = dim.clean_magnitude()[inside] / phantom.clean_magnitude()[inside]
    x = 42.577478518e6 * 100e-6 * 8e-3 * np.array(TIMES_MS) * 1e-3
    np.testing.assert_allclose(ratio[::50], np.broadcast_to(np.sinc(x), ratio[::50].shape), 1e-5)


def test_motion_scales_its_echoes_and_adds_a_shifted_copy(
    recipe_text: str, phantom: Phantom
) -> None:
    moved = with_effects(
        recipe_text,
        "[[effects.motion]]\nechoes = [2]\nscale = 0.9\n"
        "[[effects.motion]]\nechoes = [4]\nghost = 0.25\nshift_rows = 5",
    )
    was, now = phantom.clean_magnitude(), moved.clean_magnitude()
    np.testing.assert_allclose(now[..., 1], 0.9 * was[..., 1], rtol=1e-6)
    ghost = was[..., 3] + 0.25 * np.roll(was[..., 3], 5, axis=1)
    np.testing.assert_allclose(now[..., 3], ghost, rtol=1e-5)
    np.testing.assert_array_equal(now[..., [0, 2]], was[..., [0, 2]])


def test_every_second_echo_may_be_weaker(recipe_text: str, phantom: Phantom) -> None:
    uneven = with_effects(recipe_text, "[effects]\nalternating_scale = 0.85")
    inside = phantom.s0 > 0
    expected = phantom.clean_magnitude()[inside] * np.float32([1.0, 0.85, 1.0, 0.85])
    np.testing.assert_allclose(uneven.clean_magnitude()[inside], expected, rtol=1e-6)


def test_after_a_lost_echo_images_bear_the_time_before(recipe_text: str) -> None:
    lost = with_effects(recipe_text, "[effects]\nlost_echo = 2")
    assert lost.recipe.echo_times_ms == TIMES_MS
    # 7.9 + (7.9 - 4.0) = 11.8 ms takes the last place.
    truth = truth_document(lost)["effects"]
    assert truth == {"lost_echo": 2, "true_echo_times_ms": [1.1, 4.0, 7.9, 11.8]}
    spleen = lost.structures.mask(("spleen",))
    clean = lost.clean_magnitude()[spleen]
    np.testing.assert_allclose(clean[:, 1], 480.0 * math.exp(-90.0 * 4.0e-3), rtol=1e-5)


def test_another_order_takes_other_times() -> None:
    plan = EffectsPlan(order=(1, 3, 2, 4))
    assert true_times_ms(TIMES_MS, plan) == (1.1, 4.0, 2.3, 7.9)
    both = EffectsPlan(order=(4, 3, 2, 1), lost_echo=4)
    assert true_times_ms(TIMES_MS, both) == (11.8, 4.0, 2.3, 1.1)


def test_saturation_cuts_the_noise_too(recipe_text: str, phantom: Phantom) -> None:
    cut = with_effects(recipe_text, "[effects]\nsaturation = 300.0")
    assert cut.magnitude.max() == 300.0
    np.testing.assert_array_equal(cut.magnitude, np.minimum(phantom.magnitude, 300.0))


@pytest.mark.parametrize(
    ("effects", "message"),
    [
        ("[effects]\nlost_ecko = 2", r"effects\.lost_ecko: unknown key; did you mean 'lost_echo'"),
        ("[effects]\nlost_echo = 1", r"effects\.lost_echo: must be a whole number from 2 to 4"),
        ("[effects]\norder = [1, 2, 2, 4]", r"effects\.order: must hold each number from 1 to 4"),
        ("[effects]\norder = [1, 2, 3, 9]", r"effects\.order\[3\]: must be a whole number from 1"),
        ("[effects]\norder = 3", r"effects\.order: must be a list of whole numbers"),
        ("[effects]\nsaturation = 0", r"effects\.saturation: must be above 0"),
        ("[effects]\nalternating_scale = 0", r"effects\.alternating_scale: must be above 0"),
        ("[effects]\nfield_gradient_ut_per_m = -1", r"effects\.field_gradient.*at least 0"),
        ("[effects]\nmotion = 1", r"effects\.motion: must be an array of tables"),
        ("[[effects.motion]]\nscale = 0.5", r"effects\.motion\[0\]\.echoes: is missing"),
        ("[[effects.motion]]\nechoes = [0]", r"effects\.motion\[0\]\.echoes\[0\]: must be a whole"),
        ("[[effects.motion]]\nechoes = [1]\nghost = 2", r"motion\[0\]\.ghost: must be above -1"),
    ],
)
def test_a_mistake_in_an_effect_is_refused_by_its_path(
    recipe_text: str, effects: str, message: str
) -> None:
    with pytest.raises(UsageError, match=rf"recipe small: .*{message}"):
        parse_recipe(f"{recipe_text}\n{effects}", name="small")


def test_a_fat_fraction_is_a_share(vary) -> None:
    with pytest.raises(UsageError, match=r"tissues\.liver\.fat_fraction: must be"):
        vary(("heterogeneity_cv = 0.2", "fat_fraction = 1.5"))


def test_a_recipe_without_effects_is_the_study_it_was_before_effects_were_known() -> None:
    """Digests of the first released version, from its own run: UIDs and files hang on them."""
    released = {
        "normal-liver-1p5t": "b0d7e0e713376a73a0efdd6316a0d4151d72299fa9bd54865531944069b6c7ca",
        "two-echoes": "38005fe9fa797c25731ba1cfacdcaf3617dc93e7bf443ee836faae6936d4b26d",
    }
    assert {name: load_recipe(name).digest for name in released} == released


def test_an_effect_makes_another_study(recipe_text: str) -> None:
    plain = parse_recipe(recipe_text, name="small")
    moved = parse_recipe(f"{recipe_text}\n[effects]\nalternating_scale = 0.9", name="small")
    assert moved.digest != plain.digest
    assert dataclasses.replace(moved, effects=EffectsPlan()).digest == plain.digest
