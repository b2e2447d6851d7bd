"""Findings of the journey itself: which stack, which regions."""

from liverfe.wording.findings._entry import FindingWording

JOURNEY_FINDINGS: dict[str, FindingWording] = {
    "no-stack": FindingWording(
        level="stop",
        text="The input holds no stack of gradient-echo magnitude images. Left out: {left_out}.",
        effect="Without images of several echo times there is nothing to measure.",
        remedy=(
            "Give the folder or files of the multi-echo gradient-echo series; liverfe inspect "
            "lists what was left out and why."
        ),
    ),
    "several-stacks": FindingWording(
        level="stop",
        text="The input holds {count} usable stacks, and none was chosen: {stacks}.",
        effect="A repeat, another run or another patient's scan would be measured by chance.",
        remedy="Choose one with --stack and its number.",
    ),
    "no-region": FindingWording(
        level="caution",
        text=(
            "No region was given and none was found, so there are maps only: LIC is a region's "
            "value and is not stated."
        ),
        effect="An LIC of the whole image would mix liver with everything around it.",
        remedy=(
            "Draw a region on these images and give it with --regions, or put its file into the "
            "folder regions/STUDY-KEY of the output folder, and run again."
        ),
    ),
    "holes-outside-regions": FindingWording(
        level="caution",
        text=(
            "{n_missing} images of this stack are missing, all on slices that no region touches; "
            "{n_complete} of {n_slices} slices are complete."
        ),
        effect="None on the regions; maps are empty on the incomplete slices.",
        remedy="Send the missing images again if those slices matter.",
    ),
    "regions-ambiguous": FindingWording(
        level="stop",
        text=(
            "{count} region files were found ({files}), and more than one of them holds a region "
            "named {name!r}."
        ),
        effect="Drawings of two readers would be pooled into a LIC that neither of them drew.",
        remedy="Name the one to use with --regions, or keep one of them in the folder.",
    ),
    "regions-in-two-forms": FindingWording(
        level="note",
        text=(
            "The same regions came as label image ({used}) and as outlines ({unused}); the label "
            "image was used."
        ),
        effect="None where both are one drawing; else the other one is not in the LIC.",
        remedy="Name the file to use with --regions where they differ.",
    ),
    "regions-changing": FindingWording(
        level="stop",
        text="The region file {file} changed while it was read.",
        effect="The region would be a mixture of two drawings.",
        remedy="Save the drawing to its end and run again.",
    ),
}
