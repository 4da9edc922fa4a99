"""Positions of soundings: loops of what the head of `positions` says."""

# mypy: ignore-errors

from __future__ import annotations

from math import atan2, sqrt

import numpy as np

from .._numba import kernel

DEGREES = 57.29577951308232
# Tangent up to which the series of the arc is exact to 3e-14: 127 km.
SMALL_ARC = 0.02


@kernel
def place_chunk(across, along, frame, one_minus_e2, lat_tops, lat_bottoms, latitudes, longitudes):
    """Latitudes and longitudes, degrees, of points at distances along the water surface.

    frame: rows with a value for each point: cosine and sine of the heading, sine and cosine of the latitude, radii of
    curvature along the meridian and across it, height of the water surface, latitude and longitude in degrees.
    lat_tops, lat_bottoms: for use here. A change of latitude is found as one, by the tangent of a difference.
    """
    ch, sh, sin_lat, cos_lat = frame[0], frame[1], frame[2], frame[3]
    meridian, prime, height, latitude, longitude = frame[4], frame[5], frame[6], frame[7], frame[8]
    for i in range(across.size):
        north, east = ch[i] * along[i] - sh[i] * across[i], sh[i] * along[i] + ch[i] * across[i]
        # With s the distance and k the curvature of the section: s² k, and s² k² of the surface at its height.
        s2k = north * north / meridian[i] + east * east / prime[i]
        distance2 = north * north + east * east
        curvature = s2k / max(distance2, 1e-30)
        shrink = 1.0 / (1.0 + height[i] * curvature)
        s2k *= shrink * shrink
        arc2 = s2k * curvature
        tangent = shrink * (1.0 - arc2 / 6.0 * (1.0 - arc2 / 20.0))
        down = 0.5 * s2k * (1.0 - arc2 / 12.0)
        north, east = north * tangent, east * tangent
        outward = (prime[i] - down) * cos_lat[i] - sin_lat[i] * north  # from the Earth's axis
        upward = (one_minus_e2 * prime[i] - down) * sin_lat[i] + cos_lat[i] * north
        level = one_minus_e2 * sqrt(outward * outward + east * east)
        lat_tops[i] = upward * cos_lat[i] - level * sin_lat[i]
        lat_bottoms[i] = level * cos_lat[i] + upward * sin_lat[i]
        latitudes[i], longitudes[i] = east, outward
    for i in range(across.size):
        t, g = lat_tops[i] / lat_bottoms[i], latitudes[i] / longitudes[i]
        a, b = t * t, g * g
        north = t * (1.0 - a * (1 / 3 - a * (1 / 5 - a * (1 / 7 - a / 9))))
        east = g * (1.0 - b * (1 / 3 - b * (1 / 5 - b * (1 / 7 - b / 9))))
        # rare: near a pole
        far = not (a < SMALL_ARC * SMALL_ARC and b < SMALL_ARC * SMALL_ARC and longitudes[i] > 0.0)
        if far:
            north, east = atan2(lat_tops[i], lat_bottoms[i]), atan2(latitudes[i], longitudes[i])
        turned = longitude[i] + DEGREES * east
        latitudes[i] = latitude[i] + DEGREES * north
        longitudes[i] = turned - 360.0 * np.floor((turned + 180.0) / 360.0)


@kernel
def places(across, along, frame, one_minus_e2, work, latitudes, longitudes):
    """As `place_chunk`, for any number; work (2, many) is for use here."""
    place_chunk(across, along, frame, one_minus_e2, work[0], work[1], latitudes, longitudes)
