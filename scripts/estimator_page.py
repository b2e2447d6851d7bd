"""Draw the figures of ``docs/explanation/estimator.md`` and fill in its tables.

python3 scripts/estimator_page.py                    figures and table of bias and precision
python3 scripts/estimator_page.py --bench FILE       the table of what was reached, from the JSON
                                                     that scripts/bench --full --json printed

All chance is seeded and each cell has its own seed, so any part can be made again by itself.
"""

from __future__ import annotations

import argparse
import json
import re
import sys
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import matplotlib as mpl

mpl.use("Agg")

import matplotlib.pyplot as plt
import numpy as np

ROOT = Path(__file__).resolve().parent.parent
PAGE = ROOT / "docs" / "explanation" / "estimator.md"
FIGURES = ROOT / "docs" / "explanation" / "figures"

if str(ROOT) not in sys.path:
    sys.path.insert(0, str(ROOT))

from liverfe.fit import ESTIMATORS  # noqa: E402
from liverfe.study import Method  # noqa: E402
from tests.statistics.precision import named  # noqa: E402
from tests.statistics.studies import Refused, assess, squares_of  # noqa: E402
from tests.statistics.theory import bound_per_s, measurable_per_s  # noqa: E402
from tests.statistics.truth import TWELVE_MS, decay, magnitudes, make_scan  # noqa: E402

SEED = 20_310_409
VOXELS = 20_000
SNRS = (20, 50, 100)
RATES_PER_S = (30, 40, 55, 75, 100, 130, 170, 220, 300, 400, 500, 650, 800, 1000, 1200, 1500)
TABLE_RATES_PER_S = (30, 100, 300, 500, 800, 1200)
SHADES = {20: "#7fb2dd", 50: "#2f78b4", 100: "#0a2f5c"}
"""Blues that differ in lightness alone: read alike by all eyes and in print."""
WARM = "#c4501b"
INK = "#333333"


@dataclass(frozen=True, kw_only=True)
class Reading:
    """What an estimator reads of voxels of one R2*."""

    median_per_s: float
    rmse_per_s: float
    """NaN where one voxel in a thousand or more came without a fit."""


@cache
def reading(estimator: str, snr: int, rate: int) -> Reading:
    """Simulate voxels and fit them; unfitted ones count as faster than all others."""
    rng = np.random.default_rng([SEED, snr, rate])
    amplitude = decay(snr, rate, TWELVE_MS)
    signal = magnitudes(np.broadcast_to(amplitude, (VOXELS, len(amplitude))), rng)
    found = named(estimator)(signal, TWELVE_MS)
    fitted = np.isfinite(found)
    rmse = float(np.sqrt(((found[fitted] - rate) ** 2).mean())) if fitted.any() else np.nan
    return Reading(
        median_per_s=float(np.median(np.where(fitted, found, np.inf))),
        rmse_per_s=rmse if fitted.mean() > 0.999 else np.nan,
    )


# ---------------------------------------------------------------------------------------- tables


def number_table(snr: int, rates: tuple[int, ...] = TABLE_RATES_PER_S) -> str:
    """Median bias and RMSE over the bound of every estimator, as a Markdown table."""
    _, limit = measurable_per_s(TWELVE_MS, snr)
    heads = [f"{rate}{'' if rate <= limit else ' (over)'}" for rate in rates]
    lines = [
        "| R2* (1/s) | " + " | ".join(heads) + " |",
        "|---" * (len(rates) + 1) + "|",
    ]
    lines += [f"| {name} | " + " | ".join(row(name, snr, rates)) + " |" for name in ESTIMATORS]
    return "\n".join(lines)


def row(estimator: str, snr: int, rates: tuple[int, ...]) -> list[str]:
    """The cells of one estimator: median bias in percent / RMSE over the Cramér-Rao SD."""
    cells = []
    for rate in rates:
        found = reading(estimator, snr, rate)
        bias = 100 * (found.median_per_s / rate - 1)
        ratio = found.rmse_per_s / bound_per_s(TWELVE_MS, rate, snr)
        bias_text = f"{bias:+.1f}".replace("-0.0", "+0.0") if np.isfinite(bias) else "lost"
        cells.append(f"{bias_text} / {ratio:.2f}" if np.isfinite(ratio) else f"{bias_text} / -")
    return cells


