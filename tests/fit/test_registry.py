"""One registry of estimators, with words and papers for each."""

from __future__ import annotations

import importlib
import pkgutil
import re
from pathlib import Path

import pytest

from liverfe import wording
from liverfe.fit import ESTIMATORS, comparators, estimator_named, fit_rows
from liverfe.sources import references
from tests.fit.decays import SIGMA_ONE, TWELVE_MS, decay


def test_the_house_comes_first_and_no_name_twice() -> None:
    assert ESTIMATORS[0] == "rician-ml"
    assert len(set(ESTIMATORS)) == len(ESTIMATORS) == 1 + len(comparators.COMPARATORS)


def test_every_file_of_a_comparator_is_in_the_registry_under_its_name() -> None:
    found = {}
    for module in pkgutil.iter_modules(comparators.__path__):
        entry = getattr(
            importlib.import_module(f"{comparators.__name__}.{module.name}"), "ESTIMATOR", None
        )
        if entry is not None:
            found[entry.key] = entry
            assert module.name == entry.key.replace("-", "_")
    assert found == {entry.key: entry for entry in comparators.COMPARATORS}


@pytest.mark.parametrize("key", ESTIMATORS)
def test_an_estimator_is_found_by_its_name_and_its_papers_in_the_bibliography(key: str) -> None:
    entry = estimator_named(key)
    assert entry.key == key
    assert set(entry.citations) <= set(references())


def test_every_estimator_has_words_and_no_words_lack_an_estimator() -> None:
    assert tuple(wording.ESTIMATOR_WORDS) == ESTIMATORS
    assert set(wording.ESTIMATOR_REMARKS) == set(ESTIMATORS)
    for words in wording.ESTIMATOR_WORDS.values():
        assert words.algorithm[0].isupper()
        assert not words.algorithm.endswith(".")
        # Half a sentence: it stands behind a colon in a finding.
        assert words.remark[0].islower()
        assert not words.remark.endswith(".")


def test_the_page_of_the_method_file_lists_them_all() -> None:
    page = Path(__file__).parents[2] / "docs" / "reference" / "method-file.md"
    rows = re.findall(r"^\| `([a-z-]+)` \|", page.read_text("utf-8"), flags=re.MULTILINE)
    assert sorted(set(rows) & set(ESTIMATORS)) == sorted(ESTIMATORS)


def test_an_unknown_name_is_refused_with_those_that_exist() -> None:
    with pytest.raises(ValueError, match=r"unknown estimator 'magic'; one of rician-ml, "):
        fit_rows(decay(1, 1, TWELVE_MS).astype("f4"), TWELVE_MS, SIGMA_ONE, 1, model="magic")
