"""Literature references by key, from the package's own ``references.bib``.

The bibliography is the only place where a paper is written out; code, reports and documentation
name it by its key (``hernando2023``). Each entry says how its own bibliographic data are known:
``abstract`` (read in the paper's abstract or page), ``secondary`` (quoted elsewhere) or ``memory``.
"""

from __future__ import annotations

import difflib
import importlib.resources
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from types import MappingProxyType
from typing import TYPE_CHECKING, Literal, get_args

from liverfe.errors import UsageError

if TYPE_CHECKING:
    from pybtex.database import Entry, Person

__all__ = ["HowKnown", "Reference", "cite", "reference", "references"]

HowKnown = Literal["abstract", "secondary", "memory"]

_BIBLIOGRAPHY = "references.bib"

_AND_OTHERS = "others"
"""How BibTeX abbreviates a list of authors."""

_NO_BRACES = str.maketrans("", "", "{}")
"""Braces protect capitals and family names in BibTeX; a reader does not want them."""

_AUTHORS_NAMED = 2
"""Up to so many authors are named in one line; of more, the first."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Reference:
    """One paper of the bibliography.

    Attributes
    ----------
    key : str
        Its key, for example ``hernando2023``.
    authors : tuple of str
        Family name and initials, as in ``Wood JC``; empty where they are not established.
    has_more_authors : bool
        Whether the entry leaves out authors.
    year : int or None
        Year of publication; None where it is not established.
    title, journal, volume, pages : str
        As in the bibliography; empty where they are not established.
    doi : str
        Without a resolver's address; empty where none is known.
    identifier : str
        PubMed or PubMed Central number, for example ``PMC8528353``; may be empty.
    evidence : {'abstract', 'secondary', 'memory'}
        How the weakest part of these bibliographic data is known.
    note : str
        Which part is known how.
    """

    key: str
    authors: tuple[str, ...]
    has_more_authors: bool
    year: int | None
    title: str
    journal: str
    volume: str
    pages: str
    doi: str
    identifier: str
    evidence: HowKnown
    note: str

    def __post_init__(self) -> None:
        if self.evidence not in get_args(HowKnown):
            raise ValueError(
                f"reference {self.key!r}: evidence is {self.evidence!r}, "
                f"wanted {', '.join(get_args(HowKnown))}"
            )
        if not self.note:
            raise ValueError(f"reference {self.key!r} does not say how its data are known")
        if not (self.authors or self.identifier or self.title):
            raise ValueError(f"reference {self.key!r} names nothing that could be found")

    @property
    def line(self) -> str:
        """The paper in one line, as reports print it."""
        by = (
            f"{_author_text(self.authors, has_more=self.has_more_authors)}." if self.authors else ""
        )
        place = f"{self.volume}:{self.pages}" if self.volume and self.pages else ""
        when = ";".join(part for part in (str(self.year or ""), place) if part)
        text = " ".join(part for part in (by, self.journal or self.title, when) if part)
        found_by = f"doi:{self.doi}" if self.doi else self.identifier
        return text if not found_by or found_by in text else f"{text}. {found_by}"


def references() -> Mapping[str, Reference]:
    """Give the whole bibliography.

    Returns
    -------
    mapping of str to Reference
        Read-only, by key, in the order of the file.

    Raises
    ------
    ValueError
        If an entry of the package's own bibliography is incomplete.
    """
    return _bibliography()


def reference(key: str) -> Reference:
    """Give one paper.

    Parameters
    ----------
    key : str
        Its key in ``references.bib``.

    Returns
    -------
    Reference
        The paper.

    Raises
    ------
    UsageError
        If there is no such key; the nearest spelling is named.
    """
    known = _bibliography()
    if key not in known:
        near = difflib.get_close_matches(key, known, n=1)
        hint = f" Did you mean {near[0]!r}?" if near else ""
        raise UsageError(f"no reference {key!r} in the bibliography.{hint}")
    return known[key]


def cite(key: str) -> str:
    """Give one paper in one line.

    Parameters
    ----------
    key : str
        Its key in ``references.bib``.

    Returns
    -------
    str
        First author, journal, year, volume, pages and DOI.

    Raises
    ------
    UsageError
        If there is no such key.

    Examples
    --------
    >>> cite("hernando2023")
    'Hernando D et al. Radiology 2023;306:e213256. doi:10.1148/radiol.213256'
    """
    return reference(key).line


@cache
def _bibliography() -> Mapping[str, Reference]:
    # Parsing waits until a citation is wanted: commands that print none need not load pybtex.
    from pybtex.database import parse_string  # noqa: PLC0415

    text = importlib.resources.files("liverfe").joinpath(_BIBLIOGRAPHY).read_text("utf-8")
    entries = parse_string(text, "bibtex").entries
    return MappingProxyType({key: _read(key, entry) for key, entry in entries.items()})


def _read(key: str, entry: Entry) -> Reference:
    persons = entry.persons.get("author", [])
    named = [person for person in persons if person.last_names != [_AND_OTHERS]]

    def plain(field: str) -> str:
        return str(entry.fields.get(field, "")).translate(_NO_BRACES).replace("--", "–")

    return Reference(
        key=key,
        authors=tuple(_name(person) for person in named),
        has_more_authors=len(named) < len(persons),
        year=int(plain("year")) if plain("year") else None,
        title=plain("title"),
        journal=plain("journal"),
        volume=plain("volume"),
        pages=plain("pages"),
        doi=plain("doi"),
        identifier=plain("pmc") or (f"PMID {plain('pubmed')}" if plain("pubmed") else ""),
        evidence=plain("evidence"),  # type: ignore[arg-type]  # checked in __post_init__
        note=plain("note"),
    )


def _name(person: Person) -> str:
    """Write a name as ``Wood JC``."""
    family = [*person.prelast_names, *person.last_names]
    given = [*person.first_names, *person.middle_names]
    initials = "".join(part[0] for name in given for part in name.replace("-", " ").split())
    return f"{' '.join(family)} {initials}".translate(_NO_BRACES).strip()


def _author_text(authors: tuple[str, ...], *, has_more: bool) -> str:
    if has_more or len(authors) > _AUTHORS_NAMED:
        return f"{authors[0]} et al"
    return ", ".join(authors)
