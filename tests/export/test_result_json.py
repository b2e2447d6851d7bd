"""`result.json` is what the contract says, key by key, and never holds a number it may not."""

import copy
import json
import re
from dataclasses import fields, replace
from importlib import resources
from pathlib import Path

import numpy as np
import pytest
from jsonschema import Draft202012Validator

from liverfe.export import result_document, to_json_bytes
from liverfe.export.result_json import rounded
from liverfe.regions import R2StarSummary, ReportableLimits
from liverfe.study import Method, RegionResult

# Typed from the contract's example of schema 1, not from the code.
TOP = (
    "schema outcome findings study stack noise limits calibration headline regions method software "
    "caution"
).split()
WITHIN = {
    "study": "key patient_key date scanner",
    "stack": "echo_times_ms shape n_slices field_strength_t layout left_out",
    "noise": "sigma n_channels method",
    "limits": "r2star_per_s lic_mg_per_g",
    "calibration": "key citation form evidence valid_r2star_per_s",
    "software": "liverfe python numpy",
}
REGION = (
    "name organ volume_ml n_slices n_voxels n_used n_over_limit n_under_limit n_no_signal n_failed "
    "n_trimmed r2star_per_s t2star_ms lic_mg_per_g lic_umol_per_g band limits"
).split()
WITHIN_REGION = {
    "r2star_per_s": "value statistic low high iqr mean sd sd_biological qualifier",
    "lic_mg_per_g": "value low high qualifier basis",
    "band": "set name low_mg_per_g high_mg_per_g",
    "limits": "r2star_per_s lic_mg_per_g s0 sigma",
}
CONTRACT_REGION = {
    "name": "right lobe", "organ": "liver", "volume_ml": 41.2, "n_slices": 3,
    "n_voxels": 812, "n_used": 799, "n_over_limit": 0, "n_under_limit": 0, "n_no_signal": 0,
    "n_failed": 2, "n_trimmed": 11, "lic_umol_per_g": 142.7,
}  # fmt: skip
CONTRACT_R2STAR = {
    "value": 312.4, "statistic": "median", "low": 309.0, "high": 315.9, "iqr": 41.0,
    "mean": 314.1, "sd": 33.0, "sd_biological": 31.0, "qualifier": "=",
}  # fmt: skip
CONTRACT_LIC = {"value": 7.97, "low": 7.88, "high": 8.06, "qualifier": "=", "basis": "dry weight"}


def schema_errors(document):
    """What the published schema says of a document, by the jsonschema package."""
    text = (resources.files("liverfe.export") / "result.schema.json").read_text("utf-8")
    validator = Draft202012Validator(json.loads(text))
    return [error.message for error in validator.iter_errors(document)]


def numbers_under(value, names, inside=False):
    """All numbers that stand under a key whose name holds one of `names`."""
    if isinstance(value, dict):
        return [
            n for key, item in value.items()
            for n in numbers_under(item, names, inside or any(name in key for name in names))
        ]  # fmt: skip
    if isinstance(value, list):
        return [n for item in value for n in numbers_under(item, names, inside)]
    return [value] if inside and isinstance(value, int | float) else []


def test_document_has_every_key_of_the_contract(made):
    document = made.document(made.result())
    assert list(document) == TOP
    for part, keys in WITHIN.items():
        assert set(keys.split()) <= set(document[part]), part
    for region in document["regions"]:
        assert set(REGION) <= set(region)
    for part, keys in WITHIN_REGION.items():
        assert set(keys.split()) <= set(document["regions"][0][part]), part
    assert schema_errors(document) == []


def test_document_carries_the_numbers_of_the_contract_example(made):
    document = made.document(made.result())
    region = document["regions"][0]
    assert {key: region[key] for key in CONTRACT_REGION} == CONTRACT_REGION
    assert {k: region["r2star_per_s"][k] for k in CONTRACT_R2STAR} == CONTRACT_R2STAR
    assert region["lic_mg_per_g"] == CONTRACT_LIC
    assert region["t2star_ms"] == pytest.approx(3.20, abs=0.005)  # 1000 / 312.4
    assert region["band"] == {
        "set": "pmc8528353", "name": "moderate", "low_mg_per_g": 7.0, "high_mg_per_g": 15.0,
    }  # fmt: skip
    limits = {"r2star_per_s": [0.0, 1130.0], "lic_mg_per_g": [0.0, 29.3]}
    assert region["limits"] == {**limits, "s0": 410.0, "sigma": 4.1}
    assert document["limits"] == limits
    assert document["schema"] == 1
    assert document["outcome"] == "reported"
    assert document["headline"] == "right lobe"
    assert document["study"]["date"] == "2031-04-02"
    assert document["stack"]["shape"] == [12, 10, 4]
    assert document["stack"]["n_slices"] == 4
    assert document["stack"]["echo_times_ms"][:2] == [0.9, 1.6]
    assert document["stack"]["left_out"] == [
        {"what": "phase images of series 3", "n_files": 48, "why": "not magnitude"}
    ]
    assert (document["noise"]["sigma"], document["noise"]["n_channels"]) == (4.1, 1)
    assert "Not a medical device" in document["caution"]


