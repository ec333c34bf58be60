//! The ray integrals of one spherical shell: [`Shell`].

use std::f64::consts::FRAC_PI_2;
use std::ops::{Add, AddAssign};

/// Nodes of the 8-point Gauss-Legendre rule on 0..1 (Abramowitz & Stegun 1964,
/// table 25.4).
pub(super) const GAUSS_NODES: [f64; 8] = [
    0.019_855_071_751_231_856,
    0.101_666_761_293_186_64,
    0.237_233_795_041_835_5,
    0.408_282_678_752_175_1,
    0.591_717_321_247_825,
    0.762_766_204_958_164_5,
    0.898_333_238_706_813_4,
    0.980_144_928_248_768_1,
];

/// Weights that belong to [`GAUSS_NODES`].
pub(super) const GAUSS_WEIGHTS: [f64; 8] = [
    0.050_614_268_145_188_13,
    0.111_190_517_226_687_24,
    0.156_853_322_938_943_64,
    0.181_341_891_689_181,
    0.181_341_891_689_181,
    0.156_853_322_938_943_64,
    0.111_190_517_226_687_24,
    0.050_614_268_145_188_13,
];

/// Largest ratio of the radii between which one set of nodes suffices.
const WIDEST: f64 = 3.0;

/// Below this radius stretches are not divided any further, km.
const INNERMOST_KM: f64 = 1e-6;

/// Angle and time that a ray spends between two radii.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Travel {
    /// Angle at the Earth's centre, radians.
    pub angle_rad: f64,
    /// Time, seconds.
    pub time_s: f64,
}

impl Travel {
    /// The mark of a ray that does not exist.
    pub const NONE: Self = Self {
        angle_rad: f64::NAN,
        time_s: f64::NAN,
    };
}

impl Add for Travel {
    type Output = Self;

    fn add(self, other: Self) -> Self {
        Self {
            angle_rad: self.angle_rad + other.angle_rad,
            time_s: self.time_s + other.time_s,
        }
    }
}

impl AddAssign for Travel {
    fn add_assign(&mut self, other: Self) {
        *self = *self + other;
    }
}

/// A spherical shell with a velocity linear in radius, v = α + β r.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Shell {
    /// Inner radius, km.
    pub bottom_km: f64,
    /// Outer radius, km.
    pub top_km: f64,
    /// α, km/s.
    intercept_km_s: f64,
    /// β, 1/s.
    gradient_per_s: f64,
}

impl Shell {
    /// The shell between `(radius in km, velocity in km/s)` below and above.
    pub(super) fn new(bottom: (f64, f64), top: (f64, f64)) -> Self {
        let gradient_per_s = (top.1 - bottom.1) / (top.0 - bottom.0);
        Self {
            bottom_km: bottom.0,
            top_km: top.0,
            intercept_km_s: bottom.1 - gradient_per_s * bottom.0,
            gradient_per_s,
        }
    }

    /// Velocity at a radius, km/s.
    #[must_use]
    pub fn velocity_km_s(&self, radius_km: f64) -> f64 {
        self.intercept_km_s + self.gradient_per_s * radius_km
    }

    /// η = r/v, the ray parameter of a ray that is horizontal at this radius, s/rad.
    #[must_use]
    pub fn horizontal_s(&self, radius_km: f64) -> f64 {
        radius_km / self.velocity_km_s(radius_km)
    }

    /// r − p v, positive where a ray of parameter p can be. Linear in r.
    pub(super) fn clearance_km(&self, ray_parameter: f64, radius_km: f64) -> f64 {
        radius_km - ray_parameter * self.velocity_km_s(radius_km)
    }

    /// Angle and time between the radii `low_km` (or the turning point above
    /// it) and `high_km`; zero if the ray does not reach up to `high_km`.
    ///
    /// Δ = ∫ p v / (r √(r² − p²v²)) dr and T = ∫ r / (v √(r² − p²v²)) dr
    /// (Aki & Richards 2002, chapter 9).
    #[must_use]
    pub fn cross(&self, ray_parameter: f64, low_km: f64, high_km: f64) -> Travel {
        if is_deep(low_km, high_km) {
            return self.cross_deep(ray_parameter, low_km, high_km);
        }
        self.path(ray_parameter, low_km, high_km)
            .map_or_else(Travel::default, |path| path.travel())
    }

    /// The same in several stretches.
    #[cold]
    fn cross_deep(&self, ray_parameter: f64, low_km: f64, high_km: f64) -> Travel {
        let mut sum = self
            .paths(ray_parameter, low_km, high_km)
            .fold(Travel::default(), |sum, path| sum + path.travel());
        if ray_parameter == 0.0 && low_km <= 0.0 {
            // The limit of small ray parameters: all of the turn is at the centre.
            sum.angle_rad = FRAC_PI_2;
        }
        sum
    }

