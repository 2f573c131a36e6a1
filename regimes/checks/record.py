"""One curve held against what the fitted kernel predicts of it."""

from dataclasses import dataclass, fields

import numpy as np

from regimes.arrays import frozen_array

DISSENT = 0.01  # p-value below which a curve is said to dissent


@dataclass(frozen=True, slots=True)
class Check:
    """Where the data fall in the posterior predictive distribution of one curve.

    Parameters
    ----------
    curve : str
        Name of the curve.
    axis_name : str
        ``"separation"`` or ``"time"``.
    axis : (n,) float array [m or s]
    value : (n,) float array
        The data.
    band : (5, n) float array
        2.5, 16, 50, 84 and 97.5 % points of the prediction at each place on the axis.
    p_value : float
        Probability, under the prediction, of a curve that leaves it as far as the data do; of the whole curve, its bins
        being correlated.
    unit : str
        Of the value.
    """

    curve: str
    axis_name: str
    axis: np.ndarray
    value: np.ndarray
    band: np.ndarray
    p_value: float
    unit: str

    def __post_init__(self) -> None:
        for field in fields(self):
            if field.name in ("axis", "value", "band"):
                object.__setattr__(self, field.name, frozen_array(getattr(self, field.name), np.float64))

    @property
    def agrees(self) -> bool:
        """Whether the p-value is at least `DISSENT`."""
        return self.p_value >= DISSENT

    @property
    def outside(self) -> np.ndarray:
        """(n,) bool array: places where the data leave the 95 % band."""
        return (self.value < self.band[0]) | (self.value > self.band[4])

    @property
    def where(self) -> np.ndarray:
        """Places on the axis [m or s] where the data leave the 95 % band."""
        return self.axis[self.outside]
