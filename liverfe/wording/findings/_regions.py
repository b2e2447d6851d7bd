"""Findings of regions and their limits."""

from liverfe.wording.findings._entry import FindingWording

REGION_FINDINGS: dict[str, FindingWording] = {
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
            "a voxel with these echoes, nor in all of them together."
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
    "measured-jointly": FindingWording(
        level="caution",
        text=(
            "Region {region}: S0 over sigma is {snr}; single voxels tell R2* to {best} % at best. "
            "The decays of all its {n} voxels were fitted together instead; the upper limit is the "
            "R2* that voxels measure best."
        ),
        effect="Iron that differs between voxels draws the value down by some percent.",
        remedy="Repeat with larger voxels, more signal, or echoes that suit this R2*.",
    ),
    "two-usable-echoes": FindingWording(
        level="caution",
        text=(
            "Region {region}: {share} % of its measured voxels have signal in two echoes only; "
            "nothing is left there to check the decay."
        ),
        effect="Fat or a wrong echo shifts LIC without a trace.",
        remedy="Repeat with a shorter first echo and echo spacing.",
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
    "uneven-iron": FindingWording(
        level="caution",
        text=(
            "Region {region}: R2* differs much between its voxels (a tenth below {low} /s, a tenth "
            "above {high} /s, median {median} /s): two kinds of tissue, or many vessels."
        ),
        effect="With 70 % of a liver at 5 mg/g and 30 % at 25 the median says 5.3, the mean 11.",
        remedy="Look at the map; report the parts as regions of their own, without vessels.",
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
