"""Write ``docs/reference/curves.md`` from the curves and band sets that ship.

python3 scripts/curves_page.py            write the page
python3 scripts/curves_page.py --check    exit 1 if the page is not up to date
"""

from __future__ import annotations

import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
PAGE = ROOT / "docs" / "reference" / "curves.md"

if str(ROOT) not in sys.path:
    sys.path.insert(0, str(ROOT))

from liverfe.calibration import BandSet, CalibrationCurve, band_sets, published_curves  # noqa: E402
from liverfe.sources import reference  # noqa: E402

OPENING = """\
<!-- Made by scripts/curves_page.py from liverfe/calibration/*.toml. Do not edit by hand. -->

# Calibration curves and band sets

A calibration curve turns R2* (1/s) into liver iron concentration (LIC, mg Fe per g **dry weight**).
A field strength is part of a curve: none is used at another field. Curves are never averaged or
mixed. Near a threshold the choice of curve decides the band, so a report names the curve with every
LIC and shows the LIC by each other curve of the field.

*Evidence* says how an equation is known: **abstract**, read in the paper's own abstract;
**secondary**, as quoted elsewhere; **memory**. Full texts were not read. No paper states the R2*
range that it studied; where the cohort's LIC range is known, it was carried through the curve.
"""

FIELDS = """\
## Which field counts as which

| Field strength | Counts as |
|---|---|
| 1.45 to 1.55 T | 1.5 T |
| 2.86 to 2.93 T | 2.89 T |
| 2.95 to 3.05 T | 3.0 T |
| any other | no published curve: R2* is reported, LIC is not |

Some scanners state 3 T and run at 2.89 T. There the imaging frequency decides (123.1 MHz is 2.89 T,
127.7 MHz is 3.0 T). The curve `dassignies2018` is used at 3.0 T only: nothing says that it was made
at 2.89 T, and the 4 % between the two is what the default gives 2.89 T an equation of its own for.
"""

BANDS_OPENING = """\
## Band sets

The same word means different ranges in different sources ("moderate" is 3.2 to 7 in one and 7 to 15
in another), so a band never stands without its set. The set is chosen by `--bands KEY`. LIC in mg/g
dry weight.
"""


def page() -> str:
    """Make the text of the page."""
    curves = published_curves()
    parts = [OPENING, _overview(curves), FIELDS, "## The curves\n"]
    parts += [_curve(curve) for curve in curves]
    parts += [BANDS_OPENING, *(_band_set(bands) for bands in band_sets())]
    return "\n".join(part.rstrip("\n") + "\n" for part in parts)


def _overview(curves: tuple[CalibrationCurve, ...]) -> str:
    lines = ["| Key | Field | Equation | Evidence | R2* range (1/s) |", "|---|---|---|---|---|"]
    for curve in curves:
        mark = " (default)" if curve.is_default else ""
        lines.append(
            f"| `{curve.key}`{mark} | {curve.field_strength_t:g} T | {curve.equation} "
            f"| {curve.evidence} | {_range(curve)} |"
        )
    return "\n".join(lines)


def _range(curve: CalibrationCurve) -> str:
    if curve.valid_r2star_per_s is None:
        return "not established"
    low, high = curve.valid_r2star_per_s
    if low == 0.0:
        return f"up to {high:g}"
    return f"{low:g} to {high:g}"


def _curve(curve: CalibrationCurve) -> str:
    assert curve.example is not None
    r2star_per_s, lic_mg_per_g = curve.example
    paper = reference(curve.reference_key)
    rows = [
        ("Paper", f"{curve.citation}. {paper.title}."),
        ("Bibliographic data", paper.note),
        ("Field", f"{curve.field_strength_t:g} T"),
        ("Equation as published", curve.equation),
        ("Evidence for the equation", f"{curve.evidence} ({curve.evidence_note})"),
        ("Cohort", curve.cohort),
        ("R2* range (1/s)", _range(curve)),
        ("Fit model of origin", curve.fit_model_of_origin),
        ("Noise floor in that fit", curve.noise_handling),
        ("Reference method", curve.reference_method),
        ("Worked example", f"R2* {r2star_per_s:g} 1/s gives {lic_mg_per_g:.3f} mg/g"),
    ]
    lines = [f"### `{curve.key}`", "", "| | |", "|---|---|"]
    return "\n".join(lines + [f"| {name} | {text} |" for name, text in rows])


def _band_set(bands: BandSet) -> str:
    lines = [
        f"### `{bands.key}`",
        "",
        f"{bands.citation}, {bands.where} (evidence: {bands.evidence}). "
        f"At the thresholds: {bands.threshold_note}.",
        "",
        "| Band | LIC (mg/g) |",
        "|---|---|",
    ]
    for band in bands.bands:
        low = (
            ""
            if band.low_mg_per_g is None
            else f"{'≥' if band.low_closed else '>'} {band.low_mg_per_g:g}"
        )
        high = (
            ""
            if band.high_mg_per_g is None
            else f"{'≤' if band.high_closed else '<'} {band.high_mg_per_g:g}"
        )
        lines.append(f"| {band.name} | {' and '.join(part for part in (low, high) if part)} |")
    return "\n".join(lines)


def main(arguments: list[str]) -> int:
    """Write the page, or with ``--check`` compare it."""
    text = page()
    if arguments == ["--check"]:
        if PAGE.is_file() and PAGE.read_text("utf-8") == text:
            return 0
        sys.stderr.write(f"{PAGE.name} is not up to date: run scripts/curves_page.py\n")
        return 1
    PAGE.write_text(text, "utf-8", newline="\n")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
