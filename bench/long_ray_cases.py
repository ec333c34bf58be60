"""The block models and reference times kept with the tests of the tracer.

They are made by ``rust/core/examples/long_ray_reference.rs``; its ``cases.rs`` says how.
The models are built anew here from the same formulas.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray

import rayloom as rl
from bench.models import FRAME, KM_PER_DEGREE

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
FILE = Path(__file__).parent.parent / "rust/core/tests/long_rays/reference.csv"
SHAPE = (75, 50, 40)
BLOCK_KM = 15.0
WAVES = 48
WAVE_NUMBER = 1.0 / np.sqrt(8.0)


@dataclass(frozen=True)
class LongRays:
    """Rays of one case: ends in frame coordinates, pairs of them, and times.

    Parameters
    ----------
    starts, goals : ndarray of float, shape (n, 3)
        Deep and shallow ends, x and y in degrees (sphere) or km, depth in km.
    pairs : ndarray of int, shape (k, 2)
        Start and goal of each ray.
    straight_s, reference_s : ndarray of float, shape (k,)
        Time along the chord and earliest time known.
    """

    starts: Floats
    goals: Floats
    pairs: Integers
    straight_s: Floats
    reference_s: Floats


def read_case(frame: str, kind: str) -> LongRays:
    """Read the rays of a case from the file of references."""
    with FILE.open(newline="", encoding="utf-8") as lines:
        rows = [row for row in csv.DictReader(lines) if _name(row) == (frame, kind)]
    scale = 1.0 / KM_PER_DEGREE if frame == "sphere" else 1.0
    ends = []
    for end in ("from", "to"):
        columns = [f"{end}_{name}_km" for name in ("x", "y", "depth")]
        points = np.array([[float(row[name]) for name in columns] for row in rows])
        unique, index = np.unique(points, axis=0, return_inverse=True)
        ends.append((unique * [scale, scale, 1.0], index.ravel()))
    times = np.array([[float(row["straight_s"]), float(row["time_s"])] for row in rows])
    pairs = np.stack([index for _, index in ends], axis=1).astype(np.int64)
    return LongRays(ends[0][0], ends[1][0], pairs, times[:, 0], times[:, 1])


def _name(row: dict[str, str]) -> tuple[str, str]:
    return row["frame"], row["roughness"]


def build_model(frame: str, kind: str) -> rl.SlownessModel:
    """Build the block model of a case."""
    x, y, depth = (BLOCK_KM * np.arange(count + 1.0) for count in SHAPE)
    x, y = x - 0.5 * x[-1], y - 0.5 * y[-1]
    if frame == "sphere":
        grid = rl.BlockGrid(rl.Frame(**FRAME), x / KM_PER_DEGREE, y / KM_PER_DEGREE, depth)
    else:
        grid = rl.BlockGrid(rl.Frame.flat(), x, y, depth)
    velocity = 6.0 + 0.00625 * BLOCK_KM * (np.arange(SHAPE[2]) + 0.5)
    return rl.SlownessModel(grid, 1.0 / (velocity * (1.0 + 0.05 * _pattern(kind))))


def _pattern(kind: str) -> Floats:
    index = np.indices(SHAPE)
    if kind == "checkerboard":
        return np.asarray(1.0 - 2.0 * ((index // 2).sum(axis=0) % 2))
    if kind == "independent":
        return np.clip(_normal(9, np.arange(np.prod(SHAPE))), -2.5, 2.5).reshape(SHAPE)
    waves = np.arange(WAVES)
    numbers = WAVE_NUMBER * np.array([_normal(stream, waves) for stream in (1, 3, 5)])
    phases = 2.0 * np.pi * _uniform(7, waves)
    total = np.zeros(SHAPE)
    for number, phase in zip(numbers.T, phases, strict=True):
        total += np.cos(np.tensordot(number, index, axes=1) + phase)
    return np.clip(0.5 * total * np.sqrt(2.0 / WAVES), -1.0, 1.0)


def _uniform(stream: int, items: ArrayLike) -> Floats:
    """SplitMix64 (Steele, Lea & Flood 2014) of stream and item."""
    z = np.asarray(items, dtype=np.uint64) + np.uint64((stream << 32) + 1)
    z = z * np.uint64(0x9E3779B97F4A7C15)
    for shift, factor in ((30, 0xBF58476D1CE4E5B9), (27, 0x94D049BB133111EB)):
        z = (z ^ (z >> np.uint64(shift))) * np.uint64(factor)
    z ^= z >> np.uint64(31)
    return np.asarray((z >> np.uint64(11)).astype(float) * 2.0**-53)


def _normal(stream: int, items: ArrayLike) -> Floats:
    """Transform two uniform numbers (Box & Muller 1958)."""
    radius = np.sqrt(-2.0 * np.log(1.0 - _uniform(stream, items)))
    return np.asarray(radius * np.cos(2.0 * np.pi * _uniform(stream + 1, items)))
