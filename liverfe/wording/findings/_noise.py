"""Findings of the noise."""

from liverfe.wording.findings._entry import FindingWording

NOISE_FINDINGS: dict[str, FindingWording] = {
    "noise-unknown": FindingWording(
        level="stop",
        text=(
            "The noise of these images cannot be found ({reasons}), so the noise floor cannot be "
            "told from slow decay."
        ),
        effect="An unknown noise floor makes high iron read low: 30 mg/g may read 3.",
        remedy=(
            "Send images with their background, or with at least three echoes; or state sigma in a "
            "method file (noise = 'given')."
        ),
    ),
    "noise-ceiling": FindingWording(
        level="caution",
        text=(
            "The noise of these images cannot be measured ({reasons}). An upper bound stands in, "
            "from the scatter of decays within one tissue: the limits of this scan come out low, "
            "and R2* would move by less than 5 % without any noise."
        ),
        effect="None that matters at this R2*; intervals and limits are cautious.",
        remedy="Acquire more echoes, and keep the background in the images.",
    ),
    "channels-not-tested": FindingWording(
        level="note",
        text=(
            "There is no background to tell how many coil channels were combined, and the tissue "
            "leaves it open between {fewest} and {most}; {assumed} is taken for the noise floor."
        ),
        effect="With 16 channels taken as one, 15 mg/g reads 11.5.",
        remedy="State n_channels in a method file if the reconstruction is known.",
    ),
    "noise-varies": FindingWording(
        level="note",
        text=(
            "The noise varies over the body, by a factor of {span}, as parallel imaging makes it; "
            "each voxel is measured with the noise at its place."
        ),
        effect="Where one sigma for all is too high by half, 30 mg/g reads 36.",
        remedy="None needed.",
    ),
    "channels-matter": FindingWording(
        level="caution",
        text=(
            "Region {region}: the number of coil channels is not known and matters here: with "
            "{other} instead of {assumed} R2* would be {shift} % different."
        ),
        effect="The noise floor of many channels is higher; high iron then reads low.",
        remedy="Ask for adaptive coil combination, or state n_channels in a method file.",
    ),
    "channels-decide": FindingWording(
        level="stop",
        text=(
            "Region {region}: the number of coil channels is not known and decides the result: "
            "with {other} instead of {assumed} R2* would be {shift} % different."
        ),
        effect="The noise floor of eight channels taken for that of one turns 20 mg/g into 6.",
        remedy=(
            "Keep the background in the images, ask for adaptive coil combination, or state "
            "n_channels in a method file."
        ),
    ),
    "noise-disagrees": FindingWording(
        level="caution",
        text=(
            "Region {region}: background air and the residuals in tissue disagree about the noise "
            "({air} against {residual}); by the other one R2* would be {shift} % different."
        ),
        effect="Sigma too high by half makes 30 mg/g read 36.",
        remedy="Acquire without image filters, or state sigma in a method file after a noise scan.",
    ),
    "noise-cross-check": FindingWording(
        level="note",
        text=(
            "Background air and the residuals in tissue disagree about the noise ({air} against "
            "{residual}); the residuals are used, and R2* of the headline region moves by less "
            "than 5 % between the two."
        ),
        effect="None that matters at this R2*.",
        remedy="None needed.",
    ),
    "echo-scale-differs": FindingWording(
        level="caution",
        text=(
            "The background noise grows with echo time: later echoes are scaled up against earlier "
            "ones, which makes every R2* about {shift} /s too low."
        ),
        effect="Echoes scaled to one maximum make 5 mg/g read 4, or zero.",
        remedy=(
            "Export without per-image scaling; check RescaleSlope (0028,1053) and private scale "
            "tags of each echo."
        ),
    ),
    "background-offset": FindingWording(
        level="caution",
        text=(
            "The background is not noise alone: it looks like noise on top of a constant of about "
            "{constant}. A constant added to the images makes every R2* too low."
        ),
        effect="With 100 added to the stored values 5 mg/g reads 2.9, and 15 reads 3.4.",
        remedy="Check RescaleIntercept (0028,1052); export the images as they were acquired.",
    ),
    "background-clipped": FindingWording(
        level="caution",
        text=(
            "Single values of the background are exactly zero, others are not: a threshold, or a "
            "constant subtracted from the images and cut off at zero, which makes every R2* too "
            "high."
        ),
        effect="With the noise floor subtracted 15 mg/g reads 18.",
        remedy="Check RescaleIntercept (0028,1052); export the images without a threshold.",
    ),
}
