"""Recipes: a mistake is refused by the path of its key; what ships is complete."""

from __future__ import annotations

import json

import pytest

from liverfe.errors import UsageError
from liverfe.phantom import (
    TISSUES,
    Recipe,
    expected_values,
    load_recipe,
    parse_recipe,
    shipped_recipes,
)

SHIPPED = {
    "bench-24-slices",
    "demo-thalassaemia-1p5t",
    "fatty-liver-1p5t",
    "field-gradient-1p5t",
    "low-field-0p55t",
    "moderate-3t",
    "moving-1p5t",
    "normal-liver-1p5t",
    "severe-overload-1p5t",
    "swapped-echoes-1p5t",
    "two-echoes",
}


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("sigma = 8.0", "sgima = 8.0", r"noise\.sigma: give either"),
        ("sigma = 8.0", "sigma = 8.0\nsnr = 50.0", r"noise\.sigma: give either"),
        ("sigma = 8.0", "sigma = -1.0", r"noise\.sigma: must be at least 0"),
        ("sigma = 8.0", "sigma = nan", r"noise\.sigma: must be a finite number"),
        ("sigma = 8.0", "sigma = true", r"noise\.sigma: must be a finite number"),
        ("sigma = 8.0", "sigma = 8.0\nn_chanels = 2", r"noise\.n_chanels.*'n_channels'"),
        ("sigma = 8.0", "sigma = 8.0\nn_channels = 0", r"noise\.n_channels: must be a whole"),
        ("2.3, 4.0", "4.0, 2.3", r"echoes\.times_ms\[2\]: 2\.3 ms must exceed"),
        ("[1.1, 2.3", "[0.0, 2.3", r"echoes\.times_ms\[0\]: must be above 0"),
        ("[1.1, 2.3", '["1.1", 2.3', r"echoes\.times_ms\[0\]: must be a finite number"),
        ("columns = 80", "columns = 80.0", r"geometry\.columns: must be a whole number"),
        ("rows = 64\n", "", r"geometry\.rows: is missing"),
        ("[4.8, 4.4]", "[4.8]", r"geometry\.pixel_size_mm: must hold 2 numbers, not 1"),
        ('oblique_axis = "x"', 'oblique_axis = "w"', r"geometry\.oblique_axis: must be one of x"),
        ("= 12.0", "= 50.0", r"geometry\.oblique_angle_deg: must be above -45 and below 45"),
        ("slope = 0.5", "slope_per_echo = [1.0]", r"storage\.slope_per_echo: must hold 4 numbers"),
        ("slope = 0.5", "slope = 0", r"storage\.slope: must be above 0"),
        ("slope = 0.5", "slope = 1.0\nslope_per_echo = [1.0]", r"slope_per_echo: give either"),
        ('kind = "abdomen"', 'kind = "leg"', r"anatomy\.kind: must be one of abdomen"),
        ("muscle = { r2star_per_s = 35.0,", "muscle = {", r"tissues\.muscle\.r2star_per_s: is mis"),
        ("bowel = {", "bowl = {", r"tissues\.bowel: is missing"),
        ('["spleen"]', '["splen"]', r"regions\[1\]\.structures\[0\]: 'splen' is none of"),
        ('["spleen"]', "[]", r"regions\[1\]\.structures: must be a list of texts"),
        ('name = "left lobe"', 'name = "spleen"', r"regions\[2\]\.name: 'spleen' is already taken"),
        ("seed = 7", "seed = -7", r"seed: must be a whole number from 0"),
        ("seed = 7", 'seed = 7\nstudy_date = "2031-04-02"', r"study_date: must be a date"),
        ("schema = 1", "schema = 2", r"schema: this version reads schema 1"),
        ('title = "Small (synthetic)"', 'title = " "', r"title: must be a text"),
        ("[scanner]", "[scaner]", r"scanner: is missing"),
        ("[noise]", "[[noise]]", r"noise: must be a table"),
        ("schema = 1", "schema = ", r"not valid TOML"),
    ],
)
def test_a_mistake_in_a_recipe_is_refused_by_the_path_of_its_key(
    recipe_text: str, old: str, new: str, message: str
) -> None:
    assert recipe_text.count(old) == 1
    with pytest.raises(UsageError, match=rf"recipe small: .*{message}"):
        parse_recipe(recipe_text.replace(old, new), name="small")


def test_a_key_at_the_top_that_nobody_knows_is_refused(recipe_text: str) -> None:
    with pytest.raises(UsageError, match=r"recipe small: speed: unknown key; did you mean 'seed'"):
        parse_recipe("speed = 1\n" + recipe_text, name="small")


def test_regions_must_be_an_array_of_tables(recipe_text: str) -> None:
    text = recipe_text[: recipe_text.index("[[regions]]")] + '[regions]\nname = "x"\n'
    with pytest.raises(UsageError, match=r"regions: must be an array of tables"):
        parse_recipe(text, name="small")


def test_a_name_that_could_not_stand_in_a_header_is_refused(recipe_text: str) -> None:
    with pytest.raises(UsageError, match="file name holds letters"):
        parse_recipe(recipe_text, name="a\\b")


def test_evenly_spaced_echo_times_have_no_rounding_tail(recipe_text: str) -> None:
    text = recipe_text.replace(
        "times_ms = [1.1, 2.3, 4.0, 7.9]", "first_ms = 1.1\nspacing_ms = 1.1\ncount = 4"
    )
    assert parse_recipe(text, name="small").echo_times_ms == (1.1, 2.2, 3.3, 4.4)


def test_snr_is_the_livers_s0_over_sigma(recipe_text: str) -> None:
    recipe = parse_recipe(recipe_text.replace("sigma = 8.0", "snr = 50.0"), name="small")
    assert recipe.noise.sigma == 400.0 / 50.0


def test_another_seed_is_another_recipe(recipe: Recipe) -> None:
    other = recipe.with_seed(8)
    assert (other.seed, other.title) == (8, recipe.title)
    assert other.digest != recipe.digest
    with pytest.raises(KeyError):
        recipe.tissue("bone")


def test_every_shipped_recipe_is_complete_synthetic_and_has_its_expected_values() -> None:
    recipes = {recipe.name: recipe for recipe in shipped_recipes()}
    assert set(recipes) == SHIPPED
    for name, recipe in recipes.items():
        assert "(synthetic)" in recipe.title
        assert [tissue.name for tissue in recipe.tissues] == list(TISSUES)
        document = json.loads(expected_values(name) or "")
        assert (document["schema"], document["recipe"]) == (1, name)


def test_shipped_recipes_have_seeds_of_their_own() -> None:
    seeds = [recipe.seed for recipe in shipped_recipes()]
    assert len(set(seeds)) == len(seeds)


def test_a_recipe_is_found_by_name_and_by_path(recipe_text: str, tmp_path) -> None:
    path = tmp_path / "mine.toml"
    path.write_text(recipe_text, encoding="utf-8")
    assert load_recipe(path).name == load_recipe(str(path)).name == "mine"
    assert load_recipe("two-echoes").echo_times_ms == (1.2, 3.4)


def test_an_unknown_recipe_is_refused_with_those_there_are(tmp_path) -> None:
    with pytest.raises(UsageError, match=r"no recipe 'demo'.*demo-thalassaemia-1p5t"):
        load_recipe("demo")
    with pytest.raises(UsageError, match=r"recipe gone\.toml: cannot be read"):
        load_recipe(tmp_path / "gone.toml")


def test_a_recipe_without_expected_values_says_so() -> None:
    assert expected_values("nothing-of-the-kind") is None
