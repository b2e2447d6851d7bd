"""`liverfe phantom`: synthetic studies with known truth."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from liverfe.cli.frame import AsJson, Command, Group, Out
from liverfe.cli.screen import say, show, show_document, show_table
from liverfe.wording import command_help
from liverfe.wording import command_line as words

app = typer.Typer(
    cls=Group,
    help=command_help.PHANTOM,
    epilog=command_help.PHANTOM_EXAMPLES,
    no_args_is_help=True,
    rich_markup_mode=None,
)


@app.command(
    "make", cls=Command, help=command_help.PHANTOM_MAKE, epilog=command_help.PHANTOM_MAKE_EXAMPLES
)
def make(
    recipe: Annotated[str, typer.Argument(metavar="RECIPE", help=command_help.RECIPE)],
    out: Out,
    file_format: Annotated[
        str, typer.Option("--format", metavar="dicom|nifti", help=command_help.OPT_FORMAT)
    ] = "dicom",
    layout: Annotated[
        str | None, typer.Option("--layout", metavar="NAME", help=command_help.OPT_LAYOUT)
    ] = None,
    seed: Annotated[
        int | None, typer.Option("--seed", metavar="N", min=0, help=command_help.OPT_SEED)
    ] = None,
    as_json: AsJson = False,
) -> int:
    """Make a synthetic study from a recipe."""
    from liverfe.phantom import make_study

    made = make_study(_recipe(recipe), out, format=file_format, layout=layout, seed=seed)
    if as_json:
        show_document(
            {
                "schema": 1,
                "folder": str(made.folder),
                "images": str(made.images),
                "n_image_files": made.n_image_files,
                "labels": str(made.labels),
                "outlines": str(made.outlines),
                "truth_file": str(made.truth_file),
                "truth": made.truth,
            }
        )
        return 0
    say(words.PHANTOM_MADE.format(n=made.n_image_files, path=made.folder))
    show(words.PHANTOM_NEXT.format(images=made.images, regions=made.labels))
    return 0


@app.command(
    "list", cls=Command, help=command_help.PHANTOM_LIST, epilog=command_help.PHANTOM_LIST_EXAMPLES
)
def list_recipes(as_json: AsJson = False) -> int:
    """List the recipes that ship."""
    from liverfe.phantom import shipped_recipes

    recipes = shipped_recipes()
    if as_json:
        listed = [{"name": recipe.name, "title": recipe.title} for recipe in recipes]
        show_document({"schema": 1, "recipes": listed})
        return 0
    show_table(
        words.RECIPES_COLUMNS,
        [(recipe.name, recipe.title) for recipe in recipes],
        title=words.RECIPES_TITLE,
    )
    return 0


def _recipe(name: str) -> str | Path:
    """Check the name of a recipe here, where the nearest spelling can be proposed."""
    from liverfe.errors import UsageError
    from liverfe.journey import nearest
    from liverfe.phantom import shipped_recipes

    if name.endswith(".toml"):
        return Path(name)
    known = [recipe.name for recipe in shipped_recipes()]
    if name not in known:
        raise UsageError(words.RECIPE_UNKNOWN.format(name=name, nearest=nearest(name, known)))
    return name