def reached_table(document: dict[str, Any]) -> str:
    """What `scripts/bench --full --json` measured, as Markdown."""
    lines = ["| row | asked | measured | reached |", "|---|---|---|---|"]
    for found in document["rows"]:
        verdict = "yes" if found["reached"] else "**no**"
        lines.append(f"| {found['what']} | {found['asked']} | {found['measured']} | {verdict} |")
    lines.append("")
    for found in document["rows"]:
        told = [cell for cell in found["cells"] if not cell["reached"] or "Neyman" in cell["note"]]
        told_text = [
            f"{c['where']}: {c['text']}" + f" ({c['note']})" * bool(c["note"]) for c in told
        ]
        lines += [f"- `{found['key']}`: {text}." for text in (*found["remarks"], *told_text)]
    return re.sub(r" x(?=[ ,.)])", " ×", "\n".join(lines))


def cell_table(document: dict[str, Any], key: str, head: str) -> str:
    """All cells of one row, the conditions across from what splits them last."""
    found = next(row for row in document["rows"] if row["key"] == key)
    split = [(cell["where"].rsplit(", ", 1), cell) for cell in found["cells"]]
    columns = list(dict.fromkeys(parts[1] for parts, _ in split))
    lines = [f"| {head} | " + " | ".join(columns) + " |", "|---" * (len(columns) + 1) + "|"]
    for condition in dict.fromkeys(parts[0] for parts, _ in split):
        texts = {parts[1]: cell["text"] for parts, cell in split if parts[0] == condition}
        lines.append(f"| {condition} | " + " | ".join(texts[column] for column in columns) + " |")
    return "\n".join(lines)


def fill(page: str, name: str, block: str) -> str:
    """Put `block` between the two marks of the page that carry its name."""
    marks = f"<!-- {name}: made by scripts/estimator_page.py -->", f"<!-- {name}: end -->"
    before, rest = page.split(marks[0])
    _, after = rest.split(marks[1])
    return f"{before}{marks[0]}\n\n{block}\n\n{marks[1]}{after}"


def block_of(page: str, name: str) -> str:
    """What stands between the two marks of the page that carry this name."""
    pattern = rf"<!-- {name}: made by [^>]*-->\n\n(.*?)\n\n<!-- {name}: end -->"
    found = re.search(pattern, page, re.DOTALL)
    assert found is not None, f"the page has no marks for {name}"
    return found[1]


# --------------------------------------------------------------------------------------- figures


