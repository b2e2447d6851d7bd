"""How well sigma in the liver is recovered: plain functions, for tests and for tables."""

from __future__ import annotations

import numpy as np

from liverfe.noise import estimate_noise
from liverfe.study.decay_likelihood import decay_likelihood
from tests.noise.abdomens import abdomen, liver_mask, zero_filled

KINDS = ("air", "zeroed air", "partly zeroed air", "ramp", "ramp, zeroed air", "zero-filled x2")

_SHAPE = (96, 80, 6)
_S0 = 400.0


def sigma_recovery(
    kind: str, r2star_per_s: float, snr: float, n: int, seed: int
) -> tuple[float, int, tuple[int, int] | None]:
    """Mean over the liver of sigma as found over its truth; channels as found, and their range.

    Parameters
    ----------
    kind : str
        One of `KINDS`: what the scanner did to the air and to the noise.
    r2star_per_s, snr
        R2* of the liver, S0 over sigma (in the middle of the image, for a ramp).
    n : int
        True number of channels, not handed in.
    seed : int
        Of the noise.
    """
    scene, liver = abdomen(liver_per_s=r2star_per_s, shape=_SHAPE), liver_mask(_SHAPE)
    sigma = np.full(_SHAPE, _S0 / snr)
    if kind.startswith("ramp"):  # 1 to 3 over the image
        sigma *= np.linspace(0.5, 1.5, _SHAPE[0])[:, None, None]
    if kind == "zero-filled x2":
        magnitude = zero_filled(scene.amplitude, _S0 / snr, 2.0, n=n, seed=seed)
    else:
        magnitude = scene.magnitude(sigma[..., None], n=n, seed=seed)
    if kind.endswith("zeroed air") and not kind.startswith("partly"):
        magnitude[~scene.body] = 0.0
    if kind == "partly zeroed air":
        x, y = (np.linspace(-1, 1, size) for size in _SHAPE[:2])
        magnitude[x[:, None] ** 2 + y**2 > 0.95] = 0.0
    noise = estimate_noise(scene.stack(magnitude), likelihood=decay_likelihood)
    found = noise.sigma if noise.sigma_map is None else noise.sigma_map[liver]
    truth = sigma[liver].mean() if noise.sigma_map is None else sigma[liver]
    return float(np.mean(found / truth)), noise.n_channels, noise.channels_between
