"""JSON sidecars: what they say of an image, inherited along a BIDS data set."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date
from pathlib import Path
from typing import Any

from liverfe.acquire.naming import shown_name
from liverfe.echoes import Acquisition, Subject
from liverfe.errors import Finding, StudyRefused
from liverfe.units import ms_from_s

_LARGEST_SIDECAR = 4 * 1024 * 1024
"""A sidecar is a few kilobytes."""


@dataclass(frozen=True, slots=True, kw_only=True)
class NameParts:
    """A file name in its BIDS parts.

    Attributes
    ----------
    stem : str
        The name without ``.nii``, ``.nii.gz`` or ``.json``.
    entities : dict of str to str
        For example ``{'sub': '01', 'echo': '2'}``.
    suffix : str
        What follows the last underscore, ``MEGRE``; empty where the name is no BIDS name.
    """

    stem: str
    entities: Mapping[str, str]
    suffix: str

    @property
    def is_bids(self) -> bool:
        """Whether it names an image of a BIDS subject."""
        return "sub" in self.entities and bool(self.suffix)


def name_parts(path: Path) -> NameParts:
    """Part a file name."""
    stem = re.sub(r"(\.nii(\.gz)?|\.json)$", "", path.name, flags=re.IGNORECASE)
    parts = stem.split("_")
    pairs = [part.split("-", 1) for part in parts[:-1]]
    if not all(len(pair) == 2 for pair in pairs) or "-" in parts[-1]:
        return NameParts(stem=stem, entities={}, suffix="")
    return NameParts(stem=stem, entities=dict(pairs), suffix=parts[-1] if pairs else "")


def read_sidecars(path: Path) -> tuple[dict[str, Any], tuple[Path, ...]]:
    """Read what JSON sidecars say of a NIfTI file, the nearest last.

    A sidecar of the same name lies beside the file. In a BIDS data set sidecars further up speak
    of all files whose name holds their parts (the inheritance principle).

    Parameters
    ----------
    path : Path
        The NIfTI file.

    Returns
    -------
    sidecar : dict
        Merged; empty where there is none.
    files : tuple of Path
        The sidecars that were read.

    Raises
    ------
    StudyRefused
        With ``sidecar-unreadable``.
    """
    own = name_parts(path)
    merged: dict[str, Any] = {}
    files: list[Path] = []
    for folder in _folders(path):
        for candidate in sorted(folder.glob("*.json")):
            parts = name_parts(candidate)
            is_own = parts.stem == own.stem
            speaks_of_it = own.is_bids and (
                parts.stem == own.suffix
                or (
                    parts.suffix == own.suffix
                    and set(parts.entities.items()) <= set(own.entities.items())
                )
            )
            if is_own or speaks_of_it:
                merged.update(_read(candidate))
                files.append(candidate)
    return merged, tuple(files)


def _folders(path: Path) -> list[Path]:
    """The data set's root first, the file's own folder last; only that one outside a data set."""
    folders = [path.parent]
    for parent in path.parent.parents:
        if (folders[-1] / "dataset_description.json").exists() or len(folders) > 4:
            break
        folders.append(parent)
    is_data_set = (folders[-1] / "dataset_description.json").exists()
    return folders[::-1] if is_data_set else [path.parent]


def _read(path: Path) -> dict[str, Any]:
    try:
        if path.stat().st_size > _LARGEST_SIDECAR:
            raise ValueError("it is too large for a sidecar")
        document = json.loads(path.read_bytes())
        if not isinstance(document, dict):
            raise ValueError("it holds no JSON object")
    except (OSError, ValueError) as error:
        reason = str(error) or type(error).__name__
        raise StudyRefused(
            Finding.of("sidecar-unreadable", file=shown_name(path), reason=reason)
        ) from error
    return document


def echo_times_ms(sidecar: Mapping[str, Any]) -> tuple[float, ...]:
    """Read EchoTime, seconds in BIDS, as milliseconds; empty where it is absent or no number."""
    stated = sidecar.get("EchoTime")
    values = stated if isinstance(stated, list) else [stated]
    times = [v for v in values if isinstance(v, (int, float)) and not isinstance(v, bool)]
    if len(times) != len(values):
        return ()
    # Echo times are known to the nanosecond; the product with 1000 makes digits up.
    return tuple(round(ms_from_s(float(time)), 9) for time in times)


def number(sidecar: Mapping[str, Any], *keys: str) -> float | None:
    """Read the first of several keys that holds a number."""
    for key in keys:
        value = sidecar.get(key)
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            return float(value)
    return None


def words(sidecar: Mapping[str, Any], key: str) -> tuple[str, ...]:
    """Read a text or a list of texts as upper-case words."""
    value = sidecar.get(key)
    texts = value if isinstance(value, list) else [value]
    return tuple(str(text).upper() for text in texts if isinstance(text, str))


def text(sidecar: Mapping[str, Any], *keys: str) -> str:
    """Read the first of several keys that holds a text."""
    return next((str(v) for key in keys if isinstance(v := sidecar.get(key), str)), "")


def is_spin_echo(sidecar: Mapping[str, Any]) -> bool:
    """Tell whether a sidecar names a spin echo."""
    tokens = {t for w in words(sidecar, "ScanningSequence") for t in re.split(r"[^A-Z]+", w)}
    kind = text(sidecar, "PulseSequenceType").lower()
    return "SE" in tokens or "spin echo" in kind


def is_echo_planar(sidecar: Mapping[str, Any]) -> bool:
    """Tell whether a sidecar names an echo-planar acquisition."""
    tokens = {t for w in words(sidecar, "ScanningSequence") for t in re.split(r"[^A-Z]+", w)}
    return "EP" in tokens or "planar" in text(sidecar, "PulseSequenceType").lower()


def acquisition_of(sidecar: Mapping[str, Any]) -> Acquisition:
    """Read how the images were made; the field strength is settled elsewhere."""
    repetition_s = number(sidecar, "RepetitionTimeExcitation", "RepetitionTime")
    columns = number(sidecar, "FrequencyEncodingSteps", "BaseResolution")
    rows = number(sidecar, "PhaseEncodingSteps")
    maker = (text(sidecar, "Manufacturer"), text(sidecar, "ManufacturersModelName"))
    told = (*maker, *(text(sidecar, key) for key in ("SeriesDescription", "StudyDescription")))
    return Acquisition(
        imaging_frequency_mhz=number(sidecar, "ImagingFrequency"),
        scanner=" ".join(part for part in maker if part),
        sequence=text(sidecar, "PulseSequenceName", "SequenceName"),
        repetition_time_ms=None if repetition_s is None else ms_from_s(repetition_s),
        flip_angle_deg=number(sidecar, "FlipAngle"),
        acquired_matrix=(int(columns), int(rows)) if columns and rows else None,
        contrast_agent=text(sidecar, "ContrastBolusIngredient", "ContrastBolusAgent"),
        is_synthetic=sidecar.get("Synthetic") is True
        or any("synthetic" in part.lower() for part in told),
    )


def subject_of(sidecar: Mapping[str, Any], path: Path, study_path: Path) -> Subject:
    """Read whose images they are; the path stands for the study UID."""
    label = name_parts(path).entities.get("sub", "")
    patient_id = text(sidecar, "PatientID") or (f"sub-{label}" if label else "")
    return Subject(
        patient_name=text(sidecar, "PatientName"),
        patient_id=patient_id,
        birth_date=_day(text(sidecar, "PatientBirthDate")),
        study_date=_day(text(sidecar, "AcquisitionDateTime", "StudyDate", "AcquisitionDate")),
        sex=sex if (sex := text(sidecar, "PatientSex")) in ("M", "F", "O") else "",
        study_uid=str(study_path.resolve()),
        series_description=text(sidecar, "SeriesDescription"),
    )


def _day(stated: str) -> date | None:
    digits = stated[:10].replace("-", "")[:8]
    try:
        return date(int(digits[:4]), int(digits[4:6]), int(digits[6:8]))
    except ValueError:
        return None
