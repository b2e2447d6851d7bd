"""The bibliography is whole, says how it is known, and gives one line a paper."""

from __future__ import annotations

import importlib.resources
import re
import subprocess
import sys

import pytest
from pybtex.database import parse_string
from pybtex.plugin import find_plugin

from liverfe.errors import UsageError
from liverfe.sources import Reference, cite, reference, references

# The papers that curves, band sets and methods of the package rest on.
NEEDED = (
    "hernando2023",
    "wood2005",
    "garbowski2014",
    "hankins2009",
    "henninger2015",
    "dassignies2018",
    "storey2007",
    "kirk2010",
    "bachtiar2019",
    "obrzut2020",
    "pmc8528353",
    "olivieri1997",
    "stpierre2005",
    "guglielmo2023",
    "reeder2023",
    "henninger2020",
    "gudbjartsson1995",
    "constantinides1997",
    "constantinides2004",
    "koay2006",
    "feng2013",
    "sijbers1998",
    "yablonskiy1994",
)


def _raw() -> str:
    return importlib.resources.files("liverfe").joinpath("references.bib").read_text("utf-8")


@pytest.mark.parametrize("key", NEEDED)
def test_every_paper_that_the_package_rests_on_is_there(key: str) -> None:
    assert reference(key).key == key


def test_every_entry_says_how_it_is_known() -> None:
    for entry in references().values():
        assert entry.evidence in ("abstract", "secondary", "memory")
        assert re.search(r"\b(abstract|secondary|memory)\b", entry.note), entry.key
        # The word of the entry is that of its weakest part, so the note must hold it too.
        assert entry.evidence in entry.note, entry.key


def test_the_file_holds_as_many_entries_as_keys_so_none_is_written_twice() -> None:
    # Counted in the text: a parser would drop or refuse the second of two.
    assert len(re.findall(r"^@\w+\{", _raw(), flags=re.MULTILINE)) == len(references())


@pytest.mark.parametrize(
    ("key", "line"),
    [
        # Volume, page and DOI as in the calibrations sheet, sections 2, 5 and 7.
        ("hernando2023", "Hernando D et al. Radiology 2023;306:e213256. doi:10.1148/radiol.213256"),
        ("wood2005", "Wood JC et al. Blood 2005;106:1460–1465. doi:10.1182/blood-2004-10-3982"),
        ("olivieri1997", "Olivieri NF, Brittenham GM. Blood 1997;89:739–761"),
        ("pmc8528353", "Article PMC8528353"),
        ("stpierre2005", "St Pierre TG et al. Blood 2005;105:855–861"),
        (
            "kirk2010",
            "Kirk P et al. Journal of Magnetic Resonance Imaging 2010;32:315–319. PMID 20677256",
        ),
    ],
)
def test_a_paper_is_cited_in_one_line(key: str, line: str) -> None:
    assert cite(key) == line


def test_no_line_holds_markup_or_breaks() -> None:
    for entry in references().values():
        for text in (entry.line, entry.title, *entry.authors):
            assert text.isprintable(), entry.key
            assert not set(text) & set("{}\\"), entry.key


def test_the_file_is_bibtex_that_the_documentation_can_print() -> None:
    style = find_plugin("pybtex.style.formatting", "plain")()
    formatted = list(style.format_bibliography(parse_string(_raw(), "bibtex")))
    assert {entry.key for entry in formatted} == set(references())
    for entry in formatted:
        assert "arXiv" not in entry.text.render_as("text")


def test_an_unknown_key_names_the_nearest() -> None:
    with pytest.raises(UsageError, match="hernando2023"):
        cite("hernando2032")


def test_an_entry_that_does_not_say_how_it_is_known_is_refused() -> None:
    whole = reference("feng2013")
    facts = {name: getattr(whole, name) for name in Reference.__dataclass_fields__}
    with pytest.raises(ValueError, match="does not say how"):
        Reference(**{**facts, "note": ""})
    with pytest.raises(ValueError, match="evidence"):
        Reference(**{**facts, "evidence": "certain"})
    with pytest.raises(ValueError, match="names nothing"):
        Reference(**{**facts, "authors": (), "title": "", "identifier": ""})


def test_the_bibliography_is_read_only() -> None:
    with pytest.raises(TypeError):
        references()["new"] = reference("feng2013")  # type: ignore[index]


def test_importing_the_room_does_not_load_the_parser() -> None:
    code = "import sys, liverfe.sources; sys.exit('pybtex' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
