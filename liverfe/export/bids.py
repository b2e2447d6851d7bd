"""BIDS names, sidecars and data set files of the exported maps.

BIDS (1.10, appendix on quantitative MRI) names R2*, T2* and S0 maps, label images and their
sidecars. It has no suffix for a liver iron concentration, a standard error or a misfit. Those maps
get suffixes of our own and stand in `.bidsignore`: under ``R2starmap`` with a ``desc`` entity they
would pass the validator, but a program that asks for ``*_R2starmap.nii.gz`` would take a LIC for
an R2*, a silent wrong number.
"""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from typing import Any

from liverfe.export.result_json import rounded
from liverfe.fit import estimator_named
from liverfe.sources import cite
from liverfe.units import s_from_ms
from liverfe.wording import CAUTION, ESTIMATOR_WORDS
from liverfe.wording.export import (
    DATASET_NAME,
    DATASET_README,
    MAP_DESCRIPTIONS,
)

__all__ = [
    "MAP_ENDINGS",
    "bids_dataset_files",
    "bids_path",
    "bids_stem",
    "map_sidecar",
    "sidecar_bytes",
]

MAP_ENDINGS = {
    "r2star": "R2starmap",
    "t2star": "T2starmap",
    "s0": "S0map",
    "r2star_se": "desc-se_R2starSEmap",
    "misfit": "desc-chi2_misfitmap",
    "lic": "desc-lic_LICmap",
    "status": "desc-status_dseg",
    "rois": "desc-rois_dseg",
}
"""End of each map's name, without extension, by the map's key."""

_UNITS = {
    "r2star": "1/s",
    "t2star": "s",  # required by BIDS; everywhere else T2* is in ms
    "s0": "arbitrary",
    "r2star_se": "1/s",
    "misfit": "1",
    "lic": "mg/g",
}

_NOT_IN_BIDS = ("R2starSEmap", "misfitmap", "LICmap")

_BIDS_VERSION = "1.10.0"


def bids_stem(key: str) -> str:
    """Turn a study key into the start of a BIDS name.

    Parameters
    ----------
    key : str
        Study key; ``-2``, ``-3`` at its end number further stacks of one study.

    Returns
    -------
    str
        ``sub-<key>``, or ``sub-<key>_run-2``: a BIDS label may hold no hyphen.

    Raises
    ------
    ValueError
        If the key holds anything else than letters and digits.
    """
    match = re.fullmatch(r"([0-9A-Za-z]+)(?:-([0-9]+))?", key)
    if not match:
        raise ValueError(f"study key {key!r} is not made of letters and digits")
    subject, run = match.groups()
    return f"sub-{subject}_run-{run}" if run else f"sub-{subject}"


def bids_path(file_name: str) -> str:
    """Tell where an exported map or sidecar belongs in a BIDS data set.

    Parameters
    ----------
    file_name : str
        Name of a file of ``maps/``.

    Returns
    -------
    str
        ``sub-<key>/anat/<file_name>``.
    """
    return f"{file_name.split('_')[0]}/anat/{file_name}"


def bids_dataset_files(software: Mapping[str, str]) -> dict[str, bytes]:
    """Make the files that turn a folder of exported maps into a BIDS derivative data set.

    Parameters
    ----------
    software : mapping of str to str
        Versions, with ``liverfe`` among them.

    Returns
    -------
    dict
        File name at the root of the data set -> bytes.
    """
    description = {
        "Name": DATASET_NAME,
        "BIDSVersion": _BIDS_VERSION,
        "DatasetType": "derivative",
        "GeneratedBy": [{"Name": "liverfe", "Version": software["liverfe"]}],
    }
    return {
        "dataset_description.json": sidecar_bytes(description),
        ".bidsignore": "".join(f"*_{suffix}.*\n" for suffix in _NOT_IN_BIDS).encode(),
        "README": DATASET_README.format(caution=CAUTION).encode(),
    }


def map_sidecar(kind: str, document: Mapping[str, Any]) -> dict[str, Any]:
    """Write down what a map holds and how it was made.

    Parameters
    ----------
    kind : str
        A key of `MAP_ENDINGS`.
    document : mapping
        As `result_document` gives it.

    Returns
    -------
    dict
        BIDS fields; what the files did not say is left out.
    """
    description = MAP_DESCRIPTIONS[kind].format(caution=document["caution"])
    if kind in ("status", "rois"):
        # Whether a person drew the labels; BIDS asks for no units or skull here.
        labels: dict[str, Any] = {"Description": description, "Manual": kind == "rois"}
        return {**labels, "SpatialReference": "orig", **_made_by(document)}
    sidecar = {
        "Description": description,
        "Units": _UNITS[kind],
        "SkullStripped": False,
        **_estimation(kind, document),
        **_acquisition(document["stack"]),
        **_made_by(document),
    }
    if kind in ("t2star", "lic"):
        name = f"{bids_stem(document['study']['key'])}_{MAP_ENDINGS['r2star']}.nii.gz"
        sidecar["Sources"] = [f"bids::{bids_path(name)}"]
    if kind == "lic":
        sidecar["Basis"] = "dry weight"
        sidecar["Caution"] = document["caution"]
    return sidecar


def sidecar_bytes(content: Mapping[str, Any]) -> bytes:
    """Turn a sidecar into the bytes of its file: UTF-8 JSON with a line feed at the end."""
    return f"{json.dumps(content, ensure_ascii=False, allow_nan=False, indent=2)}\n".encode()


def _estimation(kind: str, document: Mapping[str, Any]) -> dict[str, Any]:
    method, curve = document["method"], document["calibration"]
    if kind == "lic" and curve:
        return {
            "EstimationAlgorithm": f"Calibration curve {curve['key']}: {curve['equation']}",
            "EstimationReference": curve["citation"],
            "CalibrationEvidence": curve["evidence"],
            "CalibrationLocal": curve["local"],
        }
    key = method["estimator"]
    fields = {"EstimationAlgorithm": ESTIMATOR_WORDS[key].algorithm}
    papers = [cite(paper) for paper in estimator_named(key).citations]
    return {**fields, "EstimationReference": "; ".join(papers)} if papers else fields


def _acquisition(stack: Mapping[str, Any]) -> dict[str, Any]:
    repetition_ms = stack["repetition_time_ms"]
    fields = {
        "EchoTime": [rounded(s_from_ms(time)) for time in stack["echo_times_ms"]],
        "MagneticFieldStrength": stack["field_strength_t"],
        "RepetitionTimeExcitation": None if repetition_ms is None else s_from_ms(repetition_ms),
        "FlipAngle": stack["flip_angle_deg"],
    }
    return {name: value for name, value in fields.items() if value is not None}


def _made_by(document: Mapping[str, Any]) -> dict[str, Any]:
    return {
        "StudyKey": document["study"]["key"],
        "MethodId": document["method"]["id"],
        "SoftwareName": "liverfe",
        "SoftwareVersion": document["software"]["liverfe"],
    }
