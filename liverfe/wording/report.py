"""Every sentence, heading and label of the PDF report, once.

Braces are filled by `liverfe.report`; a value that is filled in is never read as markup.
"""

__all__ = ["REPORT", "REPORT_COLUMNS", "REPORT_PLURALS"]

REPORT: dict[str, str] = {
    # On every page
    "title": "Liver iron report",
    "status": "DRAFT - not reviewed",
    "page": "page {page} of {pages}",
    "study_key": "study {key}",
    "synthetic": "SYNTHETIC STUDY - no patient",
    "local_curve": "LOCAL CURVE - this site's own calibration, not a published one",
    # Whose, when, where
    "patient": "Patient",
    "patient_key": "Patient key",
    "patient_unnamed": "not named in the files",
    "withheld": "(withheld)",
    "patient_id": "ID",
    "born": "Born, sex",
    "study_date": "Study date",
    "scanner": "Scanner",
    "field": "Field strength",
    "series": "Series",
    "not_stated": "not stated in the files",
    "tesla": "{field} T",
    # The answer
    "lic": "Liver iron concentration (LIC)",
    "region": "region: {name}",
    "unit_lic": "mg Fe/g dry weight",
    "umol": "{value} µmol/g dry weight",
    "interval_narrow": "{level} % interval narrower than this number's last digit",
    "interval": "{level} % interval {low} to {high} mg/g",
    "interval_from": "{level} % interval from {low} mg/g, open upwards",
    "interval_to": "{level} % interval up to {high} mg/g, open downwards",
    "interval_none": "no interval: the value is a limit",
    "over_limit": (
        "Above the highest LIC that this scan can measure; the true value may be far higher."
    ),
    "under_limit": "Below the lowest LIC that this scan can measure.",
    "band": "Band",
    "band_range": "{low} to {high} mg/g",
    "band_above": "above {low} mg/g",
    "band_below": "up to {high} mg/g",
    "band_all": "all LIC",
    "band_set": "band set {band_set}",
    "band_open": "not one band",
    "band_open_why": "The limit leaves more than one band of the set possible.",
    "verdict": "Quality",
    "verdict_clear": "No caution",
    "verdict_refused": "Refused",
    "verdict_refused_why": "Nothing in this study can be trusted: neither LIC nor R2* is stated.",
    "more_cautions": "{count} more among the findings.",
    "no_lic": "LIC not stated",
    "why_no_field": "The field strength is not known, and the calibration curve depends on it.",
    "why_no_curve": "There is no calibration curve for {field} T that may be used.",
    "why_no_region": (
        "No region was drawn: there are maps, and no value may be taken from them here."
    ),
    "why_no_liver": "No region is liver: other organs get R2* and no LIC.",
    "why_policy": "A finding or the method forbids a LIC for this region; see the cautions.",
    "r2star_limit_line": "R2* {value} s⁻¹",
    "r2star_line": "R2* {value} s⁻¹ ({interval})",
    "r2star": "R2*",
    "t2star": "T2*",
    "voxels_used": "Voxels used",
    "used_of": "{used} of {total}",
    "used_and_over": "{used} of {total}; {over} over the limit",
    "measurable": "Measurable here",
    "noise": "Noise",
    "echoes": "Echoes",
    "echoes_text": "{count}, from {first} to {last} ms",
    "per_second": "{value} s⁻¹",
    "range_per_second": "{low} to {high} s⁻¹",
    "range_lic": "{low} to {high} mg/g",
    "milliseconds": "{value} ms",
    # How sure
    "change_label": "A change",
    "change": (
        "must exceed about {same} % ({same_mg} mg/g here) on the same scanner, {other} % "
        "({other_mg} mg/g) between scanners, to be one."
    ),
    "change_no_value": (
        "must exceed about {same} % on the same scanner, {other} % between scanners, to be one; "
        "a limit cannot be compared."
    ),
    "change_source": (
        "Published test-retest: 2.77 × CoV of {same_cov} % and {other_cov} % ({citation}; "
        "{evidence})."
    ),
    "covers_label": "The interval",
    "covers": (
        "covers the measurement in this region on this visit. It does not cover the "
        "calibration, nor where the region was drawn."
    ),
    "other_curves_line": "Other curves of this field give {low} to {high} mg/g.",
    # Pictures
    "caption_slice": (
        "Slice {slice} of {slices} ({plane}), echo time {te} ms; {left} is on the left"
    ),
    "caption_map": "R2* of the same slice, s⁻¹; the scale is fixed for {field}",
    "caption_map_any": "fields above 2 T or not known",
    "caption_map_low": "fields up to 2 T",
    "caption_map_high": "fields above 2 T",
    "caption_decay": "Signal against echo time, region {name}",
    "caption_residuals": "; below, what one decay leaves over, in units of the noise",
    "legend_outline": "outline of the region, as counted",
    "legend_over": "over the limit of this scan",
    "plot_signal": "median, quartiles",
    "plot_fit": "fit with noise floor",
    "plot_limit": "decay at the limit of this scan",
    "plot_floor": "noise floor",
    "axis_echo_time": "echo time (ms)",
    "axis_signal": "signal (log scale)",
    "axis_residual": "residual / σ",
    "plane_axial": "axial",
    "plane_coronal": "coronal",
    "plane_sagittal": "sagittal",
    "side_R": "the patient's right",
    "side_L": "the patient's left",
    "side_A": "anterior",
    "side_P": "posterior",
    "side_S": "superior",
    "side_I": "inferior",
    "alt_slice": (
        "Grey picture of slice {slice} of {slices} ({plane}) at echo time {te} ms, turned so "
        "that the picture's left is {left}, right {right}, top {top}, bottom {bottom}. "
        "{outline} A scale bar stands below."
    ),
    "alt_outline": "A white line encloses the region {name}.",
    "alt_no_outline": "No region is drawn.",
    "alt_map": (
        "R2* map of the same slice on a fixed logarithmic scale from {low} (dark blue) to "
        "{high} per second (yellow). Voxels over the limit of this scan are hatched; voxels "
        "without a measurement are left white. {outline}"
    ),
    "alt_decay": (
        "Median signal of the region {name} at {count} echo times from {first} to {last} ms on "
        "a logarithmic scale, from {start} at the first to {end} at the last; {curve}; and a "
        "dashed line at the noise floor of {floor}."
    ),
    "alt_residuals": (
        " Below, the mean residual of each echo in units of the noise, largest {largest} "
        "at {te} ms."
    ),
    "alt_curve_fit": "the fitted curve through them",
    "alt_curve_limit": "the decay at the limit of this scan, which they lie beyond",
    # Details
    "regions": "All regions",
    "regions_note": (
        "R2* in s⁻¹ with its {level} % interval and, before trimming, in the last column; IQR "
        "in s⁻¹; LIC in mg Fe/g dry weight. Over limit, failed and trimmed count voxels."
    ),
    "limits": "What this scan can measure",
    "limits_text": (
        "In region {name}: R2* from {low} to {high} s⁻¹{lic}. The upper limit lies where the "
        "standard error of one voxel (signal {s0}, noise {sigma}) reaches {share} % of R2*; the "
        "lower one follows from the region's own interval. Beyond a limit the limit is shown."
    ),
    "spread_beyond_noise": "R2* of its voxels spreads by {sd} s⁻¹ (SD) beyond what noise explains.",
    "spread_of_noise": "R2* of its voxels spreads no more than noise explains.",
    "limits_lic": ", LIC from {low} to {high} mg/g",
    "method": "Method",
    "method_fit": "Fit: {estimator}, voxel by voxel.",
    "method_noise": "Noise: σ = {sigma} a channel (± {relative} %), {channels}, from {how}.",
    "method_region": "Region: {trim}; value: {statistic}, {level} % interval.",
    "method_limit": (
        "Limit: voxels whose standard error passes {share} % of R2* are over the limit, and a "
        "region with {censored} % of such voxels or more is censored."
    ),
    "channels_one": "1 channel (Rician)",
    "channels_many": "{count} effective channels",
    "noise_air": "background air",
    "noise_residual": "residuals in tissue",
    "noise_joint": "the likelihood of whole decays",
    "noise_given": "the method file",
    "noise_ceiling": "an upper bound only: nothing measures it",
    "trim_none": "no voxel trimmed",
    "trim_mad": (
        "voxels further than {mads} scaled median absolute deviations from the median trimmed"
    ),
    "findings": "Findings",
    "no_findings": "None: every check passed.",
    "effect": "If unnoticed: {effect}",
    "level_note": "note",
    "level_caution": "caution",
    "level_stop": "stop",
    "others": "LIC by every curve of this field",
    "others_text": (
        "From the same R2*. Curves are never averaged or mixed; the report's own curve stands "
        "first."
    ),
    "calibration": "Calibration",
    "calibration_key": "Curve",
    "equation": "Equation",
    "citation": "Citation",
    "evidence": "Evidence",
    "cohort": "Cohort",
    "range": "R2* range studied",
    "range_unknown": "not established",
    "model": "Fit model of origin",
    "model_here": "Fit model here",
    "model_note": (
        "{estimator}. A fit model is part of a calibration: where the two differ, LIC carries a "
        "difference that the interval does not cover."
    ),
    "curve_line": "curve {key}, {field} T",
    "evidence_abstract": "equation read in the paper's own abstract or page",
    "evidence_secondary": "equation as quoted elsewhere, not checked against the paper",
    "evidence_memory": "equation not checked against a source",
    "evidence_local": "this site's own curve",
    "no_calibration": "No curve was used.",
    "not_measured": "Not measured",
    "not_measured_text": (
        "Fat, inflammation and fibrosis; iron in other organs; the liver outside the regions; "
        "whether the outline holds liver only. Contrast agent: {contrast}."
    ),
    "no_contrast": "none stated in the files",
    "audit": "Audit",
    "audit_study": "Study key",
    "audit_patient": "Patient key",
    "audit_method": "Method",
    "audit_software": "Software",
    "audit_hash": "SHA-256 of result.json",
    "audit_inputs": "Input files",
    "audit_layout": "Layout",
    "audit_left_out": "Left out",
    "left_out_item": "{what} ({count}): {why}",
    "audit_attached": (
        "The file result.json is attached to this PDF; every number here is read from the same "
        "result."
    ),
    "attachment": "Every number of this report, as data (schema 1).",
    # Refused
    "refused_what": "What was found, and where",
    "refused_effect": "Why it matters for LIC",
    "refused_remedy": "What to do",
    # Text that cannot be shown
    "replaced": "Some characters of names or texts cannot be printed and stand as ?.",
}
"""Words of the report by key."""

REPORT_COLUMNS: dict[str, tuple[str, ...]] = {
    "regions": (
        "Region", "Organ", "Used / all voxels", "R2*", "IQR", "LIC", "Over limit", "Failed",
        "Trimmed", "Before trim",
    ),
    "findings": ("Level", "What was found", "What to do"),
    "others": ("Curve", "LIC, mg/g (interval)", "Band", "Citation", "Evidence"),
}  # fmt: skip
"""Headings of the report's tables."""

REPORT_PLURALS: dict[str, tuple[str, str]] = {
    "cautions": ("1 caution", "{count} cautions"),
}
"""Words that count: for one, and for any other number."""
