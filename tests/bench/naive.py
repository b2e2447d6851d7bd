"""What a competent person writes in an afternoon, to measure the whole command against.

    python naive.py IMAGES REGIONS OUT

pydicom loads, NumPy fits a log-linear decay to every voxel, nibabel saves the maps that liverfe
saves, matplotlib draws one page. No checks, no noise model, no limits: that is the difference.
"""

import sys
from pathlib import Path

import matplotlib as mpl

mpl.use("Agg")

import matplotlib.pyplot as plt
import nibabel as nib
import numpy as np
import pydicom


def load(folder):
    """Return signal (X, Y, Z, E), echo times in ms and the affine in RAS+ millimetres."""
    images = [pydicom.dcmread(path) for path in Path(folder).rglob("*") if path.is_file()]
    images = [image for image in images if "PixelData" in image]
    across, down = np.reshape(images[0].ImageOrientationPatient, (2, 3)).astype(float)
    normal = np.cross(across, down)
    place = {id(image): float(normal @ image.ImagePositionPatient) for image in images}
    times = sorted({float(image.EchoTime) for image in images})
    slices = []
    for where in sorted({round(place[id(image)], 3) for image in images}):
        here = [image for image in images if round(place[id(image)], 3) == where]
        slices.append(sorted(here, key=lambda image: float(image.EchoTime)))
    signal = np.array(
        [
            [
                image.pixel_array * float(image.get("RescaleSlope", 1))
                + float(image.get("RescaleIntercept", 0))
                for image in echoes
            ]
            for echoes in slices
        ],
        dtype=np.float32,
    ).transpose(3, 2, 0, 1)
    first, last = (np.array(slices[i][0].ImagePositionPatient, float) for i in (0, -1))
    between_rows, between_columns = map(float, images[0].PixelSpacing)
    affine = np.eye(4)
    affine[:3, 0], affine[:3, 1] = across * between_columns, down * between_rows
    affine[:3, 2] = (last - first) / max(len(slices) - 1, 1)
    affine[:3, 3] = first
    return signal, np.array(times), np.diag([-1, -1, 1, 1]) @ affine


def fit(signal, times_ms):
    """Fit ln S = ln S0 - R2* TE to every voxel; return the maps by name."""
    seconds = times_ms / 1000
    logs = np.log(np.maximum(signal, 1e-6), dtype=np.float64)
    centred = seconds - seconds.mean()
    slope = logs @ centred / (centred @ centred)
    intercept = logs.mean(axis=-1) - slope * seconds.mean()
    residual = logs - (intercept[..., None] + slope[..., None] * seconds)
    squares = (residual**2).sum(axis=-1)
    total = ((logs - logs.mean(axis=-1, keepdims=True)) ** 2).sum(axis=-1)
    with np.errstate(divide="ignore", invalid="ignore"):
        return {
            "R2starmap": -slope,
            "T2starmap": -1 / slope,
            "S0map": np.exp(intercept),
            "desc-stderr_R2starmap": np.sqrt(
                squares / max(len(seconds) - 2, 1) / (centred @ centred)
            ),
            "desc-fit_map": 1 - squares / total,
            "desc-lic_map": -0.16 + 2.603e-2 * -slope,
            "desc-status_dseg": (slope < 0).astype(np.int16),
        }


def main(images, regions, out):
    """Load, fit, save the maps and a page, and print the median R2* of each label."""
    out = Path(out)
    out.mkdir(parents=True, exist_ok=True)
    signal, times_ms, affine = load(images)
    maps = fit(signal, times_ms)
    for name, values in maps.items():
        kind = values.dtype if values.dtype == np.int16 else np.float32
        nib.save(nib.Nifti1Image(values.astype(kind), affine), out / f"{name}.nii.gz")

    label_image = nib.as_closest_canonical(nib.load(regions))
    r2star_image = nib.as_closest_canonical(nib.Nifti1Image(maps["R2starmap"], affine))
    signal_image = nib.as_closest_canonical(nib.Nifti1Image(signal, affine))
    labels, r2star = np.asarray(label_image.dataobj), r2star_image.get_fdata()
    middle = int((labels == 1).sum(axis=(0, 1)).argmax())
    decay = np.asarray(signal_image.dataobj)[labels == 1].mean(axis=0)

    figure, (scan, chart, curve) = plt.subplots(1, 3, figsize=(11.7, 8.3))
    scan.imshow(np.asarray(signal_image.dataobj)[:, :, middle, 0].T, "gray", origin="lower")
    scan.contour(labels[:, :, middle].T == 1, [0.5], colors="yellow")
    shown = chart.imshow(r2star[:, :, middle].T, vmin=0, vmax=1000, origin="lower")
    figure.colorbar(shown, ax=chart, label="R2* (1/s)")
    curve.semilogy(times_ms, decay, "o-")
    curve.set(xlabel="echo time (ms)", ylabel="signal")
    figure.savefig(out / "report.pdf")
    for label in np.unique(labels[labels > 0]):
        print(int(label), float(np.median(r2star[labels == label])))


if __name__ == "__main__":
    main(*sys.argv[1:])
