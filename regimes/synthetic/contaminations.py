"""What a recipe may add to the motion of its world; each section moves the particles of the clean twin."""

from typing import Annotated

import numpy as np
from pydantic import Field

from regimes.synthetic.sections import NotNegative, Positive, Section, Share, Vector
from regimes.units import HOUR

EARTH_ROTATION = 7.292115e-5  # rad/s, WGS84
Count = Annotated[int, Field(ge=0)]
# Nearer to the equator than this, in degrees, an inertial period exceeds two weeks and means little.
EQUATORIAL = 2.0


class Oscillation(Section):
    """Circular motion; without a period it is inertial, without a wavelength each particle has its own phase."""

    speed_m_s: NotNegative
    period_h: Positive | None = None
    wavelength_km: Positive | None = None

    def angular_velocity(self, latitude: float | None) -> float:
        """Rate at which velocities turn [rad/s]: negative, clockwise, in the north and on a plane."""
        hemisphere = -1.0 if latitude is None or latitude >= 0 else 1.0
        if self.period_h is not None:
            return hemisphere * 2.0 * np.pi / (self.period_h * HOUR)
        return -2.0 * EARTH_ROTATION * float(np.sin(np.radians(latitude)))


class Shear(Section):
    """A mean flow along one direction that grows across it, to the left for a positive rate."""

    rate_per_d: float
    direction_deg: float = 0.0


class Convergence(Section):
    """A flow towards a line: compression along one direction until `lasts_d`."""

    rate_per_d: NotNegative
    direction_deg: float = 0.0
    lasts_d: Positive


class Instruments(Section):
    """A second type of particle that slips through the water."""

    slip_share: Share
    slip_m_s: Vector


class Faults(Section):
    """Releases with two particles lashed together; particles aground; particles picked up by a boat at the end."""

    lashed: Count = 0
    grounded: Count = 0
    picked_up: Count = 0
    boat_speed_m_s: Positive = 5.0
    boat_h: Positive = 6.0
