//! Grid coordinates and their Cartesian positions: the trait [`Chart`] with its
//! two forms, [`FlatChart`] and [`SphereChart`].
//!
//! Grid coordinates are `[x, y, depth]`, all in kilometres: on the sphere x and
//! y are arcs at the reference radius (rotated longitude and latitude times the
//! radius), so that every coordinate moves a point by about its own amount.

use crate::vec3::{Vec3, distance, dot, norm};

/// A map from grid coordinates to Cartesian kilometres.
pub trait Chart: Clone + Send + Sync {
    /// True where grid coordinates are Cartesian themselves.
    const FLAT: bool;

    /// Cartesian position (km) of grid coordinates (km).
    fn position(&self, grid: Vec3) -> Vec3;

    /// Derivatives of the position by each grid coordinate (dimensionless).
    fn tangents(&self, grid: Vec3) -> [Vec3; 3];

    /// Grid coordinates (km) of a Cartesian position (km).
    fn coordinates(&self, position: Vec3) -> Vec3;

    /// Parameters t at which the straight line `from + t step` meets the
    /// surface where grid coordinate `axis` equals `value`; NaN where it does
    /// not.
    fn crossings(&self, axis: usize, value: f64, from: Vec3, step: Vec3) -> [f64; 2];

    /// Parameter t at which grid coordinate `axis` is extreme along the straight
    /// line `from + t step`, if there is one.
    fn extremum(&self, axis: usize, from: Vec3, step: Vec3) -> Option<f64>;

    /// Straight distance (km) between two points in grid coordinates.
    #[inline]
    fn distance(&self, a: Vec3, b: Vec3) -> f64 {
        distance(self.position(a), self.position(b))
    }
}

/// Cartesian grid coordinates.
#[derive(Debug, Clone, Copy)]
pub struct FlatChart;

impl Chart for FlatChart {
    const FLAT: bool = true;

    #[inline]
    fn position(&self, grid: Vec3) -> Vec3 {
        grid
    }

    #[inline]
    fn tangents(&self, _grid: Vec3) -> [Vec3; 3] {
        [[1.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]]
    }

    #[inline]
    fn coordinates(&self, position: Vec3) -> Vec3 {
        position
    }

    #[inline]
    fn crossings(&self, axis: usize, value: f64, from: Vec3, step: Vec3) -> [f64; 2] {
        if step[axis] == 0.0 {
            [f64::NAN; 2]
        } else {
            [(value - from[axis]) / step[axis], f64::NAN]
        }
    }

    #[inline]
    fn extremum(&self, _axis: usize, _from: Vec3, _step: Vec3) -> Option<f64> {
        None
    }
}

/// Rotated longitude and latitude on a sphere.
#[derive(Debug, Clone)]
pub struct SphereChart {
    radius_km: f64,
    per_radius: f64,
    sines: Vec<[f64; 2]>,
}

/// Spacing (rad) of the table of sines; a short series covers the rest.
const TABLE_STEP: f64 = 0.004;
/// Sines below this belong to the plane of the frame's equator.
const EQUATOR: f64 = 1e-12;
/// Entries on each side of zero: a little more than a half turn.
const TABLE_HALF: i32 = 800;

impl SphereChart {
    /// A sphere of the given reference radius (km).
    #[must_use]
    pub fn new(radius_km: f64) -> Self {
        let sines = (-TABLE_HALF..=TABLE_HALF)
            .map(|k| {
                let (sine, cosine) = (f64::from(k) * TABLE_STEP).sin_cos();
                [sine, cosine]
            })
            .collect();
        Self {
            radius_km,
            per_radius: 1.0 / radius_km,
            sines,
        }
    }

    /// Reference radius (km).
    #[must_use]
    pub fn radius_km(&self) -> f64 {
        self.radius_km
    }

