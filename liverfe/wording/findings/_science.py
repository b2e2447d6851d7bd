"""Findings of noise, fit, maps, regions and study."""

from liverfe.wording.findings._entry import FindingWording

SCIENCE_FINDINGS: dict[str, FindingWording] = {
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
            "There is no background to tell how many coil channels were combined; one is assumed "
            "for the noise floor."
        ),
        effect="With 16 channels taken as one, 15 mg/g reads 11.5.",
        remedy="State n_channels in a method file if the reconstruction is known.",
    ),
    "channels-matter": FindingWording(
        level="caution",
        text=(
            "Region {region}: the number of coil channels is not known and matters here: with "
            "{other} channels instead of one R2* would be {shift} % different."
        ),
        effect="The noise floor of many channels is higher; high iron then reads low.",
        remedy="Ask for adaptive coil combination, or state n_channels in a method file.",
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
    "uneven-iron": FindingWording(
        level="caution",
        text=(
            "Region {region}: R2* differs much between its voxels (a tenth below {low} /s, a tenth "
            "above {high} /s, median {median} /s): two kinds of tissue, or many vessels."
        ),
        effect="With 70 % of a liver at 5 mg/g and 30 % at 25 the median says 5.3, the mean 11.",
        remedy="Look at the map; report the parts as regions of their own, without vessels.",
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
    "region-outside-image": FindingWording(
        level="stop",
        text="Region {region} ({source}) covers no voxel of the images.",
        effect="There is nothing to measure.",
        remedy="Draw the region on this acquisition, or check that both name the same space.",
    ),
    "region-outside-body": FindingWording(
        level="stop",
        text="Region {region}: {share} % of its voxels lie outside the body.",
        effect="Noise would be measured as iron.",
        remedy="Check the affine of the region file; draw the region on these images.",
    ),
    "region-not-planar": FindingWording(
        level="stop",
        text="Region {region}: one of its outlines does not lie in a slice of these images.",
        effect="Its voxels cannot be told.",
        remedy="Draw the outline on this acquisition.",
    ),
    "region-resampled": FindingWording(
        level="note",
        text=(
            "Region {region} was drawn on another grid and was placed on the images by its affine."
        ),
        effect="None, if both affines are right.",
        remedy="Look at the outline on the picture.",
    ),
    "region-on-left": FindingWording(
        level="caution",
        text=(
            "Region {region} counts as liver and lies on the patient's left: it may be flipped, or "
            "drawn on the spleen."
        ),
        effect="Spleen taken for liver: 15 mg/g reads 1.4.",
        remedy="Look at the outline on the picture; name a left lobe so.",
    ),
    "region-in-hole": FindingWording(
        level="stop",
        text=(
            "Region {region} lies on slices of which images are missing: {missing}. Its decay "
            "cannot be measured there."
        ),
        effect="A lost echo makes 5 mg/g read 6.1 and 15 read 18.2.",
        remedy="Send the missing images again, or draw the region on complete slices.",
    ),
    "regions-overlap": FindingWording(
        level="note",
        text="Regions {first} and {second} share {n} voxels; each counts them.",
        effect="A pooled value counts each voxel once.",
        remedy="None needed.",
    ),
    "signal-too-low": FindingWording(
        level="stop",
        text=(
            "Region {region}: S0 over sigma is {snr}; no R2* could be measured to {relative} % in "
            "a voxel with these echoes."
        ),
        effect="Voxels would be noise, and their median biased.",
        remedy=(
            "Repeat with larger voxels or more signal, or allow a greater voxel_relative_se in a "
            "method file."
        ),
    ),
    "voxels-imprecise": FindingWording(
        level="caution",
        text=(
            "Region {region}: S0 over sigma is {snr}; no voxel measures R2* to {relative} % with "
            "these echoes, the best to {best} %. The median of the region is measured; its upper "
            "limit is the R2* that voxels measure best."
        ),
        effect="At low signal the median of fast decays is biased by some percent.",
        remedy="Repeat with larger voxels, more signal, or echoes that suit this R2*.",
    ),
    "channels-decide": FindingWording(
        level="stop",
        text=(
            "Region {region}: the number of coil channels is not known and decides the result: "
            "with {other} channels instead of one R2* would be {shift} % different."
        ),
        effect="The noise floor of eight channels taken for that of one turns 20 mg/g into 6.",
        remedy=(
            "Keep the background in the images, ask for adaptive coil combination, or state "
            "n_channels in a method file."
        ),
    ),
    "no-tissue-signal": FindingWording(
        level="stop",
        text="Region {region} has no signal, and nothing else in the images tells S0.",
        effect="Neither R2* nor a limit can be stated.",
        remedy="Check that the images are magnitude images of the abdomen.",
    ),
    "censored-over-limit": FindingWording(
        level="caution",
        text=(
            "Region {region}: {share} % of its voxels decay faster than this scan can measure "
            "(R2* over {limit} /s). {consequence}"
        ),
        effect="A fitted number beyond the limit may read anything.",
        remedy="Repeat with a shorter first echo and echo spacing, or at a lower field.",
    ),
    "censored-under-limit": FindingWording(
        level="caution",
        text=(
            "Region {region}: R2* is too slow for this scan to tell from none (under {limit} /s)."
        ),
        effect="LIC is normal or low; a number would be noise.",
        remedy="Add later echoes if the value itself is wanted.",
    ),
    "s0-from-elsewhere": FindingWording(
        level="note",
        text=(
            "Region {region}: too few voxels give their own S0; its limit is computed with S0 of "
            "the darker quarter of the other tissue, which makes the limit a low one."
        ),
        effect="The true limit may be higher than stated.",
        remedy="None needed.",
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
    "many-failed": FindingWording(
        level="caution",
        text="Region {region}: the fit failed in {share} % of its voxels.",
        effect="The value stands for the rest only.",
        remedy="Look at the picture: is the region in liver, and free of artefacts?",
    ),
    "most-failed": FindingWording(
        level="stop",
        text="Region {region}: the fit failed in {share} % of its voxels.",
        effect="The few that are left do not stand for the region.",
        remedy="Check the images of this region; draw it elsewhere.",
    ),
    "many-trimmed": FindingWording(
        level="caution",
        text=(
            "Region {region}: {share} % of its voxels are outliers and were trimmed (R2* {before} "
            "/s before, {after} /s after): vessels, edges, or two kinds of tissue."
        ),
        effect="With a third of the liver much darker, one number hides it.",
        remedy="Look at the map; keep vessels and edges out, or report two regions.",
    ),
    "few-voxels": FindingWording(
        level="caution",
        text="Region {region} has {n} usable voxels; at least {wanted} are wanted.",
        effect="The interval is wide and one vessel moves the value.",
        remedy="Draw a larger region, best the whole liver.",
    ),
    "no-liver-region": FindingWording(
        level="caution",
        text="None of the regions is liver by its name, so no LIC is stated.",
        effect="None.",
        remedy="Name a region liver, or right lobe, and run again.",
    ),
    "estimator-for-comparison": FindingWording(
        level="caution",
        text="R2* was fitted by {estimator}, which is meant for comparison: {why}.",
        effect="At high iron the plain estimators read low or high by tens of percent.",
        remedy="Use rician-ml for a clinical value.",
    ),
}