def small_multiples(title: str, y_label: str) -> tuple[Any, list[Any]]:
    """A panel an estimator, sharing axes, R2* across."""
    columns = 4
    n_rows = -(-len(ESTIMATORS) // columns)
    figure, axes = plt.subplots(
        n_rows, columns, figsize=(9.6, 0.6 + 2.05 * n_rows), sharex=True, sharey=True,
        layout="constrained",
    )  # fmt: skip
    panels = list(axes.flat)
    for panel, name in zip(panels, ESTIMATORS, strict=False):
        house = name == ESTIMATORS[0]
        label = f"{name} (the house's)" if house else name
        panel.set_title(label, loc="left", fontsize=9, fontweight="bold" if house else "normal")
        panel.set_xscale("log")
        panel.set_xlim(28, 1600)
        panel.set_xticks([30, 100, 300, 1000], ["30", "100", "300", "1000"])
        panel.tick_params(which="minor", bottom=False, left=False)
    for panel in panels[len(ESTIMATORS) :]:
        panel.set_visible(False)
    last_of_column = [panels[k] for k in range(len(ESTIMATORS))][-columns:]
    for panel in last_of_column:
        panel.tick_params(labelbottom=True)
    figure.supxlabel("true R2* (1/s)", fontsize=9)
    figure.supylabel(y_label, fontsize=9)
    figure.suptitle(title, fontsize=10, x=0.01, ha="left")
    return figure, panels[: len(ESTIMATORS)]


def draw_readings() -> Any:
    """Median estimate against truth, both logarithmic: which estimators turn back."""
    figure, panels = small_multiples(
        "What each estimator reads: median over voxels at SNR 20, 50 and 100; the line is truth",
        "median estimate of R2* (1/s)",
    )
    for panel, name in zip(panels, ESTIMATORS, strict=True):
        panel.plot([28, 1600], [28, 1600], color="0.75", lw=0.8, zorder=0)
        for snr in SNRS:
            medians = [reading(name, snr, rate).median_per_s for rate in RATES_PER_S]
            shown = np.where(np.isfinite(medians), medians, np.nan)
            panel.plot(RATES_PER_S, shown, color=SHADES[snr], lw=1.6)
        panel.set_yscale("log")
        panel.set_ylim(20, 3000)
        panel.set_yticks([30, 100, 300, 1000], ["30", "100", "300", "1000"])
    _label_snr(panels[ESTIMATORS.index("log-linear")], 520, step=1.6)
    return figure


def draw_bias() -> Any:
    """Median bias in percent, up to the limit of one voxel (a dot), thin beyond."""
    figure, panels = small_multiples(
        "Median bias; the dot is the limit of one voxel (Cramér-Rao SD 10 %), beyond it lines are "
        "thin",
        "median bias of R2* (%)",
    )
    for panel, name in zip(panels, ESTIMATORS, strict=True):
        panel.axhline(0, color="0.75", lw=0.8, zorder=0)
        for snr in SNRS:
            bias = [100 * (reading(name, snr, r).median_per_s / r - 1) for r in RATES_PER_S]
            _line_to_the_limit(panel, snr, np.array(bias))
        panel.set_ylim(-21, 21)
    _label_snr(panels[ESTIMATORS.index("least-squares")], -19)
    return figure


def draw_precision() -> Any:
    """RMSE over the Cramér-Rao SD, inside the limit of one voxel."""
    figure, panels = small_multiples(
        "RMSE over the Cramér-Rao SD, up to the limit of one voxel (dot); 1 is what theory allows "
        "without bias",
        "RMSE of R2* over the Cramér-Rao SD",
    )
    for panel, name in zip(panels, ESTIMATORS, strict=True):
        panel.axhline(1, color="0.75", lw=0.8, zorder=0)
        for snr in SNRS:
            ratio = [
                reading(name, snr, r).rmse_per_s / bound_per_s(TWELVE_MS, r, snr)
                for r in RATES_PER_S
            ]
            _line_to_the_limit(panel, snr, np.array(ratio), thin=False)
        panel.set_yscale("log")
        panel.set_ylim(0.8, 20)
        panel.set_yticks([1, 2, 5, 10], ["1", "2", "5", "10"])
    _label_snr(panels[ESTIMATORS.index("least-squares")], 12, step=0.62)
    return figure


def _line_to_the_limit(panel: Any, snr: int, values: Any, *, thin: bool = True) -> None:
    """Draw a line, thick up to the limit of one voxel, a dot there."""
    rates = np.array(RATES_PER_S, dtype=float)
    _, limit = measurable_per_s(TWELVE_MS, snr)
    known = np.isfinite(values)
    if not known.any():
        return
    end = min(limit, rates[-1])
    inside = rates[known] <= end
    at_end = float(np.interp(np.log(end), np.log(rates[known]), values[known]))
    x, y = np.append(rates[known][inside], end), np.append(values[known][inside], at_end)
    panel.plot(x, y, color=SHADES[snr], lw=1.7)
    if limit <= rates[-1] and rates[known][-1] >= limit:
        panel.plot(end, at_end, "o", color=SHADES[snr], ms=3.5, clip_on=True)
    if thin:
        beyond = rates[known] > end
        panel.plot(
            np.append(end, rates[known][beyond]), np.append(at_end, values[known][beyond]),
            color=SHADES[snr], lw=0.7,
        )  # fmt: skip


def _label_snr(panel: Any, lowest: float, step: float | None = None) -> None:
    """Name the three lines inside one panel, in their colours."""
    for k, snr in enumerate(SNRS):
        y = lowest + 4.2 * k if step is None else lowest * step**k
        panel.annotate(f"SNR {snr}", (32, y), color=SHADES[snr], fontsize=7.5, va="center")


def draw_reports() -> Any:
    """What a report says of a region as iron rises, and what a log-linear fit would say."""
    rates = np.round(np.geomspace(40, 6000, 20))
    figure, axes = plt.subplots(1, 3, figsize=(9.6, 3.5), sharey=True, layout="constrained")
    for panel, snr in zip(axes, SNRS, strict=True):
        panel.plot([35, 7000], [35, 7000], color="0.75", lw=0.8, zorder=0)
        plain = [_log_linear_median(snr, float(rate)) for rate in rates]
        panel.plot(rates, plain, color=WARM, lw=1.4, zorder=1)
        for k, rate in enumerate(rates):
            scan = make_scan(float(rate), np.random.default_rng([SEED, snr, k]), snr=snr, slices=1)
            result = assess(scan, Method())
            if isinstance(result, Refused):
                panel.plot(rate, 45, "x", color=INK, ms=4)
                continue
            found = next(squares_of(result)).r2star
            if found.qualifier == ">":
                panel.plot(rate, found.value, "_", color=SHADES[100], ms=7, mew=1.6)
                panel.annotate(
                    "", (rate, found.value * 1.5), (rate, found.value), zorder=2,
                    arrowprops={"arrowstyle": "->", "color": SHADES[100], "lw": 1.0},
                )  # fmt: skip
            else:
                high = found.high if found.high is not None else found.value
                low = found.low if found.low is not None else found.value
                panel.plot([rate, rate], [low, high], color=SHADES[50], lw=2.2)
                panel.plot(rate, found.value, "o", color=SHADES[50], ms=3.8)
        panel.set_xscale("log")
        panel.set_yscale("log")
        panel.set_xlim(35, 7000)
        panel.set_ylim(35, 7000)
        ticks = [50, 200, 1000, 5000]
        panel.set_xticks(ticks, [str(tick) for tick in ticks])
        panel.set_yticks(ticks, [str(tick) for tick in ticks])
        panel.tick_params(which="minor", bottom=False, left=False)
        panel.set_title(f"SNR {snr}", loc="left", fontsize=9)
        panel.set_xlabel("true R2* of the region (1/s)", fontsize=9)
    axes[0].set_ylabel("R2* as reported (1/s)", fontsize=9)
    axes[0].annotate("log-linear fit", (1400, 62), color=WARM, fontsize=8, ha="right")
    axes[0].annotate("more than the limit", (850, 620), color=SHADES[100], fontsize=8)
    axes[0].annotate("value and interval", (42, 420), color=SHADES[50], fontsize=8)
    axes[0].annotate("truth", (3300, 4300), color="0.5", fontsize=8, ha="right")
    return figure


def _log_linear_median(snr: int, rate: float) -> float:
    rng = np.random.default_rng([SEED, snr, round(rate)])
    signal = magnitudes(np.tile(decay(snr, rate, TWELVE_MS), (4000, 1)), rng)
    return float(np.median(named("log-linear")(signal, TWELVE_MS)))


DRAWINGS = {
    "estimator-readings": draw_readings,
    "estimator-bias": draw_bias,
    "estimator-precision": draw_precision,
    "estimator-reports": draw_reports,
}

STYLE = {
    "font.family": "DejaVu Sans",
    "font.size": 8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": "0.4",
    "axes.labelcolor": INK,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "svg.hashsalt": "liverfe",
    "svg.fonttype": "path",
    "path.simplify": True,
}


def draw_all(folder: Path, *, suffix: str = "svg") -> None:
    """Draw every figure into `folder`; the same bytes each time."""
    folder.mkdir(parents=True, exist_ok=True)
    with mpl.rc_context(STYLE):
        for name, draw in DRAWINGS.items():
            figure = draw()
            options = {"metadata": {"Date": None}} if suffix == "svg" else {"dpi": 130}
            figure.savefig(folder / f"{name}.{suffix}", **options)
            plt.close(figure)
            sys.stderr.write(f"{name}\n")


def main() -> int:
    """Draw and fill in."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--bench", type=Path, metavar="FILE", help="JSON of scripts/bench --full")
    options = parser.parse_args()
    page = PAGE.read_text(encoding="utf-8")
    if options.bench:
        document = json.loads(options.bench.read_text(encoding="utf-8"))
        page = fill(page, "reached", reached_table(document))
        page = fill(page, "coverage", cell_table(document, "coverage", "scan"))
        page = fill(page, "sigma", cell_table(document, "sigma", "scan"))
    else:
        for snr in SNRS:
            page = fill(page, f"numbers at SNR {snr}", number_table(snr))
        draw_all(FIGURES)
    PAGE.write_text(page, encoding="utf-8", newline="\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
