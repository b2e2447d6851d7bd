"""The three figures of page 1, each with caption and alternative text."""

from __future__ import annotations

from dataclasses import dataclass

from liverfe.regions import RegionDecay, RegionSummary
from liverfe.report.decay_plot import draw_decay
from liverfe.report.phrases import region_name, region_shown
from liverfe.report.pictures import draw_map, draw_slice, scale_of_field
from liverfe.report.scene import Scene, choose_scene
from liverfe.study import StudyResult
from liverfe.wording import REPORT, shown

__all__ = ["FIGURES", "Figure", "draw_figures"]

FIGURES = ("slice", "map", "decay")
"""Names of the figures, in the order of the page."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Figure:
    """One figure.

    Attributes
    ----------
    svg : str
        The drawing.
    caption : str
        The line below it.
    alt : str
        What it shows, for readers who cannot see it.
    """

    svg: str
    caption: str
    alt: str


def draw_figures(result: StudyResult) -> dict[str, Figure]:
    """Draw slice, map and decay curve.

    Parameters
    ----------
    result : StudyResult
        A reported one.

    Returns
    -------
    dict of Figure
        By name, those of `FIGURES` that the result has images for.
    """
    region = region_shown(result)
    summary = region.summary if region else None
    figures: dict[str, Figure] = {}
    if result.stack is not None and result.maps is not None:
        scene = choose_scene(result.stack, result.maps, summary)
        figures["slice"] = _slice(scene, result, summary)
        figures["map"] = _map(scene, result.stack.acquisition.field_strength_t, summary)
    if summary is not None:
        figures["decay"] = _decay(summary)
    return figures


def _outline_words(summary: RegionSummary | None) -> str:
    if summary is None:
        return REPORT["alt_no_outline"]
    return REPORT["alt_outline"].format(name=region_name(summary))


def _slice(scene: Scene, result: StudyResult, summary: RegionSummary | None) -> Figure:
    assert result.stack is not None
    view = scene.view
    facts = {
        "slice": scene.k + 1,
        "slices": result.stack.grid.shape[2],
        "plane": REPORT[f"plane_{view.plane}"],
        "te": f"{result.stack.echo_times_ms[scene.e]:.4g}",
    }
    sides = {
        side: REPORT[f"side_{getattr(view, side)}"] for side in ("left", "right", "top", "bottom")
    }
    return Figure(
        svg=draw_slice(scene),
        caption=REPORT["caption_slice"].format(**facts, left=sides["left"]),
        alt=REPORT["alt_slice"].format(**facts, **sides, outline=_outline_words(summary)),
    )


def _map(scene: Scene, field_strength_t: float | None, summary: RegionSummary | None) -> Figure:
    low, high = scale_of_field(field_strength_t)
    which = "any" if field_strength_t is None else "low" if field_strength_t <= 2.0 else "high"
    return Figure(
        svg=draw_map(scene, scale_per_s=(low, high)),
        caption=REPORT["caption_map"].format(field=REPORT[f"caption_map_{which}"]),
        alt=REPORT["alt_map"].format(
            low=f"{low:g}", high=f"{high:g}", outline=_outline_words(summary)
        ),
    )


def _decay(summary: RegionSummary) -> Figure:
    decay = summary.decay
    is_limit = summary.r2star.qualifier != "="
    has_residuals = decay.residual is not None and not is_limit
    return Figure(
        svg=draw_decay(decay, is_limit=is_limit),
        caption=REPORT["caption_decay"].format(name=region_name(summary))
        + (REPORT["caption_residuals"] if has_residuals else ""),
        alt=REPORT["alt_decay"].format(
            name=region_name(summary),
            count=len(decay.echo_times_ms),
            first=f"{decay.echo_times_ms[0]:.4g}",
            last=f"{decay.echo_times_ms[-1]:.4g}",
            start=shown(float(decay.signal[0]), "signal"),
            end=shown(float(decay.signal[-1]), "signal"),
            curve=REPORT["alt_curve_limit" if is_limit else "alt_curve_fit"],
            floor=shown(decay.noise_floor, "signal"),
        )
        + (_residuals_in_words(decay) if has_residuals else ""),
    )


def _residuals_in_words(decay: RegionDecay) -> str:
    assert decay.residual is not None
    sizes = [abs(float(size)) for size in decay.residual]
    echo = sizes.index(max(sizes))
    return REPORT["alt_residuals"].format(
        largest=f"{decay.residual[echo]:+.2f}", te=f"{decay.echo_times_ms[echo]:.4g}"
    )
