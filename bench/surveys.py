"""Invented networks and distant events."""

from __future__ import annotations

import numpy as np

import rayloom as rl
from rayloom.survey import Events, Stations


def network(frame: rl.Frame, count: int, half_deg: tuple[float, float], seed: int) -> Stations:
    """Stations scattered over a rectangle of a frame, up to 2.5 km high."""
    random = np.random.default_rng(seed)
    x, y = (random.uniform(-half, half, count) for half in half_deg)
    longitude, latitude = frame.geographic_coordinates(x, y)
    return Stations(
        network=np.array(["QX"] * count),
        station=np.array([f"S{k:04d}" for k in range(count)]),
        latitude_deg=latitude,
        longitude_deg=longitude,
        elevation_m=random.uniform(0.0, 2500.0, count),
    )


def distant_events(frame: rl.Frame, count: int, arc_deg: tuple[float, float], seed: int) -> Events:
    """Events all around, at distances from the frame's centre within two bounds."""
    random = np.random.default_rng(seed)
    azimuth = np.radians(random.uniform(0.0, 360.0, count))
    arc = np.radians(random.uniform(*arc_deg, count))
    x = np.degrees(np.arctan2(np.sin(arc) * np.sin(azimuth), np.cos(arc)))
    y = np.degrees(np.arcsin(np.sin(arc) * np.cos(azimuth)))
    longitude, latitude = frame.geographic_coordinates(x, y)
    return Events(
        event=np.array([f"E{k:04d}" for k in range(count)]),
        time=np.array(["2024-03-01"] * count, dtype="datetime64[ns]"),
        latitude_deg=latitude,
        longitude_deg=longitude,
        depth_km=random.uniform(5.0, 600.0, count),
    )