    /// Sine and cosine by table and small-angle series, exact to rounding
    /// (the series' first neglected terms are below 1e-18).
    #[inline]
    fn sin_cos(&self, angle: f64) -> (f64, f64) {
        // Truncation of a positive number rounds without a library call.
        let index = (angle * (1.0 / TABLE_STEP) + (f64::from(TABLE_HALF) + 0.5)) as usize;
        let Some(&[sine, cosine]) = self.sines.get(index) else {
            return angle.sin_cos();
        };
        let rest = angle - (index as f64 - f64::from(TABLE_HALF)) * TABLE_STEP;
        let square = rest * rest;
        let small_sine = rest * (1.0 + square * (-1.0 / 6.0 + square * (1.0 / 120.0)));
        let small_cosine = 1.0 + square * (-0.5 + square * (1.0 / 24.0 - square * (1.0 / 720.0)));
        (
            sine * small_cosine + cosine * small_sine,
            cosine * small_cosine - sine * small_sine,
        )
    }
}

impl Chart for SphereChart {
    const FLAT: bool = false;

    #[inline]
    fn position(&self, grid: Vec3) -> Vec3 {
        let (sin_x, cos_x) = self.sin_cos(grid[0] * self.per_radius);
        let (sin_y, cos_y) = self.sin_cos(grid[1] * self.per_radius);
        let r = self.radius_km - grid[2];
        [r * cos_y * cos_x, r * cos_y * sin_x, r * sin_y]
    }

    #[inline]
    fn tangents(&self, grid: Vec3) -> [Vec3; 3] {
        let (sin_x, cos_x) = self.sin_cos(grid[0] * self.per_radius);
        let (sin_y, cos_y) = self.sin_cos(grid[1] * self.per_radius);
        let scale = (self.radius_km - grid[2]) * self.per_radius;
        [
            [-scale * cos_y * sin_x, scale * cos_y * cos_x, 0.0],
            [
                -scale * sin_y * cos_x,
                -scale * sin_y * sin_x,
                scale * cos_y,
            ],
            [-cos_y * cos_x, -cos_y * sin_x, -sin_y],
        ]
    }

    #[inline]
    fn coordinates(&self, position: Vec3) -> Vec3 {
        let r = norm(position);
        [
            position[1].atan2(position[0]) * self.radius_km,
            (position[2] / r).asin() * self.radius_km,
            self.radius_km - r,
        ]
    }

    fn crossings(&self, axis: usize, value: f64, from: Vec3, step: Vec3) -> [f64; 2] {
        match axis {
            0 => {
                let (sin_x, cos_x) = self.sin_cos(value * self.per_radius);
                let along = cos_x * step[1] - sin_x * step[0];
                if along == 0.0 {
                    return [f64::NAN; 2];
                }
                [(sin_x * from[0] - cos_x * from[1]) / along, f64::NAN]
            }
            1 => {
                let (sin_y, _) = self.sin_cos(value * self.per_radius);
                if sin_y.abs() < EQUATOR {
                    // The cone is a plane; squaring would double its only root.
                    return [-from[2] / step[2], f64::NAN];
                }
                let square = sin_y * sin_y;
                let roots = quadratic_roots(
                    step[2] * step[2] - square * dot(step, step),
                    from[2] * step[2] - square * dot(from, step),
                    from[2] * from[2] - square * dot(from, from),
                );
                // Squaring joined the cones of ±y: keep the right one.
                roots.map(|t| {
                    let height = from[2] + t * step[2];
                    if height * sin_y >= 0.0 { t } else { f64::NAN }
                })
            }
            _ => {
                let r = self.radius_km - value;
                quadratic_roots(dot(step, step), dot(from, step), dot(from, from) - r * r)
            }
        }
    }

    fn extremum(&self, axis: usize, from: Vec3, step: Vec3) -> Option<f64> {
        let (numerator, denominator) = match axis {
            0 => return None,
            // d/dt of height over radius vanishes.
            1 => (
                from[2] * dot(from, step) - step[2] * dot(from, from),
                step[2] * dot(from, step) - from[2] * dot(step, step),
            ),
            _ => (-dot(from, step), dot(step, step)),
        };
        (denominator != 0.0).then(|| numerator / denominator)
    }
}

/// Roots of `a t² + 2 b t + c`, NaN where there are none.
fn quadratic_roots(a: f64, b: f64, c: f64) -> [f64; 2] {
    if a == 0.0 {
        return [-c / (2.0 * b), f64::NAN];
    }
    let discriminant = b * b - a * c;
    if discriminant < 0.0 {
        return [f64::NAN; 2];
    }
    let far = -(b + discriminant.sqrt().copysign(b));
    if far == 0.0 {
        return [0.0, f64::NAN];
    }
    [far / a, c / far]
}
