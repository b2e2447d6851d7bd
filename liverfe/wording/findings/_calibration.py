"""Findings of the calibration part of the journey."""

from liverfe.wording.findings._entry import FindingWording

CALIBRATION_FINDINGS: dict[str, FindingWording] = {
    "field-unknown": FindingWording(
        level="caution",
        text=(
            "The field strength is not known, so no calibration curve applies: R2* stands, no LIC "
            "is stated."
        ),
        effect="A curve of the wrong field makes LIC wrong by up to a factor of two.",
        remedy=(
            "State the field: (0018,0087) MagneticFieldStrength in DICOM, MagneticFieldStrength in "
            "the JSON sidecar of a NIfTI file, or the option --field-t."
        ),
    ),
    "no-curve-for-field": FindingWording(
        level="caution",
        text=(
            "No curve from R2* to LIC is published for {field} T, and none of another field may "
            "be used: R2* stands, no LIC is stated."
        ),
        effect="LIC by a curve of another field is wrong by the ratio of the fields.",
        remedy=(
            "Curves are published for {fields} T. A site that has calibrated this field itself can "
            "give its own curve."
        ),
    ),
    "curve-of-another-field": FindingWording(
        level="stop",
        text=(
            "The curve {key} is for {curve_field} T, and the images were taken at {field} T: R2* "
            "of iron grows with the field, so this LIC would be wrong."
        ),
        effect="A 1.5 T curve on 3 T data shows 11.2 where 7 mg/g is true; the reverse, 3.6.",
        remedy=(
            "Leave out the curve to get the default of the field, or name one that holds at "
            "{field} T: {held}."
        ),
    ),
    "field-not-confirmed": FindingWording(
        level="note",
        text=(
            "The files state {field} T and no imaging frequency. Some scanners state 3 T and run "
            "at 2.89 T, which has a curve of its own."
        ),
        effect="If it was 2.89 T, LIC is 4 % too low.",
        remedy="Compare (0018,0084) ImagingFrequency: 127.7 MHz is 3.0 T, 123.1 MHz is 2.89 T.",
    ),
    "local-curve": FindingWording(
        level="caution",
        text=(
            "LOCAL curve: LIC is by the site's own curve {key} (fingerprint {fingerprint}), not by "
            "a published one."
        ),
        effect="A LIC by it cannot be compared with one by a published curve.",
        remedy="Check that this curve, and this fingerprint, are the ones that the site released.",
    ),
    "local-curve-alone": FindingWording(
        level="caution",
        text=(
            "No curve is published for {field} T: the LIC rests on the site's own curve {key} "
            "alone."
        ),
        effect="Nothing published says how far off the LIC may be.",
        remedy="For research only, unless the site has validated it against a reference method.",
    ),
    "fit-model-differs": FindingWording(
        level="note",
        text=(
            "The curve {key} was made with R2* from a fit whose treatment of the noise floor was: "
            "{curve_handling}. Here it is: {handling}."
        ),
        effect=(
            "Fits with an offset read high, truncation reads low at very high R2* (feng2013); at "
            "low and moderate R2* they agree."
        ),
        remedy="At high LIC, read the number with the curves of other origin beside it.",
    ),
    "outside-calibrated-range": FindingWording(
        level="caution",
        text=(
            "Region {region}: R2* {r2star} 1/s lies above the range in which the curve {key} was "
            "studied ({low} to {high} 1/s), so its LIC is an extrapolation."
        ),
        effect="Curves that agree at 12 mg/g differ by 7 mg/g at R2* 1200 1/s.",
        remedy="Take the LIC as very high rather than as a number; compare the other curves.",
    ),
    "below-calibrated-range": FindingWording(
        level="note",
        text=(
            "Region {region}: R2* {r2star} 1/s lies below the range in which the curve {key} was "
            "studied ({low} to {high} 1/s)."
        ),
        effect="In the normal range the curves of one field differ by up to 0.6 mg/g.",
        remedy="None needed: a LIC this low is near or below normal by each published curve.",
    ),
    "lic-not-above-zero": FindingWording(
        level="caution",
        text=(
            "Region {region}: at R2* {r2star} 1/s the curve {key} gives {lic} mg/g, which cannot "
            "be; only an upper bound is stated. Healthy livers have R2* of about 24 to 38 1/s at "
            "1.5 T and more at 3 T."
        ),
        effect="A negative LIC, or a normal one from a region that is not liver.",
        remedy=(
            "Check that the region is liver and not vessel, cyst or bile, and that R2* in 1/s was "
            "not taken from a T2* in ms."
        ),
    ),
    "near-band-threshold": FindingWording(
        level="note",
        text=(
            "Region {region}: the measurement interval {low} to {high} mg/g holds the threshold "
            "{threshold} mg/g of the band set {bands}."
        ),
        effect="The band could change on a repeat, with LIC unchanged.",
        remedy="Read the number and its interval, not the band's name.",
    ),
    "band-depends-on-curve": FindingWording(
        level="note",
        text=(
            "Region {region}: the band depends on the curve. By {key} it is {band}; by {others}. "
            "Band set: {bands}."
        ),
        effect="Another clinic that uses another curve reads another band.",
        remedy="Name the curve with the band; follow a patient by one curve only.",
    ),
}
