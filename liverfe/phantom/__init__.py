"""Recipe -> files with known truth.

This room never imports the estimator, nor noise, maps, calibration, regions or study: a wrong
equation must not validate itself.
"""

from liverfe.phantom.abdomen import STRUCTURES, TISSUES, StructureMap
from liverfe.phantom.dicom import DICOM_LAYOUTS, TRANSFER_SYNTAXES, write_dicom
from liverfe.phantom.library import expected_values, load_recipe, shipped_recipes
from liverfe.phantom.make import Phantom, make_phantom, scan_again
from liverfe.phantom.nifti import NIFTI_LAYOUTS, write_bids, write_nifti
from liverfe.phantom.parse import parse_recipe
from liverfe.phantom.recipe import Recipe
from liverfe.phantom.study import FORMATS, MadeStudy, make_study
from liverfe.phantom.truth import truth_document, write_regions, write_truth

__all__ = [
    "DICOM_LAYOUTS",
    "FORMATS",
    "NIFTI_LAYOUTS",
    "STRUCTURES",
    "TISSUES",
    "TRANSFER_SYNTAXES",
    "MadeStudy",
    "Phantom",
    "Recipe",
    "StructureMap",
    "expected_values",
    "load_recipe",
    "make_phantom",
    "make_study",
    "parse_recipe",
    "scan_again",
    "shipped_recipes",
    "truth_document",
    "write_bids",
    "write_dicom",
    "write_nifti",
    "write_regions",
    "write_truth",
]