def test_method_states_every_choice(made):
    method = made.document(made.result())["method"]
    assert {field.name for field in fields(Method)} | {"id"} == set(method)
    assert method["id"] == Method().id


def test_refused_study_shows_no_number_even_if_the_result_still_holds_some(made):
    refused = made.result(outcome="refused", findings=(made.finding("stop", "Holes."),))
    document = made.document(refused)
    assert list(document) == TOP
    assert document["regions"] == []
    for part in ("noise", "limits", "calibration", "headline"):
        assert document[part] is None
    assert document["stack"]["shape"] == [12, 10, 4]
    assert numbers_under({k: v for k, v in document.items() if k != "method"},
                         ("r2star", "lic_", "t2star", "sigma")) == []  # fmt: skip
    assert schema_errors(document) == []


def test_refused_study_without_a_stack_keeps_all_keys(made):
    refused = made.result(
        outcome="refused", findings=(made.finding("stop"),), stack=None, noise=None, maps=None,
        lic_mg_per_g=None, curve=None, regions=(), headline=None,
    )  # fmt: skip
    document = made.document(refused)
    assert list(document) == TOP
    assert document["stack"] is None
    assert document["study"]["date"] is None
    assert schema_errors(document) == []


@pytest.mark.parametrize(("qualifier", "of_t2star"), [(">", "<"), ("<", ">")])
def test_censored_region_shows_the_limit_and_its_open_side_is_null(made, qualifier, of_t2star):
    closed = {"low": 1100.0, "high": None} if qualifier == ">" else {"low": None, "high": 20.0}
    r2star = R2StarSummary(
        value=1130.0, statistic="median", **closed, iqr=None, mean=None, sd=None,
        qualifier=qualifier, before_trimming=None,
    )  # fmt: skip
    iron = made.iron(
        value_mg_per_g=29.3, low_mg_per_g=closed["low"], high_mg_per_g=closed["high"],
        qualifier=qualifier, band=None,
    )  # fmt: skip
    region = RegionResult(summary=made.summary(r2star=r2star), iron=iron)
    document = made.document(made.result(regions=(region,)))
    shown = document["regions"][0]
    open_side = "high" if qualifier == ">" else "low"
    for part in ("r2star_per_s", "lic_mg_per_g"):
        assert shown[part]["qualifier"] == qualifier
        assert shown[part][open_side] is None
    assert shown["r2star_per_s"]["value"] == 1130.0
    assert shown["t2star_qualifier"] == of_t2star
    assert shown["band"] is None
    assert schema_errors(document) == []


def test_another_organ_has_r2star_and_no_lic(made):
    spleen = made.document(made.result())["regions"][1]
    assert spleen["organ"] == "spleen"
    assert spleen["r2star_per_s"]["value"] == 312.4
    assert spleen["lic_mg_per_g"] is spleen["lic_umol_per_g"] is spleen["band"] is None
    assert spleen["limits"]["lic_mg_per_g"] is None


def test_without_a_curve_r2star_stands_and_lic_is_null_everywhere(made):
    region = RegionResult(summary=made.summary(), iron=None)
    result = made.result(curve=None, lic_mg_per_g=None, regions=(region,))
    document = made.document(result)
    assert document["calibration"] is None
    assert document["limits"] == {"r2star_per_s": [0.0, 1130.0], "lic_mg_per_g": None}
    without_method = {k: v for k, v in document.items() if k != "method"}
    assert numbers_under(without_method, ("lic_",)) == []
    assert schema_errors(document) == []


def test_without_a_region_headline_and_limits_are_null(made):
    document = made.document(made.result(regions=(), headline=None))
    assert document["headline"] is document["limits"] is None
    assert document["regions"] == []
    assert schema_errors(document) == []


