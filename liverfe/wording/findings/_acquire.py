"""Findings of reading: what files say, lack or contradict."""

from liverfe.wording.findings._entry import FindingWording

ACQUIRE_FINDINGS: dict[str, FindingWording] = {
    "field-from-frequency": FindingWording(
        level="note",
        text=(
            "The files state {stated}, while the imaging frequency says {measured} T; the "
            "frequency decides which calibration curve applies."
        ),
        effect="A curve of 3.0 T used at 2.89 T gives a LIC 4 % too low.",
        remedy="None needed.",
    ),
    "field-conflict": FindingWording(
        level="caution",
        text=(
            "The files state a field of {stated} T, the imaging frequency says {measured} T: both "
            "cannot be true, so no field strength is taken and no LIC is stated."
        ),
        effect="A curve of the wrong field makes LIC wrong by up to a factor of two.",
        remedy=(
            "Check (0018,0087) MagneticFieldStrength and (0018,0084) ImagingFrequency at the "
            "scanner; R2* stands."
        ),
    ),
}
