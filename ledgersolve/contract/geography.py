"""Great-circle distances on the sphere, for all pairs of sites and customers at once."""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

EARTH_RADIUS_KM = 6371.0088
"""Mean radius (2a + b) / 3 of the WGS 84 ellipsoid (H. Moritz, 2000, Geodetic Reference System 1980)."""

KM_PER_MILE = 1.609344
"""One statute mile (international mile)."""

_BLOCK = 4_000_000


def great_circle(latitude: Floats, longitude: Floats, to_latitude: Floats, to_longitude: Floats,
                 radius: float = EARTH_RADIUS_KM) -> Floats:
    """Distances between all pairs of points, in the unit of ``radius``.

    The arc over the chord between the two points on the sphere, which is the haversine formula (R. Sinnott,
    1984, Virtues of the haversine) in Cartesian coordinates: exact for near points, 0 for equal ones. The
    true geodesic on the ellipsoid differs by at most some 0.6 %.

    Parameters
    ----------
    latitude, longitude
        Shape (m,), decimal degrees; NaN where not known.
    to_latitude, to_longitude
        Shape (n,), likewise.
    radius
        Radius of the sphere.

    Returns
    -------
    Floats
        Shape (m, n); NaN where either point is not known.
    """
    points, others = _on_sphere(latitude, longitude), _on_sphere(to_latitude, to_longitude)
    m, n = len(latitude), len(to_latitude)
    distance = np.empty((m, n))
    step = max(_BLOCK // max(n, 1), 1)
    work = np.empty((min(step, max(m, 1)), n))
    for start in range(0, m, step):
        block = distance[start:start + step]
        part = work[:len(block)]
        block.fill(0.0)
        for axis in range(3):
            np.subtract(points[start:start + step, axis, None], others[None, :, axis], out=part)
            np.multiply(part, part, out=part)
            block += part
        np.sqrt(block, out=block)
        block *= 0.5
        np.minimum(block, 1.0, out=block)
        np.arcsin(block, out=block)
        block *= 2.0 * radius
    return distance


def _on_sphere(latitude: Floats, longitude: Floats) -> Floats:
    """Points on the unit sphere, shape (k, 3); 180 and -180 degrees of longitude are the same point."""
    phi = np.radians(latitude)
    turned = np.radians(np.where(longitude == -180.0, 180.0, longitude))
    return np.stack([np.cos(phi) * np.cos(turned), np.cos(phi) * np.sin(turned), np.sin(phi)], axis=1)
