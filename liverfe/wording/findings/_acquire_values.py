"""Findings of reading: what the numbers of the images are."""

from liverfe.wording.findings._entry import FindingWording

VALUE_FINDINGS: dict[str, FindingWording] = {
    # What the numbers are.
    "name-not-decodable": FindingWording(
        level="note",
        text=(
            "{series}: the patient's name does not fit the stated character set, "
            "(0008,0005) SpecificCharacterSet; the report may show it wrongly."
        ),
        effect="None: the name is not used to measure.",
        remedy="Go by the patient's number, or have the archive corrected.",
    ),
    "image-kind-not-stated": FindingWording(
        level="caution",
        text=(
            "{series}: neither (0008,0008) ImageType nor another element says that these "
            "are magnitude images; they are taken as such, since their values fit."
        ),
        effect="Phase taken for magnitude gives an LIC near zero.",
        remedy="Export the images with their full image type.",
    ),
    "no-magnitude": FindingWording(
        level="stop",
        text="{series} holds no magnitude images, only: {kinds}.",
        effect=(
            "Only magnitude decays as R2* says; phase taken for magnitude gives an LIC near zero."
        ),
        remedy="Export the magnitude images of this acquisition.",
    ),
    "derived-images": FindingWording(
        level="caution",
        text="{series}: the images are marked DERIVED in (0008,0008) ImageType.",
        effect=(
            "If they were filtered, the noise is no longer that of the acquisition and the "
            "interval of LIC is too narrow."
        ),
        remedy="Prefer the original images.",
    ),
    "filtered-images": FindingWording(
        level="caution",
        text="{series}: the images were filtered or denoised, as (0008,0008) ImageType says.",
        effect=(
            "The noise is no longer that of the acquisition; the interval of LIC is too narrow."
        ),
        remedy="Prefer unfiltered images.",
    ),
    "lossy-compression": FindingWording(
        level="caution",
        text=(
            "{series} was compressed with loss, (0028,2110) LossyImageCompression or its "
            "transfer syntax."
        ),
        effect="Small signals of late echoes suffer most; the error of LIC is not known.",
        remedy="Export the images without loss.",
    ),
    "rescale-differs": FindingWording(
        level="caution",
        text=(
            "{series}: the rescale slope (0028,1053) or intercept (0028,1052) differs between "
            "the echo times; each image was scaled with its own."
        ),
        effect="If the scales only served the display, LIC is wrong by their ratio.",
        remedy="Export the images with one scale, or with the maker's true scaling.",
    ),
    "precise-scaling-used": FindingWording(
        level="note",
        text=(
            "{series}: the rescale slopes differ between images, so the maker's true "
            "scaling (2005,100E) was used."
        ),
        effect="Display scaling that differs between echoes would look like decay.",
        remedy="None needed.",
    ),
    "precise-scaling-missing": FindingWording(
        level="stop",
        text=(
            "{series}: rescale slopes (0028,1053) differ between echoes of several series, "
            "and the maker's true scaling (2005,100E) is absent."
        ),
        effect=(
            "Display scaling that differs between echoes looks like decay: LIC may be anything."
        ),
        remedy="Export the images with their private elements kept.",
    ),
    "real-world-map-differs": FindingWording(
        level="caution",
        text=(
            "{series}: the real-world mapping (0040,9225) differs between images while "
            "their rescale slopes (0028,1053) do not; the rescale slopes were used."
        ),
        effect="If the mapping is the true scale, LIC is wrong by their ratio.",
        remedy="Ask the maker which of both is the true scale.",
    ),
    "rescale-slope-zero": FindingWording(
        level="stop",
        text="File {file} states a rescale slope (0028,1053) of zero.",
        effect="Every value would be the same: no decay is left.",
        remedy="Export the images again.",
    ),
    "signed-values": FindingWording(
        level="stop",
        text=("{where}: {percent} % of the values are negative, so these are no magnitude images."),
        effect="Phase or real images taken for magnitude give an LIC near zero.",
        remedy="Give the magnitude images of this acquisition.",
    ),
    "few-negative-values": FindingWording(
        level="note",
        text="{where}: {percent} % of the values are negative, as resampling leaves them.",
        effect="None where the region holds none.",
        remedy="Prefer images that were not resampled.",
    ),
    "image-signal-rises": FindingWording(
        level="stop",
        text="{where}: the mean signal rises with every one of the {n_echoes} echoes.",
        effect=(
            "No tissue does that: the echo times are in the wrong order, or these are no "
            "magnitude images."
        ),
        remedy="Check the echo times and the order of the echoes.",
    ),
    "image-saturated": FindingWording(
        level="stop",
        text=(
            "{where}: the first echo is cut off at a value of {value}; {n} voxels "
            "({percent} % of the bright ones) have it."
        ),
        effect="A first echo that is cut off flattens the decay: LIC comes out too low.",
        remedy="Acquire again with a lower receiver gain, or export with another scale.",
    ),
    "some-voxels-saturated": FindingWording(
        level="caution",
        text=(
            "{where}: {n} voxels of the first echo ({percent} % of the bright ones) have "
            "the greatest value that can be stored, {value}."
        ),
        effect="In these voxels the decay is flattened and LIC too low.",
        remedy="Keep regions away from the brightest spots, or export with another scale.",
    ),
}
