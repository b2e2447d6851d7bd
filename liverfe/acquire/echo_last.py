"""From one image after the other to one decay after the other."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def echo_last(signal: NDArray[np.float32]) -> NDArray[np.float32]:
    """Turn images into decays, one row of all images at a time.

    A plain transposing copy touches a new cache line with every value; a row of all images fits
    the cache, which makes it several times faster.

    Parameters
    ----------
    signal : ndarray of float32, shape (E, Z, Y, X)
        Image after image.

    Returns
    -------
    ndarray of float32, shape (X, Y, Z, E)
        The echoes of a voxel beside each other.
    """
    n_echoes, n_slices, n_rows, n_columns = signal.shape
    turned = np.empty((n_columns, n_rows, n_slices * n_echoes), dtype=np.float32)
    for row in range(n_rows):
        images = signal[:, :, row, :].transpose(1, 0, 2).reshape(n_slices * n_echoes, n_columns)
        turned[:, row, :] = images.T
    return turned.reshape(n_columns, n_rows, n_slices, n_echoes)
