"""Findings and errors: what, where, remedy, and nothing lost on the way."""

from __future__ import annotations

import pickle

import pytest

from liverfe import errors
from liverfe.errors import Finding, StudyRefused
from liverfe.wording import FINDING_TABLE, FindingWording

NOTE = Finding(code="no-stack", level="note", text="A note.", remedy="None.")
STOP = Finding(code="no-stack", level="stop", text="Nothing is here.", remedy="Give a folder.")


@pytest.fixture
def planted(monkeypatch: pytest.MonkeyPatch) -> str:
    """The code of a finding whose words stand here."""
    words = FindingWording(
        level="stop", text="{n_files} files in {folder}.", effect="None.", remedy="Fill {folder}."
    )
    monkeypatch.setitem(FINDING_TABLE, "planted", words)
    return "planted"


def test_a_finding_is_filled_from_the_table(planted: str) -> None:
    finding = Finding.of(planted, n_files=3, folder="scan")
    told = (finding.code, finding.level, finding.text, finding.remedy)
    assert told == ("planted", "stop", "3 files in scan.", "Fill scan.")


def test_a_finding_whose_facts_are_missing_is_not_made(planted: str) -> None:
    with pytest.raises(KeyError, match="folder"):
        Finding.of(planted, n_files=3)


def test_an_unknown_code_is_refused() -> None:
    with pytest.raises(ValueError, match="never-heard-of"):
        Finding(code="never-heard-of", level="note", text="", remedy="")
    with pytest.raises(KeyError):
        Finding.of("never-heard-of")


def test_a_refusal_says_what_and_what_to_do_but_no_note() -> None:
    refusal = StudyRefused(NOTE, STOP)
    assert str(refusal) == "Nothing is here. Give a folder."
    assert refusal.findings == (NOTE, STOP)


def test_a_refusal_needs_a_reason_to_stop() -> None:
    with pytest.raises(ValueError, match="level 'stop'"):
        StudyRefused(NOTE)


def test_a_refusal_crosses_to_another_process_whole() -> None:
    # Workers of a batch hand their refusals to the parent by pickle.
    again = pickle.loads(pickle.dumps(StudyRefused(NOTE, STOP)))
    assert isinstance(again, StudyRefused)
    assert again.findings == (NOTE, STOP)
    assert str(again) == "Nothing is here. Give a folder."


def test_every_error_of_ours_has_the_one_root() -> None:
    tree = [thing for thing in vars(errors).values() if isinstance(thing, type)]
    raised = [thing for thing in tree if issubclass(thing, Exception)]
    assert len(raised) == 4
    assert all(issubclass(thing, errors.LiverfeError) for thing in raised)
