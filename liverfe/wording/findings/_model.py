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
    "few-echoes": FindingWording(
        level="caution",
        text=(
            "There are {n} echoes only: they can hardly tell a decay that is none from one (fat, a "
            "field gradient and motion pass for more iron or less)."
        ),
        effect="A field gradient can add half to a low LIC without a trace.",
        remedy="Acquire at least six echoes.",
    ),
    "poor-fit": FindingWording(
        level="caution",
        text=(
            "Region {region}: the signal does not follow one exponential decay with this noise "
            "(reduced chi-square {chi2}, expected about 1), and no single cause explains it. "
            "Leaving out one echo, or taking all scatter for noise, moves R2* by up to {shift}."
        ),
        effect="Motion, fat with motion, or a wrong noise level can shift LIC by tens of percent.",
        remedy=(
            "Look at the residuals by echo beside the decay curve (largest without the echo at "
            "{te} ms) and at the misfit map; leave out what is disturbed, or repeat the scan."
        ),
    ),
    "echo-disagrees": FindingWording(
        level="caution",
        text=(
            "Region {region}: the echo at {te} ms does not agree with the others (off by {size} "
            "%). Without it R2* would change by {shift}."
        ),
        effect="Motion or a ghost in one echo, or a saturated first one, shifts LIC by 5 to 20 %.",
        remedy="Check this echo's images and echo time; repeat in one breath-hold.",
    ),
    "echoes-disagree": FindingWording(
        level="caution",
        text=(
            "Region {region}: the echoes at {te} ms do not agree with the others (off by {size} "
            "%), as by motion or a change of gain. Corrected for it R2* would change by {shift}."
        ),
        effect="Motion that takes a tenth off three echoes makes 5 mg/g read 5.3; 30 %, 5.8.",
        remedy=(
            "Look at these echoes' images for ghosts, and at the first ones for saturation; repeat "
            "in one breath-hold, with one gain."
        ),
    ),
    "echoes-alternate": FindingWording(
        level="caution",
        text=(
            "Region {region}: odd and even echoes differ in strength by {size} %, as when the "
            "readout runs forth and back. Corrected for it R2* would change by {shift}."
        ),
        effect="Even echoes 15 % weaker make 15 mg/g read 16.3.",
        remedy="Read all echoes in one direction (monopolar readout), or have the gain corrected.",
    ),
    "echo-lost": FindingWording(
        level="caution",
        text=(
            "Region {region}: the decay fits if an echo is missing between those stated at "
            "{before} and {after} ms and each later one bears the time of the one before it. With "
            "such times R2* would change by {shift}."
        ),
        effect="One echo lost and the list shortened makes 5 mg/g read 6.1, and 15 read 18.2.",
        remedy="Check EchoTime (0018,0081) of each image, or --echo-times-ms; send all echoes.",
    ),
    "echoes-swapped": FindingWording(
        level="stop",
        text=(
            "Region {region}: the images fit one decay in another order than the stated one: "
            "those at {te} ms are exchanged. In that order R2* would change by {shift}."
        ),
        effect="Two swapped echoes make 15 mg/g read 8.",
        remedy="Check EchoTime (0018,0081) of each image, or the order of --echo-times-ms.",
    ),
    "echoes-swapped-slightly": FindingWording(
        level="caution",
        text=(
            "Region {region}: the images fit one decay in another order than the stated one: "
            "those at {te} ms are exchanged. At this R2* it matters little ({shift}), but the "
            "echo times do not belong to these images."
        ),
        effect="Two swapped echoes make 15 mg/g read 8, and change a slow decay by a few percent.",
        remedy="Check EchoTime (0018,0081) of each image, or the order of --echo-times-ms.",
    ),
    "fat-oscillation": FindingWording(
        level="caution",
        text=(
            "Region {region}: the signal swings as fat ({percent} % of it) comes in and out of "
            "phase. With a model of fat and water R2* would change by {shift}."
        ),
        effect="30 % fat makes 5 mg/g read 4.1, or 1 read 0.6, by the echo times.",
        remedy="Acquire with fat suppression or in-phase echo times, and compare.",
    ),
    "field-gradient": FindingWording(
        level="caution",
        text=(
            "Region {region}: the decay bends down with time, as a field gradient through the "
            "slice makes it (near lung, gut or metal). Without it R2* would change by {shift}."
        ),
        effect="One turn across the slice within 20 ms makes 1 mg/g read 2.5.",
        remedy="Keep the region away from the dome and from gas; acquire thinner slices.",
    ),
    "decay-flattens": FindingWording(
        level="caution",
        text=(
            "Region {region}: the decay bends as {part} would bend it. Without it R2* would "
            "change by {shift}."
        ),
        effect="Vessels, a constant in the images or too low a noise make 30 mg/g read 26 or less.",
        remedy="Keep vessels out of the region; check the noise and the images' rescale intercept.",
    ),
    "echo-noisy": FindingWording(
        level="caution",
        text=(
            "Region {region}: the echo at {te} ms scatters far more than the others, as a ghost "
            "makes it. Without it R2* would change by {shift}."
        ),
        effect="A ghost adds signal in some voxels and takes it from others.",
        remedy="Look at this echo's images; repeat in one breath-hold.",
    ),
    "decay-slightly-off": FindingWording(
        level="note",
        text=(
            "Region {region}: {what}. Without it R2* would change by {shift}, as far as the echoes "
            "tell: too little to move a LIC across a decision."
        ),
        effect="Less than 5 %, or less than 0.1 mg/g.",
        remedy="None needed; look at the residuals by echo if it returns in each scan.",
    ),
}

DOUBT_PHRASES: dict[str, str] = {
    "echo-disagrees": "the echo at {te} ms is off by {size} %",
    "echoes-disagree": "the echoes at {te} ms are off by {size} %",
    "echoes-alternate": "odd and even echoes differ in strength by {size} %",
    "echo-lost": "an echo seems to be missing between {before} and {after} ms",
    "fat-oscillation": "the signal swings as {percent} % fat makes it",
    "field-gradient": "the decay bends down as a small field gradient makes it",
    "decay-flattens": "the decay bends as {part} would bend it",
    "lic-shift": " (LIC {shift} %)",
    "also-elsewhere": "It shows in other regions too: {regions}.",
    "slow-part": "a slowly decaying part ({percent} % of the signal)",
    "constant-part": "a constant in the images ({sigmas} times the noise)",
    "echo-noisy": "the echo at {te} ms scatters more than the others",
    "poor-fit": "the signal follows one exponential decay only roughly (chi-square {chi2})",
}
"""Each doubt about a decay as part of a sentence, for effects too small to matter."""
