"""Which organ a name says: liver unless it says another (the contract's rule)."""

from __future__ import annotations

import pytest

from liverfe.outlines import is_whole_liver, organ_from_name

LIVER = """liver|Whole liver|right lobe|left lobe|Segment VIII|segment_4a|Couinaud 5|ROI 1|Leber|
rechter Lappen|foie|caudate|LIVER-right-post|fatty liver|liver without vessels|liver minus vessels|
liver, no vessels|liver excl. vein|Liver w/o vessels|right lobe (avoid vein)|liver except lesions|
fair lobe|Airport ROI|Fatima's ROI|hepatocellular|a|7|Ω"""
OTHERS = {
    "vessel": "hepatic vein|portal vein|aorta|IVC|vena cava|liver-vessels|Veins|hepatic arteries",
    "spleen": "spleen|Spleen2|SPLEEN-left|splenic ROI|Liver&Spleen",
    "muscle": "muscle|paraspinal muscles|erector spinae|psoas",
    "fat": "subcutaneous fat|Fat|adipose",
    "kidney": "kidney|left kidneys|renal cortex",
    "pancreas": "pancreas|pancreatic tail",
    "heart": "heart|septum|myocardium",
    "marrow": "bone marrow|vertebra L2|vertebrae",
    "gallbladder": "gallbladder|gall bladder|bile duct",
    "lung": "lung|Lungs",
    "lesion": "lesion 1|cyst|cysts|tumour|tumors|haemangioma|metastases|HCC",
    "background": "air|background|noise",
    "phantom": "vial 3|vials|tube_12|phantom",
    "other": "not liver|non-liver",
}


@pytest.mark.parametrize("name", LIVER.replace("\n", "").split("|"))
def test_names_that_say_no_other_organ_are_liver(name: str) -> None:
    assert organ_from_name(name) == "liver"


@pytest.mark.parametrize(
    ("organ", "name"),
    [(organ, name) for organ, names in OTHERS.items() for name in names.split("|")],
)
def test_names_that_say_another_organ_are_that_organ(organ: str, name: str) -> None:
    assert organ_from_name(name) == organ
    assert organ_from_name(name.upper()) == organ


@pytest.mark.parametrize("name", ["liver", "Liver", "whole liver", "Whole-Liver", "whole_liver 2"])
def test_the_whole_liver_is_known(name: str) -> None:
    assert is_whole_liver(name)


@pytest.mark.parametrize("name", ["right lobe", "liver right", "spleen", "whole", "not liver", ""])
def test_a_part_is_not_the_whole(name: str) -> None:
    assert not is_whole_liver(name)


@pytest.mark.parametrize(
    ("name", "organ"),
    [
        ("Milz", "spleen"),
        ("bazo", "spleen"),
        ("Muskel rechts", "muscle"),
        ("Músculo", "muscle"),
        ("Gefäß", "vessel"),
        ("Bauchspeicheldrüse", "pancreas"),
        ("Leber", "liver"),
        ("foie droit", "liver"),
        ("rechter Leberlappen", "liver"),
    ],
)
def test_plain_organ_names_of_other_languages_are_understood(name: str, organ: str) -> None:
    """Dictionary words; a muscle taken for liver would get a LIC in the normal range."""
    assert organ_from_name(name) == organ