    /// ∫ dr/v over the part of the shell that lies between two radii.
    pub(super) fn vertical_s(&self, low_km: f64, high_km: f64) -> f64 {
        let (low_km, high_km) = (low_km.max(self.bottom_km), high_km.min(self.top_km));
        if high_km <= low_km {
            return 0.0;
        }
        let (below, above) = (self.velocity_km_s(low_km), self.velocity_km_s(high_km));
        let contrast = (above - below) / (above + below);
        let stretch = if contrast.abs() < 1e-4 {
            1.0 + contrast * contrast / 3.0
        } else {
            contrast.atanh() / contrast
        };
        2.0 * (high_km - low_km) * stretch / (above + below)
    }

    /// The stretches of ray between two radii, from the top down, each so short
    /// that the integrands are smooth on it.
    pub(super) fn paths(
        &self,
        ray_parameter: f64,
        low_km: f64,
        high_km: f64,
    ) -> impl Iterator<Item = Path> + use<> {
        let shell = *self;
        let mut next_km = Some(high_km);
        std::iter::from_fn(move || {
            let top_km = next_km?;
            let cut_km = if is_deep(low_km, top_km) {
                top_km / WIDEST
            } else {
                low_km
            };
            let path = shell.path(ray_parameter, cut_km, top_km);
            let goes_on = path.is_some_and(|path| path.start_km <= cut_km) && cut_km > low_km;
            next_km = goes_on.then_some(cut_km);
            path
        })
    }

    /// The stretch of ray between two radii, `None` if there is none.
    #[inline]
    fn path(&self, ray_parameter: f64, low_km: f64, high_km: f64) -> Option<Path> {
        let above = self.clearance_km(ray_parameter, high_km);
        if above <= 0.0 || high_km <= low_km {
            return None;
        }
        let below = self.clearance_km(ray_parameter, low_km);
        let (start_km, below) = if below > 0.0 {
            (low_km, below)
        } else {
            let turning_km = low_km - below * (high_km - low_km) / (above - below);
            (turning_km, 0.0)
        };
        Some(Path {
            shell: *self,
            ray_parameter,
            start_km,
            length_km: high_km - start_km,
            root_low: below.sqrt(),
            root_high: above.sqrt(),
        })
    }
}

/// Whether the range between two radii takes more than one set of nodes.
fn is_deep(low_km: f64, high_km: f64) -> bool {
    high_km > low_km.max(INNERMOST_KM) * WIDEST
}

/// A ray between two radii of one shell, in the variable x in 0..1 that is
/// linear in √(r − p v): the turning point's singularity is gone, and nothing
/// is divided by the velocity gradient.
#[derive(Debug, Clone, Copy)]
pub(super) struct Path {
    shell: Shell,
    ray_parameter: f64,
    start_km: f64,
    length_km: f64,
    root_low: f64,
    root_high: f64,
}

impl Path {
    /// The ray's parameter, s/rad.
    pub(super) fn ray_parameter_s(&self) -> f64 {
        self.ray_parameter
    }

    /// Radii of the lower end (the turning point if the ray turns) and the upper, km.
    pub(super) fn ends_km(&self) -> (f64, f64) {
        (self.start_km, self.start_km + self.length_km)
    }

    /// dv/dr, 1/s.
    pub(super) fn gradient_per_s(&self) -> f64 {
        self.shell.gradient_per_s
    }

    /// Angle and time from end to end.
    #[inline]
    fn travel(&self) -> Travel {
        let mut sum = Travel::default();
        for (node, weight) in GAUSS_NODES.iter().zip(GAUSS_WEIGHTS) {
            let (radius, velocity, density) = self.at(*node);
            let scaled = weight * density;
            sum.angle_rad += scaled * velocity * velocity;
            sum.time_s += scaled * radius * radius;
        }
        sum.angle_rad *= self.ray_parameter;
        sum
    }

    /// √(r²/v² − p²), the part of the ray's slowness that points upward times
    /// the radius, s/rad.
    pub(super) fn steepness_s(&self, radius_km: f64) -> f64 {
        let horizontal_s = self.shell.horizontal_s(radius_km);
        let square = (horizontal_s - self.ray_parameter) * (horizontal_s + self.ray_parameter);
        square.max(0.0).sqrt()
    }

    /// r, v and g with dΔ = p v² g dx and dT = r² g dx.
    #[inline]
    pub(super) fn at(&self, x: f64) -> (f64, f64, f64) {
        let both = self.root_low + self.root_high;
        let rise = x * (2.0 * self.root_low + (self.root_high - self.root_low) * x);
        let radius = self.start_km + self.length_km * rise / both;
        let velocity = self.shell.velocity_km_s(radius);
        let root = (radius + self.ray_parameter * velocity).sqrt();
        let density = 2.0 * self.length_km / (both * root * velocity * radius);
        (radius, velocity, density)
    }
}
