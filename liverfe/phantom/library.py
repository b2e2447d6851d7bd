"""Finding recipes: those that ship, and a file of one's own."""

from __future__ import annotations

import importlib.resources
from importlib.resources.abc import Traversable
from pathlib import Path

from liverfe.errors import UsageError
from liverfe.phantom.parse import parse_recipe
from liverfe.phantom.recipe import Recipe

__all__ = ["expected_values", "load_recipe", "shipped_recipes"]


def load_recipe(name_or_path: str | Path) -> Recipe:
    """Load a recipe that ships by its name, or any recipe by its path.

    Parameters
    ----------
    name_or_path : str or Path
        A name as `shipped_recipes` lists them, or the path of a ``.toml`` file.

    Returns
    -------
    Recipe
        Checked and complete.

    Raises
    ------
    UsageError
        If there is no such recipe or file, or it is not a valid recipe.
    """
    path = Path(name_or_path)
    if path.suffix == ".toml":
        try:
            return parse_recipe(path.read_text(encoding="utf-8"), name=path.stem)
        except (OSError, UnicodeDecodeError) as error:
            raise UsageError(f"recipe {path.name}: cannot be read: {error}") from error
    shipped = _shipped_files()
    if str(name_or_path) not in shipped:
        raise UsageError(
            f"no recipe {str(name_or_path)!r}: give the path of a .toml file, or one of "
            f"{', '.join(shipped)}"
        )
    text = shipped[str(name_or_path)].read_text(encoding="utf-8")
    return parse_recipe(text, name=str(name_or_path))


def shipped_recipes() -> list[Recipe]:
    """List the recipes that ship with liverfe.

    Returns
    -------
    list of Recipe
        By name.
    """
    return [load_recipe(name) for name in _shipped_files()]


def expected_values(name: str) -> str | None:
    """Read the expected values that ship with a recipe.

    Parameters
    ----------
    name : str
        Name of a shipped recipe.

    Returns
    -------
    str or None
        JSON text: values, tolerances and why. None where the recipe has none.
    """
    file = _recipe_folder() / "expected" / f"{name}.json"
    return file.read_text(encoding="utf-8") if file.is_file() else None


def _shipped_files() -> dict[str, Traversable]:
    files = [file for file in _recipe_folder().iterdir() if file.name.endswith(".toml")]
    return {file.name.removesuffix(".toml"): file for file in sorted(files, key=lambda f: f.name)}


def _recipe_folder() -> Traversable:
    """Return the recipes inside an installed package, else the top-level folder of a checkout."""
    package = importlib.resources.files("liverfe.phantom") / "recipes"
    if package.is_dir():
        return package
    checkout = Path(__file__).parents[2] / "phantoms"
    if checkout.is_dir():
        return checkout
    raise UsageError("this installation holds no phantom recipes; install liverfe again")
