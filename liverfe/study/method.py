"""`Method`: every choice that can move a number, in one place, with an id."""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass, fields
from typing import Any, Literal

from liverfe.errors import UsageError
from liverfe.fit import ESTIMATORS


@dataclass(frozen=True, slots=True, kw_only=True)
class Method:
    """A locked method.

    Attributes
    ----------
    name : str
        The site's name for it.
    estimator : str
        One of `ESTIMATORS`.
    noise : {'auto', 'air', 'residual', 'joint', 'given'}
        How sigma is found; ``given`` takes `sigma`.
    sigma : float or None
        Noise SD per channel in signal units, for ``given``.
    n_channels : int or None
        Effective number of coil channels; None: told by the background or by dark tissue.
    voxel_relative_se : float
        The upper limit lies where one voxel's standard error reaches this share of R2*.
    trim : {'none', 'mad'}
        Rule for outliers: none, or further than `trim_mads` scaled MADs from the median.
    trim_mads : float
        See `trim`.
    interval : float
        Level of the region interval.
    censored_share : float
        With at least this share of voxels over the limit the region is censored.
    curve : str or None
        Key of the calibration curve; None: the default of the field.
    bands : str
        Key of the band set.
    """

    name: str = "house"
    estimator: str = "rician-ml"
    noise: Literal["auto", "air", "residual", "joint", "given"] = "auto"
    sigma: float | None = None
    n_channels: int | None = None
    voxel_relative_se: float = 0.10
    trim: Literal["none", "mad"] = "mad"
    trim_mads: float = 5.0
    interval: float = 0.95
    censored_share: float = 0.5
    curve: str | None = None
    bands: str = "pmc8528353"

    def __post_init__(self) -> None:
        _check(self.estimator in ESTIMATORS, "estimator", self.estimator, " or ".join(ESTIMATORS))
        _check(
            self.noise in ("auto", "air", "residual", "joint", "given"),
            "noise", self.noise, "auto, air, residual, joint or given",
        )  # fmt: skip
        _check(
            (self.sigma is not None) == (self.noise == "given"),
            "sigma", self.sigma, "a number exactly when noise is 'given'",
        )  # fmt: skip
        _check(
            self.sigma is None or 0 < self.sigma < math.inf,
            "sigma",
            self.sigma,
            "a positive, finite number",
        )
        _check(
            self.n_channels is None or 1 <= self.n_channels <= 64,
            "n_channels", self.n_channels, "1 to 64",
        )  # fmt: skip
        _check(
            0.01 <= self.voxel_relative_se <= 0.5,
            "voxel_relative_se", self.voxel_relative_se, "0.01 to 0.5",
        )  # fmt: skip
        _check(self.trim in ("none", "mad"), "trim", self.trim, "none or mad")
        _check(2.0 <= self.trim_mads <= 10.0, "trim_mads", self.trim_mads, "2 to 10")
        _check(0.5 <= self.interval < 1.0, "interval", self.interval, "0.5 to below 1")
        _check(
            0.05 <= self.censored_share <= 0.5,
            "censored_share", self.censored_share, "0.05 to 0.5",
        )  # fmt: skip

    @property
    def id(self) -> str:
        """Name and hash of every choice: two results with one id were made alike."""
        choices = json.dumps(asdict(self), sort_keys=True, separators=(",", ":"))
        return f"{self.name}-{hashlib.sha256(choices.encode()).hexdigest()[:12]}"

    @classmethod
    def from_mapping(cls, settings: Mapping[str, Any]) -> Method:
        """Make a method from the table of a method file.

        Parameters
        ----------
        settings : mapping
            Keys are field names of this class; what is left out keeps the house's choice.

        Returns
        -------
        Method
            Checked.

        Raises
        ------
        UsageError
            If a key is unknown or a value is of the wrong kind or out of range.
        """
        known = {field.name: field for field in fields(cls)}
        unknown = sorted(set(settings) - set(known))
        if unknown:
            raise UsageError(
                f"method file: unknown setting {unknown[0]!r}. Settings are: {', '.join(known)}."
            )
        for key, value in settings.items():
            default = known[key].default
            wanted = (str,) if isinstance(default, str) or key == "curve" else (int, float)
            if isinstance(value, bool) or not isinstance(value, wanted):
                raise UsageError(f"method file: {key} = {value!r} is of the wrong kind.")
        return cls(**settings)


def _check(holds: bool, key: str, value: object, wanted: str) -> None:
    if not holds:
        raise UsageError(f"method: {key} = {value!r} is not possible; wanted: {wanted}.")
