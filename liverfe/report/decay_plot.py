"""The decay curve of a region: what was measured, what was fitted, and where noise takes over."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, FuncFormatter, NullLocator

from liverfe.regions import RegionDecay
from liverfe.report.canvas import ACCENT, INK, MUTED, draw_svg
from liverfe.wording import REPORT

__all__ = ["draw_decay"]

_SIZE_IN = (4.1, 2.25)
_SIZE_WITH_STRIP_IN = (4.1, 2.7)
_STRIP = 0.5 / 2.7
"""Share of the height that the strip of residuals takes, with the gap above it."""
_LEAST_RESIDUAL = 0.15
"""The strip shows residuals up to this at least, in noise SD: smaller ones are to look small."""
_INTERVAL = 1.96
"""Standard errors that a bar of the strip reaches to either side: 95 %."""

_BELOW_FLOOR = 0.5
"""The signal axis starts at this share of the noise floor, so that the floor is seen as a floor."""


def draw_decay(decay: RegionDecay, *, is_limit: bool) -> str:
    """Draw signal against echo time with fit and noise floor, as SVG.

    The signal axis is logarithmic: there a mono-exponential decay is a straight line, so a bend
    is seen at once, be it fat, motion, or the noise floor that the fitted curve runs into.

    Parameters
    ----------
    decay : RegionDecay
        Median signal, quartiles, curve and noise floor.
    is_limit : bool
        Whether the region is censored: its curve then is the decay at the limit, no fit, and the
        signal need not follow it.

    Returns
    -------
    str
        SVG; points are medians, bars run from quartile to quartile. Below them, where they are
        known, the mean residual of each echo with its 95 % interval: what one decay leaves over.
    """
    strip = _STRIP if decay.residual is not None and not is_limit else 0.0
    size = _SIZE_WITH_STRIP_IN if strip else _SIZE_IN
    foot = 0.43 / size[1]

    def draw(figure: Figure) -> None:
        axes = figure.add_axes((0.13, foot + strip, 0.85, 0.97 - foot - strip))
        bottom, top = _range(decay)
        signal, low, high = (
            np.clip(values, bottom, None)
            for values in (decay.signal, decay.signal_low, decay.signal_high)
        )
        axes.set_yscale("log")
        axes.axhline(decay.noise_floor, color=MUTED, lw=0.9, ls=(0, (2, 2)))
        axes.plot(decay.curve_times_ms, decay.curve, color=ACCENT, lw=1.4)
        axes.vlines(decay.echo_times_ms, low, high, color=INK, lw=0.9)
        axes.plot(decay.echo_times_ms, signal, "o", color=INK, ms=3.4, mec="white", mew=0.5)
        last = float(max(decay.echo_times_ms[-1], decay.curve_times_ms[-1]))
        axes.set(xlim=(0.0, last * 1.03), ylim=(bottom, top))
        ticks = _ticks(bottom, top)
        axes.yaxis.set_major_locator(FixedLocator(ticks))
        axes.yaxis.set_minor_locator(NullLocator())
        axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
        axes.spines[["top", "right"]].set_visible(False)
        if strip:
            axes.tick_params(labelbottom=False)
            _draw_residuals(figure.add_axes((0.13, foot, 0.85, strip - 0.03)), decay)
            figure.axes[-1].set_xlim(axes.get_xlim())
        figure.axes[-1].set_xlabel(REPORT["axis_echo_time"])
        axes.set_ylabel(REPORT["axis_signal"])
        axes.annotate(
            REPORT["plot_floor"],
            (0.0, decay.noise_floor),
            xytext=(4, 3),
            textcoords="offset points",
            color=MUTED,
            size=7.5,
        )
        axes.plot([], [], "o-", color=INK, ms=3.4, lw=0.9, mew=0, label=REPORT["plot_signal"])
        axes.plot(
            [], [], color=ACCENT, lw=1.4, label=REPORT["plot_limit" if is_limit else "plot_fit"]
        )
        axes.legend(frameon=False, loc="best", fontsize=7.5, handlelength=1.6)

    return draw_svg(size, draw)


def _draw_residuals(axes: Axes, decay: RegionDecay) -> None:
    assert decay.residual is not None
    assert decay.residual_se is not None
    reach = _INTERVAL * decay.residual_se
    low, high = decay.residual - reach, decay.residual + reach
    top = max(1.1 * float(np.nanmax(np.abs([low, high]))), _LEAST_RESIDUAL)
    axes.axhline(0.0, color=ACCENT, lw=0.9)
    axes.vlines(decay.echo_times_ms, low, high, color=INK, lw=0.9)
    axes.plot(decay.echo_times_ms, decay.residual, "o", color=INK, ms=2.6, mew=0)
    axes.set_ylim(-top, top)
    tick = float(f"{0.7 * top:.1g}")
    axes.yaxis.set_major_locator(FixedLocator([-tick, 0.0, tick]))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.tick_params(axis="y", labelsize=7.0)
    axes.spines[["top", "right"]].set_visible(False)
    axes.set_ylabel(REPORT["axis_residual"], fontsize=7.0)


def _range(decay: RegionDecay) -> tuple[float, float]:
    values = np.concatenate([decay.signal_high, decay.curve, decay.signal])
    top = 1.5 * float(np.nanmax(values))
    bottom = _BELOW_FLOOR * decay.noise_floor
    return (bottom, top) if 0 < bottom < top else (top / 1000.0, top)


def _ticks(bottom: float, top: float) -> list[float]:
    first, last = int(np.floor(np.log10(bottom))), int(np.ceil(np.log10(top)))
    steps = (1, 2, 5) if last - first <= 3 else (1,)
    return [
        step * 10.0**power
        for power in range(first, last + 1)
        for step in steps
        if bottom <= step * 10.0**power <= top
    ]
