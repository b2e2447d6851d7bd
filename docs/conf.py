"""Settings of the documentation, built by ``scripts/check documents`` with warnings as errors."""

from __future__ import annotations

import re
from pathlib import Path

PACKAGE = Path(__file__).resolve().parents[1] / "liverfe"
FOUND_VERSION = re.search(
    r'^__version__ = "(.+)"', (PACKAGE / "__init__.py").read_text(encoding="utf-8"), re.MULTILINE
)

project = "liverfe"
author = "The liverfe developers"
copyright = "the liverfe developers, Apache-2.0"
release = FOUND_VERSION[1] if FOUND_VERSION else "unknown"

extensions = ["myst_parser", "sphinxcontrib.bibtex"]
myst_enable_extensions = ["deflist", "dollarmath", "fieldlist"]
myst_heading_anchors = 3
nitpicky = True
smartquotes = False  # two hyphens before an option must stay two
exclude_patterns = ["_build"]

# The package's own references, the ones that its numbers name: one file, cited by key in both.
bibtex_bibfiles = ["../liverfe/references.bib"]
bibtex_default_style = "plain"
bibtex_reference_style = "label"

html_theme = "alabaster"
html_title = "liverfe"
html_show_sourcelink = False
html_theme_options = {"description": "liver iron from MRI", "fixed_sidebar": True}