def test_a_sites_own_curve_is_marked_local(made):
    curve = made.curve(evidence="local", is_local=True)
    assert made.document(made.result(curve=curve))["calibration"]["local"] is True
    assert made.document(made.result())["calibration"]["local"] is False


def test_what_is_not_finite_becomes_null_and_the_file_is_strict_json(made):
    odd = made.summary(
        median_reduced_chi2=float("nan"),
        limits=ReportableLimits(
            low_r2star_per_s=0.0, high_r2star_per_s=float("inf"), s0=float("nan"), sigma=4.1
        ),
    )
    result = made.result(regions=(RegionResult(summary=odd, iron=None),))

    def refuse(constant):
        raise AssertionError(f"{constant} is not JSON")

    document = json.loads(to_json_bytes(made.document(result)), parse_constant=refuse)
    assert document["limits"]["r2star_per_s"] == [0.0, None]
    assert document["regions"][0]["limits"]["s0"] is None
    assert schema_errors(document) == []


def test_writing_refuses_a_nan(made):
    with pytest.raises(ValueError, match="JSON"):
        to_json_bytes({"lic": float("nan")})


@pytest.mark.parametrize(
    ("value", "shown"),
    [(2 / 3, 0.666667), (1234567.0, 1234570.0), (-0.0123456789, -0.0123457), (0.0, 0.0),
     (float(np.float32(0.9)), 0.9), (None, None), (float("-inf"), None)],
)  # fmt: skip
def test_numbers_keep_six_significant_digits(value, shown):
    assert rounded(value) == shown


def test_same_result_gives_the_same_bytes(made):
    first, second = (to_json_bytes(made.document(made.result())) for _ in range(2))
    assert first == second
    assert first.endswith(b"}\n")
    assert json.loads(first) == made.document(made.result())


def test_document_is_not_tied_to_the_result(made):
    document = result_document(made.result(), label=made.label, software=made.software)
    document["software"]["liverfe"] = "other"
    assert made.software["liverfe"] == "0.1.0"


def test_study_without_a_patient_has_a_null_patient_key(made):
    label = replace(made.label, patient_key="")
    document = result_document(made.result(), label=label, software=made.software)
    assert document["study"]["patient_key"] is None
    assert schema_errors(document) == []


def paths_of(value, path=()):
    """Every key of a document, as the way that leads to it."""
    if isinstance(value, dict):
        for key, item in value.items():
            yield (*path, key)
            yield from paths_of(item, (*path, key))
    elif isinstance(value, list) and value:
        yield from paths_of(value[0], (*path, 0))


def test_schema_misses_no_key_that_is_gone(made):
    whole = made.document(made.result(findings=(made.finding(),)))
    free = {"method", "software"}  # every choice and every version: open tables
    asked = [p for p in paths_of(whole) if not (len(p) > 1 and p[0] in free)]
    assert len(asked) > 100
    for path in asked:
        holed = copy.deepcopy(whole)
        place = holed
        for key in path[:-1]:
            place = place[key]
        del place[path[-1]]
        assert schema_errors(holed), path


@pytest.mark.parametrize(
    "spoil",
    [
        lambda d: d.update(schema=2),
        lambda d: d.update(outcome="ok"),
        lambda d: d.update(outcome="refused"),
        lambda d: d["findings"].append(
            {"code": "a-b", "level": "stop", "text": "t", "remedy": "r"}
        ),
        lambda d: d["regions"][0]["r2star_per_s"].update(qualifier=">"),
        lambda d: d["regions"][0]["lic_mg_per_g"].update(basis="wet weight"),
        lambda d: d["regions"][1].update(lic_umol_per_g=142.7),
        lambda d: d["regions"][0].update(n_voxels=-1),
        lambda d: d["regions"][0]["r2star_per_s"].update(value=None),
        lambda d: d["study"].update(key="Quixley"),
        lambda d: d["stack"].update(echo_times_ms=[0.0]),
    ],
)
def test_schema_refuses_what_the_contract_forbids(made, spoil):
    document = made.document(made.result())
    assert schema_errors(document) == []
    spoil(document)
    assert schema_errors(document)


def test_reference_page_names_every_key(made):
    page = (Path(__file__).parents[2] / "docs" / "reference" / "result-json.md").read_text("utf-8")
    told = set(re.findall(r"`([a-z0-9_]+)`", page))
    whole = made.document(made.result(findings=(made.finding(),)))
    free = {"method", "software"}
    keys = {path[-1] for path in paths_of(whole) if not (len(path) > 1 and path[0] in free)}
    assert len(keys) > 70
    assert sorted(keys - told) == []
