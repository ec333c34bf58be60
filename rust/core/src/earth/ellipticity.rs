//! The change of travel times that the Earth's ellipticity brings:
//! [`ellipticity_s`].

use std::sync::LazyLock;

use rayon::prelude::*;

use super::hydrostatic::EllipticityProfile;
use super::layered::LayeredEarth;
use super::phase::Phase;
use super::radial::Ending;
use super::route::{Route, Span};
use super::shell::{GAUSS_NODES, GAUSS_WEIGHTS, Path, Travel};
use crate::error::{CoreError, Result};

/// Smallest ray parameter followed, s/rad.
const LEAST_PARAMETER_S: f64 = 1e-6;

/// Sources from which rays set out, and how far these go.
#[derive(Debug, Clone, Copy)]
pub struct Departures<'a> {
    /// Depth of each source, km.
    pub source_depth_km: &'a [f64],
    /// Geocentric latitude of each source, rad.
    pub latitude_rad: &'a [f64],
    /// Azimuth of each ray at its source, rad.
    pub azimuth_rad: &'a [f64],
    /// Angle between source and receiver, rad.
    pub distance_rad: &'a [f64],
}

/// Change of travel time that ellipticity brings to rays that end at sea level,
/// s; NaN where the ray parameter is NaN or no ray's.
///
/// First order in the ellipticity, along the ray of the spherical Earth
/// (Dziewonski & Gilbert 1976): with f = (2/3) ε(r) P₂(cos θ) and
/// q = √(r²/v² − p²), δt = Σ over stretches −[f q] from bottom to top
/// − ∫ (r v′/v) f dT.
///
/// # Errors
/// [`CoreError::Invalid`] if lengths differ or a source lies outside the mantle.
pub fn ellipticity_s(
    earth: &LayeredEarth,
    profile: &EllipticityProfile,
    phase: &Phase,
    departures: Departures<'_>,
    ray_parameter_s: &[f64],
) -> Result<Vec<f64>> {
    let count = ray_parameter_s.len();
    let lengths = [
        departures.source_depth_km.len(),
        departures.latitude_rad.len(),
        departures.azimuth_rad.len(),
        departures.distance_rad.len(),
    ];
    if lengths.iter().any(|&length| length != count) {
        return Err(CoreError::invalid(
            "depths, latitudes, azimuths and distances",
            format!("{count}, one per ray parameter"),
            format!("{lengths:?}"),
        ));
    }
    (0..count)
        .into_par_iter()
        .map(|i| {
            let route = earth.route(phase, departures.source_depth_km[i])?;
            let (latitude, azimuth) = (departures.latitude_rad[i], departures.azimuth_rad[i]);
            let mut walk = Walk {
                profile,
                poleward: [latitude.sin(), latitude.cos() * azimuth.cos()],
                angle_rad: 0.0,
                delay_s: 0.0,
            };
            // A ray through the very centre turns at a point; one beside it does not.
            let ray_parameter = match ray_parameter_s[i] {
                p if p < LEAST_PARAMETER_S => LEAST_PARAMETER_S,
                p => p,
            };
            let receiver_km = earth.radius_km();
            walk.follow(
                &route,
                ray_parameter,
                receiver_km,
                departures.distance_rad[i],
            );
            Ok(walk.delay_s)
        })
        .collect()
}

/// A walk along a ray from its source that gathers δt.
struct Walk<'a> {
    profile: &'a EllipticityProfile,
    /// cos θ = first · cos φ + second · sin φ at the angle φ from the source.
    poleward: [f64; 2],
    angle_rad: f64,
    delay_s: f64,
}

