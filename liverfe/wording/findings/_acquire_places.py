"""Findings of reading: where images lie and which belong together."""

from liverfe.wording.findings._entry import FindingWording

PLACE_FINDINGS: dict[str, FindingWording] = {
    # Places.
    "position-missing": FindingWording(
        level="stop",
        text=(
            "{series}: {tag} is absent or no plane in {n_lacking} of {n_images} images, for "
            "example in file {file}."
        ),
        effect=(
            "Without places echoes of different slices are mixed and a region meets the "
            "wrong tissue."
        ),
        remedy="Export the images again with {tag}.",
    ),
    "slice-distance-missing": FindingWording(
        level="stop",
        text=(
            "{series} has one slice and states neither (0018,0050) SliceThickness nor "
            "(0018,0088) SpacingBetweenSlices, for example in file {file}."
        ),
        effect="The volume of a region and the fit of a mask need it.",
        remedy="Export the images again with these elements.",
    ),
    "uneven-slice-gaps": FindingWording(
        level="caution",
        text=(
            "{series}: the slices are unevenly spaced; one lies {shift} mm off an even "
            "distance of {step} mm."
        ),
        effect="A region near it may meet the neighbouring tissue by that much.",
        remedy="Check in the picture that the region's outline fits.",
    ),
    "slices-not-a-stack": FindingWording(
        level="stop",
        text=(
            "{series}: the slices make no even stack; one lies {shift} mm off an even "
            "distance of {step} mm."
        ),
        effect="A region would meet the wrong slice.",
        remedy="Give slices of one even stack, or each group of slices by itself.",
    ),
    "slices-missing": FindingWording(
        level="caution",
        text=(
            "{series}: {n} slices are missing altogether, at {places} mm along the slice "
            "normal, while their neighbours are there."
        ),
        effect="A region loses its part in these slices.",
        remedy="Send the missing slices again from the scanner or the archive.",
    ),
    "holes-in-echo-table": FindingWording(
        level="stop",
        text=(
            "{series}: {n_missing} images are missing, of echo times {times} ms at {places} "
            "mm along the slice normal, for example beside file {file}; told by {tag}."
        ),
        effect=(
            "A decay with some of its echoes missing gives another R2*, and a region over "
            "the hole shrinks without a word."
        ),
        remedy="Send the missing images again from the scanner or the archive.",
    ),
    "no-complete-slice": FindingWording(
        level="stop",
        text=(
            "{series}: no slice has all its echoes; {n_missing} images are missing, of echo "
            "times {times} ms at {places} mm along the slice normal, for example beside "
            "file {file}; told by {tag}."
        ),
        effect="A decay with some of its echoes missing gives another R2*.",
        remedy="Send the whole series again from the scanner or the archive.",
    ),
    "position-not-stated": FindingWording(
        level="caution",
        text=(
            "{where}: neither qform nor sform of the NIfTI header is set; voxel sizes are "
            "taken from it, the place and the sides of the patient are not known."
        ),
        effect=(
            "R2* is not touched, but left and right in the pictures may be swapped, and "
            "only a mask on the same grid fits."
        ),
        remedy="Convert the images again with a tool that writes the sform.",
    ),
    "sform-qform-differ": FindingWording(
        level="caution",
        text=(
            "{where}: qform and sform of the NIfTI header place the voxels up to {shift} mm "
            "apart; the sform is taken."
        ),
        effect="A region made with the other one meets the wrong tissue.",
        remedy="Check in the picture that the region's outline fits.",
    ),
    # Series, repeats, duplicates.
    "series-joined": FindingWording(
        level="note",
        text=(
            "The echoes of this acquisition lay in {n_series} series ({series}) of one "
            "geometry and sequence; they were joined."
        ),
        effect="None if they are one acquisition.",
        remedy="None needed.",
    ),
    "join-ambiguous": FindingWording(
        level="caution",
        text=(
            "{series} could belong to more than one repeat of the acquisition; it was "
            "joined to the first that lacked its echo time."
        ),
        effect="Echoes of two repeats may be mixed: a breath-hold apart, a few per cent.",
        remedy="Give the series of one repeat at a time.",
    ),
    "echoes-acquired-apart": FindingWording(
        level="caution",
        text=("{series} was acquired more than 5 s after the other echoes that it is joined with."),
        effect=(
            "Between acquisitions the patient moves and the receiver may be set anew, which "
            "looks like decay."
        ),
        remedy="Prefer an acquisition of all echoes in one breath-hold.",
    ),
    "repeats-unseparated": FindingWording(
        level="stop",
        text=(
            "{series}: {n_images} images lie at the same place with the same echo time "
            "({time} ms), and neither acquisition number, temporal position nor time tells "
            "them apart."
        ),
        effect=(
            "Repeats that are mixed or averaged without a word give a decay that was never "
            "measured."
        ),
        remedy="Give one repeat at a time.",
    ),
    "coils-uncombined": FindingWording(
        level="stop",
        text=(
            "{series} holds {n_images} images of each echo and place, one a receiver coil "
            "(for example at {time} ms)."
        ),
        effect=(
            "Images of single coils have another noise floor and shading: LIC is wrong "
            "where iron is high."
        ),
        remedy="Reconstruct with the coils combined.",
    ),
    "duplicates-dropped": FindingWording(
        level="note",
        text="{n_files} files hold an image that another file holds too; they were dropped.",
        effect="None: the images are the same.",
        remedy="None needed.",
    ),
    "same-uid-different-image": FindingWording(
        level="stop",
        text=(
            "The files {file} and {other} carry one SOP Instance UID (0008,0018) and are "
            "not the same image."
        ),
        effect="One of them is wrong, and nothing says which: the decay may mix both.",
        remedy="Export the study again from its source; do not mix exports.",
    ),
    "patients-mixed": FindingWording(
        level="stop",
        text=(
            "Images of different patients (0010,0020) carry one Study Instance UID, for "
            "example in {series}."
        ),
        effect="The LIC would be another person's.",
        remedy="Give the images of one patient; have the archive corrected.",
    ),
    "several-studies": FindingWording(
        level="caution",
        text=(
            "The input holds images of {n_studies} studies and {n_patients} patients; none "
            "were joined across studies."
        ),
        effect="None as long as the right stack is chosen.",
        remedy="Give one study at a time, or choose with --stack.",
    ),
}
