"""Findings of reading: bytes, formats and region files."""

from liverfe.wording.findings._entry import FindingWording

FILE_FINDINGS: dict[str, FindingWording] = {
    # Files and bytes.
    "damaged-file": FindingWording(
        level="caution",
        text="File {file} cannot be used: {reason}.",
        effect="An image less; where it held an echo of a slice, that slice is refused.",
        remedy="Send this file again from the scanner or the archive.",
    ),
    "file-changed": FindingWording(
        level="stop",
        text="File {file} changed while it was read.",
        effect="Parts of two files would be measured as one.",
        remedy="Wait until the images have arrived in full, then run again.",
    ),
    "too-large": FindingWording(
        level="stop",
        text=(
            "{where} would need {n_gib} GiB of memory for {shape} values; up to {most_gib} "
            "GiB are allowed."
        ),
        effect="None: nothing was read. Sizes like this come from a broken or crafted header.",
        remedy="Check the header; give one acquisition at a time.",
    ),
    "pixel-format-contradicts": FindingWording(
        level="stop",
        text="File {file}: the pixel format makes no sense for one grey image ({stated}).",
        effect="Values read with the wrong format are no signal.",
        remedy="Export the images again.",
    ),
    "pixel-data-length": FindingWording(
        level="stop",
        text=(
            "File {file}: (7FE0,0010) PixelData declares {n_stated} bytes, its rows, "
            "columns and bits need {n_wanted}."
        ),
        effect="Values read with the wrong format are no signal.",
        remedy="Export the images again.",
    ),
    "pixel-data-truncated": FindingWording(
        level="stop",
        text=(
            "File {file} is cut off: {n_there} bytes of pixel data (7FE0,0010) are there, "
            "{n_wanted} are needed."
        ),
        effect="The rest of the slice would be missing or made up.",
        remedy="Send this file again from the scanner or the archive.",
    ),
    "values-outside-bits": FindingWording(
        level="stop",
        text=(
            "File {file} holds the value {value}, which does not fit the {bits} bits of "
            "(0028,0101) BitsStored."
        ),
        effect="Readers wrap such values around without a word: bright tissue becomes dark.",
        remedy="Export the images again.",
    ),
    "no-decoder": FindingWording(
        level="stop",
        text="File {file} is compressed as {syntax}, for which no decoder is installed.",
        effect="None: nothing was read.",
        remedy="Install python-gdcm, or export the images uncompressed.",
    ),
    "pixels-unreadable": FindingWording(
        level="stop",
        text="The pixel data of file {file} cannot be decoded ({reason}).",
        effect="None: nothing was read.",
        remedy="Send this file again from the scanner or the archive.",
    ),
    # NIfTI files.
    "nifti-damaged": FindingWording(
        level="stop",
        text="File {file} is damaged: {reason}.",
        effect="Damaged NIfTI files load as other numbers without a word.",
        remedy="Copy or convert this file again.",
    ),
    "nifti-unsupported": FindingWording(
        level="stop",
        text="File {file} cannot be used: {reason}.",
        effect="None: nothing was read.",
        remedy=(
            "Convert to a NIfTI file of one real number a voxel, echoes along the fourth "
            "axis or one file an echo."
        ),
    ),
    "nifti-echo-times-missing": FindingWording(
        level="stop",
        text=(
            "File {file}: nothing states its echo times; there is no JSON sidecar with EchoTime."
        ),
        effect=(
            "R2* is a rate: without the echo times there is none, and a guessed one scales "
            "LIC at will."
        ),
        remedy=(
            "State them with --echo-times-ms, or put the JSON sidecar of the conversion "
            "beside the file."
        ),
    ),
    "nifti-echoes-differ": FindingWording(
        level="stop",
        text="{where}: the files of the echoes do not lie on one grid, for example {file}.",
        effect="Echoes of different grids make no decay.",
        remedy="Convert all echoes of one acquisition in one go.",
    ),
    "nifti-echo-repeated": FindingWording(
        level="stop",
        text=(
            "{where}: {n_files} files state the same echo time ({time} ms), for example "
            "{file}, and nothing tells them apart."
        ),
        effect="Repeats that are mixed give a decay that was never measured.",
        remedy="Give the files of one repeat at a time.",
    ),
    "sidecar-unreadable": FindingWording(
        level="stop",
        text="The sidecar {file} is no sound JSON document: {reason}.",
        effect="Echo times and field strength stand in it.",
        remedy="Mend or replace the file.",
    ),
    # Region files.
    "region-file-unreadable": FindingWording(
        level="stop",
        text="The region file {file} cannot be read: {reason}.",
        effect="Without a region no LIC can be stated.",
        remedy="Give a NIfTI label image or an outline file; see the reference for its form.",
    ),
    "region-file-invalid": FindingWording(
        level="stop",
        text="The region file {file} is not as it should be at {key}: {reason}.",
        effect="A region that is not where it was drawn measures other tissue.",
        remedy="Correct {key}; the form is described in the reference of the outline file.",
    ),
    "region-labels-not-whole": FindingWording(
        level="stop",
        text=(
            "The label image {file} holds values that are no whole numbers, for example {value}."
        ),
        effect="A mask that was resampled or weighted has no sharp region.",
        remedy="Save the labels as whole numbers, resampled by nearest neighbour.",
    ),
    "region-empty": FindingWording(
        level="stop",
        text="The region file {file} holds no region.",
        effect="Without a region no LIC can be stated.",
        remedy="Draw at least one region.",
    ),
    "frame-of-reference-differs": FindingWording(
        level="stop",
        text=(
            "The region {region} was drawn on another frame of reference (0020,0052) than "
            "the images."
        ),
        effect="The same millimetres mean another place: the region measures other tissue.",
        remedy="Draw the region on images of this examination.",
    ),
}