impl Walk<'_> {
    fn follow(
        &mut self,
        route: &Route<'_>,
        ray_parameter: f64,
        receiver_km: f64,
        distance_rad: f64,
    ) {
        let last = Span {
            upper_km: receiver_km,
            ..route.last
        };
        for span in &route.fixed {
            self.cross(span, ray_parameter);
        }
        if route.grazing_s.is_some() {
            let mut grazing = [Travel::NONE];
            route.travel(ray_parameter, &[receiver_km], &mut grazing);
            let arc_rad = distance_rad - grazing[0].angle_rad;
            self.glide(ray_parameter, last.lower_km, arc_rad);
        }
        self.cross(&last, ray_parameter);
    }

    /// Adds a span of the route; NaN if the ray does not take it.
    fn cross(&mut self, span: &Span<'_>, ray_parameter: f64) {
        let Some(mut paths) = span_paths(span, ray_parameter) else {
            self.delay_s = f64::NAN;
            return;
        };
        if span.rises {
            paths.reverse();
        }
        for path in &paths {
            self.pass(path, span.rises);
        }
    }

    /// Adds an arc along a boundary, on which dT = p dΔ: −∫ f dT.
    fn glide(&mut self, ray_parameter: f64, radius_km: f64, arc_rad: f64) {
        for (node, weight) in GAUSS_NODES.iter().zip(GAUSS_WEIGHTS) {
            let shift = self.shift(radius_km, self.angle_rad + node * arc_rad);
            self.delay_s -= weight * ray_parameter * arc_rad * shift;
        }
        self.angle_rad += arc_rad;
    }

    /// Adds one stretch of ray inside a shell.
    fn pass(&mut self, path: &Path, rises: bool) {
        let angles = path.angles();
        let total = angles[GAUSS_NODES.len()];
        let away = |from_bottom: f64| {
            let travelled = if rises {
                from_bottom
            } else {
                total - from_bottom
            };
            self.angle_rad + travelled
        };
        let (bottom_km, top_km) = path.ends_km();
        let mut delay_s = path.steepness_s(bottom_km) * self.shift(bottom_km, away(0.0))
            - path.steepness_s(top_km) * self.shift(top_km, away(total));
        for ((node, weight), angle) in GAUSS_NODES.iter().zip(GAUSS_WEIGHTS).zip(angles) {
            let (radius, velocity, density) = path.at(*node);
            let steps_s = weight * density * radius * radius;
            delay_s -= radius * path.gradient_per_s() / velocity
                * self.shift(radius, away(angle))
                * steps_s;
        }
        self.delay_s += delay_s;
        self.angle_rad += total;
    }

    /// f = (2/3) ε P₂(cos θ): the fraction by which the surface of equal
    /// velocity lies below the sphere.
    fn shift(&self, radius_km: f64, angle_rad: f64) -> f64 {
        let (sine, cosine) = angle_rad.sin_cos();
        let cos_colatitude = self.poleward[0] * cosine + self.poleward[1] * sine;
        self.profile.at(radius_km) * (cos_colatitude * cos_colatitude - 1.0 / 3.0)
    }
}

/// The stretches of a ray in the shells of a span, from the top down; `None` if
/// the ray does not take it.
fn span_paths(span: &Span<'_>, ray_parameter: f64) -> Option<Vec<Path>> {
    let (_, ending) = span
        .model
        .descend(ray_parameter, span.upper_km, span.lower_km);
    let ((Ending::Turned(end), true) | (Ending::Reached(end), false)) = (ending, span.turns) else {
        return None;
    };
    let paths = span.model.shells()[..=end].iter().flat_map(|shell| {
        let low_km = shell.bottom_km.max(span.lower_km);
        shell.paths(ray_parameter, low_km, shell.top_km.min(span.upper_km))
    });
    Some(paths.collect())
}

/// ∫ from 0 to each Gauss-Legendre node of the polynomial through the nodes:
/// row by row, the factors of its values there.
static PARTIAL_WEIGHTS: LazyLock<[[f64; 8]; 8]> = LazyLock::new(|| {
    let lagrange = |j: usize, x: f64| {
        (0..8)
            .filter(|&i| i != j)
            .map(|i| (x - GAUSS_NODES[i]) / (GAUSS_NODES[j] - GAUSS_NODES[i]))
            .product::<f64>()
    };
    std::array::from_fn(|k| {
        let end = GAUSS_NODES[k];
        std::array::from_fn(|j| {
            let values = GAUSS_NODES.iter().zip(GAUSS_WEIGHTS);
            values
                .map(|(x, weight)| weight * end * lagrange(j, x * end))
                .sum()
        })
    })
});

impl Path {
    /// Angle from the lower end to each Gauss-Legendre node, and to the upper end.
    fn angles(&self) -> [f64; 9] {
        let rates = GAUSS_NODES.map(|node| {
            let (_, velocity, density) = self.at(node);
            self.ray_parameter_s() * velocity * velocity * density
        });
        let sum = |weights: &[f64; 8]| weights.iter().zip(rates).map(|(w, rate)| w * rate).sum();
        let mut angles = [0.0; 9];
        for (angle, weights) in angles.iter_mut().zip(PARTIAL_WEIGHTS.iter()) {
            *angle = sum(weights);
        }
        angles[8] = sum(&GAUSS_WEIGHTS);
        angles
    }
}
