"""Which studies a folder holds, from headers alone: what a batch works through.

A study is found once, whatever its folders are called, and none is passed over: one that cannot be
used is found too, with the reason.
"""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from liverfe.acquire import StackPlan, Survey, find_stacks
from liverfe.calibration import CalibrationCurve
from liverfe.errors import Finding
from liverfe.journey.keys import key_of, peek_secret
from liverfe.journey.preview import preview_stacks
from liverfe.journey.stack_choice import no_stack, plan_files
from liverfe.study import Method

_NO_STUDY = (
    "other files",
    "label image",
    "empty file",
    "symbolic link",
    "result folder of liverfe",
)
"""What a folder may hold without being a study; anything else keeps a row."""


@dataclass(frozen=True, slots=True, kw_only=True)
class StudyFound:
    """One study as its headers tell it.

    Attributes
    ----------
    study_uid : str
        What tells it from others; never shown.
    key, patient_key : str
        Its keys; empty before the first run has made a secret.
    inputs : tuple of Path
        What to hand to `run_study`: its folder where it has one of its own, else its files.
    usable : tuple of dict
        Usable stacks as `preview_stacks` gives them, in the order of their numbers.
    refused : tuple of dict
        The others.
    reason : str
        Why nothing is usable; empty where something is.
    n_bytes : int
        Size of the files of its usable stacks.
    """

    study_uid: str
    key: str
    patient_key: str
    inputs: tuple[Path, ...]
    usable: tuple[dict[str, Any], ...]
    refused: tuple[dict[str, Any], ...]
    reason: str
    n_bytes: int


def find_studies(
    inputs: Sequence[Path],
    *,
    method: Method,
    site_curves: Sequence[CalibrationCurve] = (),
    echo_times_ms: Sequence[float] | None = None,
    field_strength_t: float | None = None,
) -> tuple[StudyFound, ...]:
    """Find the studies among some files and folders.

    Parameters
    ----------
    inputs : sequence of Path
        One folder, or some files that lie together.
    method : Method
        Whose curve would apply.
    site_curves : sequence of CalibrationCurve
        A site's own curves.
    echo_times_ms : sequence of float, optional
        For files that state none, in ms.
    field_strength_t : float, optional
        For files that state none, in T.

    Returns
    -------
    tuple of StudyFound
        In the survey's order; empty where there is no image at all.
    """
    survey = find_stacks(inputs, echo_times_ms=echo_times_ms, field_strength_t=field_strength_t)
    previews = preview_stacks(survey, method=method, site_curves=site_curves)
    stood_for = str(inputs[0].resolve())
    groups = _by_study(survey, stood_for)
    preview_of = {id(plan): shown for plan, shown in zip(survey.stacks, previews, strict=True)}
    files = {uid: _files_of(plans) for uid, plans in groups.items()}
    secret = peek_secret()
    found = []
    for uid, plans in groups.items():
        others = {path for other, paths in files.items() if other != uid for path in paths}
        usable = [plan for plan in plans if plan.refusal is None]
        folder = _own_folder(files[uid], others, inputs)
        found.append(
            StudyFound(
                study_uid=uid,
                key=key_of(uid, secret) if secret else "",
                patient_key=key_of(plans[0].subject.patient_id, secret) if secret else "",
                inputs=_inputs_of(folder, files[uid], others, inputs),
                usable=tuple(preview_of[id(plan)] for plan in usable),
                refused=tuple(preview_of[id(p)] for p in plans if p.refusal is not None),
                reason="" if usable else _reason([f for plan in plans for f in plan.findings]),
                n_bytes=sum(path.stat().st_size for path in _files_of(usable)),
            )
        )
    return tuple(found) or _nothing_usable(survey, inputs, stood_for)


def _by_study(survey: Survey, stood_for: str) -> dict[str, list[StackPlan]]:
    """Group plans by study. NIfTI files that are no stack and lie beside DICOM are no study."""
    groups: dict[str, list[StackPlan]] = {}
    strays: list[StackPlan] = []
    has_dicom = any(plan.origin == "dicom" for plan in survey.stacks)
    for plan in survey.stacks:
        if has_dicom and plan.origin == "nifti" and plan.refusal is not None:
            strays.append(plan)
        else:
            groups.setdefault(plan.subject.study_uid or stood_for, []).append(plan)
    if groups:
        # Maps or exports of it, most likely; shown as rejected with the first study of the folder.
        next(iter(groups.values())).extend(strays)
    return groups


def _files_of(plans: Sequence[StackPlan]) -> set[Path]:
    return {path for plan in plans for path in plan_files(plan)}


def _own_folder(files: set[Path], others: set[Path], inputs: Sequence[Path]) -> Path | None:
    """Find the highest folder that holds all files of a study and none of any other's.

    Its region files lie in there, beside or under the images.
    """
    if len(inputs) != 1 or not inputs[0].is_dir() or not files:
        return None
    folders_of_others = {folder for path in others for folder in path.parents}
    common = Path(os.path.commonpath([path.parent for path in files]))
    own = None
    for folder in (common, *common.parents):
        if not folder.is_relative_to(inputs[0]) or folder in folders_of_others:
            break
        own = folder
    return own


def _inputs_of(
    folder: Path | None, files: set[Path], others: set[Path], inputs: Sequence[Path]
) -> tuple[Path, ...]:
    if folder is not None:
        return (folder,)
    # Whatever was searched holds this study alone: then its region files are among it too.
    return tuple(sorted(files)) if others else tuple(inputs)


def _reason(findings: Sequence[Finding]) -> str:
    stops = dict.fromkeys(f"{f.text} {f.remedy}" for f in findings if f.level == "stop")
    return " ".join(stops)


def _nothing_usable(
    survey: Survey, inputs: Sequence[Path], stood_for: str
) -> tuple[StudyFound, ...]:
    """A folder of damaged images or of another kind was a study; one of notes alone was not."""
    if not survey.findings and all(left.what in _NO_STUDY for left in survey.left_out):
        return ()
    secret = peek_secret()
    reasons = [f"{finding.text} {finding.remedy}" for finding in survey.findings]
    return (
        StudyFound(
            study_uid=stood_for,
            key=key_of(stood_for, secret) if secret else "",
            patient_key="",
            inputs=tuple(inputs),
            usable=(),
            refused=(),
            reason=" ".join([no_stack(survey).text, *reasons]),
            n_bytes=0,
        ),
    )
