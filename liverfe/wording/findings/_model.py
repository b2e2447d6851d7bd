"""Findings of the decay: does the signal behave like one exponential?"""

from liverfe.wording.findings._entry import FindingWording

MODEL_FINDINGS: dict[str, FindingWording] = {
    "signal-rises": FindingWording(
        level="stop",
        text=(
            "Region {region}: the signal rises with echo time ({first} at {first_te} ms, {last} at "
            "{last_te} ms). Echo times are reversed, or these are not magnitude images of a "
            "gradient echo."
        ),
        effect="R2* and LIC would read zero.",
        remedy="Check EchoTime (0018,0081) against the images, or the order of --echo-times-ms.",
    ),
    "signal-not-falling": FindingWording(
        level="caution",
        text=(
            "Region {region}: the signal at {later} ms is higher than at {earlier} ms, by {share} "
            "% of the first echo. One decay cannot rise: this is fat in and out of phase, or "
            "echoes in a wrong order."
        ),
        effect="Two swapped echoes make 15 mg/g read 8; 30 % fat makes 5 read 4.1.",
        remedy="Check the echo times against the images; use fat-suppressed or in-phase echoes.",
    ),
    "echoes-out-of-order": FindingWording(
        level="stop",
        text=(
            "Region {region}: the signal is lost after the first echoes and comes back at later "
            "ones. The echo times do not belong to these images in this order."
        ),
        effect="Echoes sorted by file name make 5 mg/g read 1.4 and 15 read 96.",
        remedy="Check EchoTime (0018,0081) of each image, or the order of --echo-times-ms.",
    ),
    "signal-negative": FindingWording(
        level="stop",
        text=(
            "The images hold negative values ({share} % of voxels): they are phase, real or "
            "imaginary images, not magnitude."
        ),
        effect="Phase read as magnitude gives a LIC that means nothing.",
        remedy="Send the magnitude images (ImageType M, part-mag).",
    ),
    "saturated": FindingWording(
        level="stop",
        text=(
            "Region {region}: {share} % of its voxels show the same highest value at two echoes or "
            "more: the signal is cut off at {value}."
        ),
        effect="A plateau hides decay: 2 mg/g reads 1.1, 5 reads 4.1.",
        remedy="Repeat with a lower receiver gain or image scale.",
    ),
    "two-echoes": FindingWording(
        level="caution",
        text=(
            "There are two echoes only: the decay is fitted, but nothing is left to check that it "
            "is one (no goodness of fit, no sign of fat or motion)."
        ),
        effect="Fat or a wrong echo shifts LIC without a trace.",
        remedy="Acquire at least six echoes.",
    ),
    "poor-fit": FindingWording(
        level="caution",
        text=(
            "Region {region}: the signal does not follow one exponential decay with this noise "
            "(reduced chi-square {chi2}, expected about 1)."
        ),
        effect="Fat, motion or a wrong noise level can shift LIC by tens of percent.",
        remedy="Look at the decay curve; fit fat-suppressed or in-phase echoes, or repeat.",
    ),
    "echo-disagrees": FindingWording(
        level="caution",
        text=(
            "Region {region}: without the echo at {te} ms R2* would be {shift} % different: that "
            "echo does not agree with the others."
        ),
        effect="Two swapped echoes make 15 mg/g read 8; motion in some reads 5.8 for 5.",
        remedy="Check this echo's images and echo time; repeat in one breath-hold.",
    ),
}
