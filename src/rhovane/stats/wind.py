"""Wind as components that can be ranked; a direction in degrees cannot."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from rhovane.stats.arguments import Floats, as_series


@dataclass(frozen=True)
class WindComponents:
    """Wind vector in the unit of the speed; NaN where it is not known.

    Attributes
    ----------
    eastward, northward : ndarray of float64, shape (n_rows,)
        Where the air moves to: u positive toward the east, v positive toward the north.
    """

    eastward: Floats
    northward: Floats


def wind_components(speed: ArrayLike, direction_deg: ArrayLike) -> WindComponents:
    """Return the eastward and northward components of the wind.

    Parameters
    ----------
    speed : array-like of float, shape (n_rows,)
        In any unit, 0 or more; NaN marks a missing row.
    direction_deg : array-like of float, shape (n_rows,)
        Degrees clockwise from north from which the wind blows, 0 to 360; NaN marks a missing row.

    Returns
    -------
    WindComponents
        Exactly 0 in a calm (speed 0), whatever the direction.

    Raises
    ------
    ValueError
        Unequal lengths, a negative speed, a direction outside 0 to 360.

    Examples
    --------
    >>> wind = wind_components([2.0], [270.0])
    >>> round(float(wind.eastward[0]), 6), abs(round(float(wind.northward[0]), 6))
    (2.0, 0.0)
    """
    pace, angle = _checked_wind(speed, direction_deg)
    radians = np.deg2rad(angle)
    calm = pace == 0
    return WindComponents(
        eastward=np.where(calm, 0.0, -pace * np.sin(radians)),
        northward=np.where(calm, 0.0, -pace * np.cos(radians)),
    )


def wind_along(speed: ArrayLike, direction_deg: ArrayLike, bearing_deg: float) -> Floats:
    """Return the component of the wind along a bearing: positive when air moves toward it.

    Parameters
    ----------
    speed, direction_deg
        As for :func:`wind_components`.
    bearing_deg
        Degrees clockwise from north, 0 to 360; for a source and a receptor, the bearing from the first to the
        second.

    Returns
    -------
    ndarray of float64, shape (n_rows,)
        In the unit of the speed; NaN where the wind is not known.

    Raises
    ------
    ValueError
        As for :func:`wind_components`; a bearing outside 0 to 360.
    """
    if not 0 <= bearing_deg <= 360:
        raise ValueError(f"bearing_deg={bearing_deg} is out of range; give degrees from 0 to 360.")
    pace, angle = _checked_wind(speed, direction_deg)
    along: Floats = np.where(pace == 0, 0.0, -pace * np.cos(np.deg2rad(angle - bearing_deg)))
    return along


def _checked_wind(speed: ArrayLike, direction_deg: ArrayLike) -> tuple[Floats, Floats]:
    pace, angle = as_series(speed, "speed"), as_series(direction_deg, "direction_deg")
    if len(pace) != len(angle):
        raise ValueError(
            f"speed has {len(pace)} rows and direction_deg has {len(angle)}; both must share one grid."
        )
    if (pace < 0).any():
        raise ValueError(
            f"speed holds negative values (down to {np.nanmin(pace)}); mark them missing (NaN) first."
        )
    if ((angle < 0) | (angle > 360)).any():
        raise ValueError(
            f"direction_deg holds values from {np.nanmin(angle)} to {np.nanmax(angle)}; 0 to 360 is allowed; "
            "mark codes such as 990 (variable) missing (NaN) first."
        )
    return pace, angle
