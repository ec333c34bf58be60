//! A fan of rays of one phase from one source depth to many receiver radii:
//! [`Fan`], sampled so that travel between neighbours is a smooth curve.

use super::route::Route;
use super::shell::Travel;

/// Steps per branch of the travel-time curve.
const STEPS: usize = 8;

/// Distance between a sampled ray parameter and the critical one beside it,
/// relative, so that the sample falls on the intended side.
const NUDGE: f64 = 1e-12;

/// One branch: rays of falling parameter and their travel to every receiver.
#[derive(Debug, Clone)]
pub(super) struct Branch {
    /// Ray parameter of each sample, s/rad.
    pub(super) ray_parameter_s: Vec<f64>,
    /// Sample by sample, receiver by receiver.
    travel: Vec<Travel>,
}

/// The branches of a fan.
#[derive(Debug, Clone)]
pub(super) struct Fan {
    pub(super) branches: Vec<Branch>,
    receiver_count: usize,
}

/// Two neighbouring rays of a branch as one receiver sees them: between them
/// the time is a cubic in distance whose slopes are the ray parameters.
#[derive(Debug, Clone, Copy)]
pub(super) struct Gap {
    pub(super) from: Travel,
    pub(super) to: Travel,
    pub(super) ray_parameter_s: (f64, f64),
}

impl Fan {
    /// Samples a route for rising receiver radii, leaving out branches that lie
    /// wholly before or beyond the window of distance (rad).
    pub(super) fn new(route: &Route<'_>, receivers_km: &[f64], window_rad: (f64, f64)) -> Self {
        let critical = route.critical_s(receivers_km);
        let branches = critical
            .windows(2)
            .filter_map(|pair| {
                let branch = Branch::sample(route, receivers_km, (pair[0], pair[1]), 2)?;
                branch
                    .touches(window_rad)
                    .then(|| Branch::sample(route, receivers_km, (pair[0], pair[1]), STEPS))?
            })
            .collect();
        Self {
            branches,
            receiver_count: receivers_km.len(),
        }
    }

    /// Every pair of neighbouring rays that reach a receiver.
    pub(super) fn gaps(&self, receiver: usize) -> impl Iterator<Item = Gap> + '_ {
        let count = self.receiver_count;
        self.branches.iter().flat_map(move |branch| {
            let at = move |sample: usize| branch.travel[sample * count + receiver];
            (1..branch.ray_parameter_s.len())
                .map(move |sample| Gap {
                    from: at(sample - 1),
                    to: at(sample),
                    ray_parameter_s: (
                        branch.ray_parameter_s[sample - 1],
                        branch.ray_parameter_s[sample],
                    ),
                })
                .filter(|gap| gap.width_rad().abs() > 0.0)
        })
    }
}

impl Branch {
    /// Samples the ray parameters between two critical ones, denser towards the
    /// upper, where distance varies as the square root of the parameter.
    /// `None` if no ray takes the route there.
    fn sample(
        route: &Route<'_>,
        receivers_km: &[f64],
        (high_s, low_s): (f64, f64),
        steps: usize,
    ) -> Option<Self> {
        let inside = |p: f64| p.clamp(low_s * (1.0 + NUDGE), high_s * (1.0 - NUDGE));
        let ray_parameter_s: Vec<f64> = (0..=steps)
            .map(|step| inside(high_s - (high_s - low_s) * (step as f64 / steps as f64).powi(2)))
            .collect();
        route.start(ray_parameter_s[steps / 2])?;
        let count = receivers_km.len();
        let mut travel = vec![Travel::NONE; (steps + 1) * count];
        for (p, row) in ray_parameter_s.iter().zip(travel.chunks_exact_mut(count)) {
            route.travel(*p, receivers_km, row);
        }
        Some(Self {
            ray_parameter_s,
            travel,
        })
    }

    /// Whether any ray lands inside the window, or rays land on both sides.
    fn touches(&self, (nearest, farthest): (f64, f64)) -> bool {
        let before = self.travel.iter().any(|ray| ray.angle_rad <= farthest);
        let beyond = self.travel.iter().any(|ray| ray.angle_rad >= nearest);
        before && beyond
    }
}

impl Gap {
    /// Distance between the two rays, negative on a retrograde branch, rad.
    pub(super) fn width_rad(&self) -> f64 {
        self.to.angle_rad - self.from.angle_rad
    }

    /// Time and its first and second derivative by distance on the cubic.
    pub(super) fn curve(&self, distance_rad: f64) -> [f64; 3] {
        let width = self.width_rad();
        let u = (distance_rad - self.from.angle_rad) / width;
        let rise = self.to.time_s - self.from.time_s;
        let (start, end) = (
            self.ray_parameter_s.0 * width,
            self.ray_parameter_s.1 * width,
        );
        // T = T0 + start u + b u² + c u³.
        let b = 3.0 * rise - 2.0 * start - end;
        let c = start + end - 2.0 * rise;
        [
            self.from.time_s + u * (start + u * (b + u * c)),
            (start + u * (2.0 * b + 3.0 * u * c)) / width,
            (2.0 * b + 6.0 * u * c) / (width * width),
        ]
    }
}
