"""Findings of reading: what headers and sidecars state: field, echo times, sequence."""

from liverfe.wording.findings._entry import FindingWording

STATEMENT_FINDINGS: dict[str, FindingWording] = {
    # The field strength.
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
            "The files state a field of {stated} T, the imaging frequency says {measured} "
            "T: both cannot be true, so no field strength is taken and no LIC is stated."
        ),
        effect="A curve of the wrong field makes LIC wrong by up to a factor of two.",
        remedy=(
            "Check (0018,0087) MagneticFieldStrength and (0018,0084) ImagingFrequency at "
            "the scanner; R2* stands."
        ),
    ),
    "field-missing": FindingWording(
        level="note",
        text=(
            "No field strength is stated in {where}: {tag} and the imaging frequency are absent."
        ),
        effect=(
            "A calibration curve holds for its own field; that of another field makes LIC "
            "wrong by up to a factor of two."
        ),
        remedy=(
            "Export the images with their field strength, or state it with --field-t; R2* "
            "stands without it."
        ),
    ),
    "field-given": FindingWording(
        level="note",
        text=(
            "The field strength of {where} was stated by the user: {given} T; the files say "
            "nothing."
        ),
        effect="A wrong statement makes LIC wrong by up to a factor of two.",
        remedy="None needed if it is the scanner's own field.",
    ),
    "field-given-conflict": FindingWording(
        level="stop",
        text="{where}: the user states {given} T, the files say {stated} T.",
        effect=("A calibration curve of the wrong field makes LIC wrong by up to a factor of two."),
        remedy="Leave --field-t out, or check which scanner the images come from.",
    ),
    "field-differs": FindingWording(
        level="stop",
        text=(
            "{series} holds images of different fields: {fields} in (0018,0087) "
            "MagneticFieldStrength."
        ),
        effect="R2* depends on the field: echoes of two scanners make no decay.",
        remedy="Give one acquisition at a time.",
    ),
    # Echo times.
    "echo-time-missing": FindingWording(
        level="stop",
        text=(
            "{series}: {tag} is absent in {n_lacking} of {n_images} images, for example in "
            "file {file}."
        ),
        effect=(
            "R2* is a rate: without the echo times there is none, and a guessed one scales "
            "LIC at will."
        ),
        remedy=(
            "Export the images again with {tag}, or state the echo times with --echo-times-ms."
        ),
    ),
    "echo-times-out-of-range": FindingWording(
        level="stop",
        text=(
            "{where}: {tag} says {times} ms; echo times between {shortest} and {longest} ms "
            "are wanted."
        ),
        effect="Seconds taken for milliseconds make R2* wrong by a factor of 1000.",
        remedy=(
            "Check the unit: DICOM and --echo-times-ms want milliseconds, EchoTime of a "
            "JSON sidecar wants seconds."
        ),
    ),
    "one-echo": FindingWording(
        level="stop",
        text="{where}: only one echo time is there, {time} ms in {tag}.",
        effect="A decay cannot be seen in one echo.",
        remedy="Give all echoes of a multi-echo gradient-echo acquisition.",
    ),
    "echo-time-gap": FindingWording(
        level="caution",
        text=(
            "{where}: the echo times are {step} ms apart but for a gap between {before} and "
            "{after} ms; an echo seems to be missing altogether."
        ),
        effect=(
            "The fit uses the echoes that are there, at their own times; a missing early "
            "echo lowers the reportable limit."
        ),
        remedy="Check whether an echo was lost on the way from the scanner.",
    ),
    "echo-time-repeated": FindingWording(
        level="stop",
        text=(
            "{series}: {n_images} images lie at each place and all state an echo time of "
            "{time} ms in (0018,0081)."
        ),
        effect=(
            "Some scanners write the shortest echo time into every echo: taken at its word, "
            "no decay is left and LIC comes out as none."
        ),
        remedy=("Export the images with their own echo times, or state them with --echo-times-ms."),
    ),
    "echo-times-given": FindingWording(
        level="note",
        text=(
            "{where}: the echo times {given} ms were stated by the user; images of one "
            "place were ordered by {order}."
        ),
        effect="A wrong list scales R2* and LIC.",
        remedy="None needed if the list is that of the protocol.",
    ),
    "echo-times-conflict": FindingWording(
        level="stop",
        text="{where}: the files state echo times of {stated} ms, the user states {given} ms.",
        effect="Echo times that are wrong by a factor make LIC wrong by that factor.",
        remedy="Leave --echo-times-ms out, or give images without echo times.",
    ),
    "echo-times-count": FindingWording(
        level="stop",
        text="{where}: {n_given} echo times were stated for {n_there} echoes.",
        effect="Echo times on the wrong images make any LIC.",
        remedy="State one echo time for each echo, ascending, with --echo-times-ms.",
    ),
    "echo-order-unknown": FindingWording(
        level="stop",
        text=(
            "{where}: echo times were stated, but nothing in the files orders the images of "
            "one place: (0018,0086) EchoNumbers and (0020,0013) InstanceNumber are absent "
            "or repeat."
        ),
        effect="Echoes in the wrong order make any LIC.",
        remedy="Export the images with their own echo times (0018,0081).",
    ),
    # The sequence.
    "spin-echo": FindingWording(
        level="stop",
        text=(
            "{series} is a spin echo: (0018,0020) ScanningSequence says {sequence} in file {file}."
        ),
        effect=(
            "A spin echo decays with R2, which is far below R2*: LIC would come out far too low."
        ),
        remedy="Give a multi-echo gradient-echo acquisition (ScanningSequence GR).",
    ),
    "echo-planar": FindingWording(
        level="stop",
        text=(
            "{series} is an echo-planar acquisition: (0018,0020) ScanningSequence says "
            "{sequence} in file {file}."
        ),
        effect=(
            "Echo-planar images are distorted where iron is, and their echo time is that of "
            "the centre of k-space only."
        ),
        remedy="Give a multi-echo gradient-echo acquisition (ScanningSequence GR).",
    ),
    "sequence-not-stated": FindingWording(
        level="caution",
        text=(
            "{series}: (0018,0020) ScanningSequence is absent, so nothing says that these "
            "are gradient echoes."
        ),
        effect=(
            "A spin echo decays with R2, which is far below R2*: LIC would come out far too low."
        ),
        remedy="Check the protocol, or export the images with this element.",
    ),
    "contrast-agent": FindingWording(
        level="caution",
        text="{series}: a contrast agent was given, (0018,0010) ContrastBolusAgent.",
        effect=(
            "Contrast agents change R2*: after gadolinium LIC reads some 0.35 mg/g too "
            "high, after an iron oxide several mg/g."
        ),
        remedy=(
            "Do not compare with examinations without contrast; measure before contrast is given."
        ),
    ),
}
