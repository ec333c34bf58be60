//! A fan of rays of one phase from one source depth to many receiver radii:
//! [`Fan`], sampled so that travel between neighbours is a smooth curve.

use std::f64::consts::PI;

use super::route::{NUDGE, Route};
use super::shell::Travel;

/// Steps per branch of the travel-time curve, for each [`SPREAD`] of its rays.
const STEPS: usize = 8;

/// Relative range of ray parameters that [`STEPS`] suffice for.
const SPREAD: f64 = 0.02;

/// Rays on the two sides of a critical ray parameter that land closer than this
/// belong to one curve, rad. Across a shadow zone they land far apart.
const JOIN_RAD: f64 = 1e-5;

/// Rays closer than this give their slope by their parameters alone, rad.
const NARROW_RAD: f64 = 1e-4;

/// Branches that end this close to the window of distance are kept, rad.
const MARGIN_RAD: f64 = 0.02;

/// Rays of falling parameter, gathered in branches.
#[derive(Debug, Clone, Default)]
pub(super) struct Fan {
    /// Ray parameter of each sample, s/rad.
    ray_parameter_s: Vec<f64>,
    /// Whether a sample is the first of its branch.
    begins: Vec<bool>,
    /// Sample by sample, receiver by receiver.
    travel: Vec<Travel>,
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
        let mut fan = Self {
            receiver_count: receivers_km.len(),
            ..Self::default()
        };
        if let Some(grazing_s) = route.grazing_s {
            fan.push(diffracted(route, receivers_km, grazing_s));
            return fan;
        }
        for pair in route.critical_s(receivers_km).windows(2) {
            let range = (pair[0], pair[1]);
            if route.start(f64::midpoint(range.0, range.1)).is_none() {
                continue;
            }
            let coarse = branch(route, receivers_km, range, 2);
            if touches(&coarse.1, window_rad) {
                let spreads = ((range.0 - range.1) / (SPREAD * range.0)).ceil();
                fan.push(branch(route, receivers_km, range, STEPS * spreads as usize));
            }
        }
        fan
    }

    fn push(&mut self, (ray_parameter_s, travel): (Vec<f64>, Vec<Travel>)) {
        self.begins
            .extend((0..ray_parameter_s.len()).map(|sample| sample == 0));
        self.ray_parameter_s.extend(ray_parameter_s);
        self.travel.extend(travel);
    }

    /// Every pair of neighbouring rays that reach a receiver.
    pub(super) fn gaps(&self, receiver: usize) -> impl Iterator<Item = Gap> + '_ {
        let at = move |sample: usize| self.travel[sample * self.receiver_count + receiver];
        (1..self.ray_parameter_s.len()).filter_map(move |sample| {
            let gap = Gap {
                from: at(sample - 1),
                to: at(sample),
                ray_parameter_s: (
                    self.ray_parameter_s[sample - 1],
                    self.ray_parameter_s[sample],
                ),
            };
            let joined = !self.begins[sample] || gap.bridges();
            (joined && gap.width_rad().abs() > 0.0).then_some(gap)
        })
    }
}

/// Samples the ray parameters between two critical ones, denser towards the
/// upper, where distance varies as the square root of the parameter.
fn branch(
    route: &Route<'_>,
    receivers_km: &[f64],
    (high_s, low_s): (f64, f64),
    steps: usize,
) -> (Vec<f64>, Vec<Travel>) {
    let inside = |p: f64| p.clamp(low_s * (1.0 + NUDGE), high_s * (1.0 - NUDGE));
    let ray_parameter_s: Vec<f64> = (0..=steps)
        .map(|step| inside(high_s - (high_s - low_s) * (step as f64 / steps as f64).powi(2)))
        .collect();
    let count = receivers_km.len();
    let mut travel = vec![Travel::NONE; (steps + 1) * count];
    for (p, row) in ray_parameter_s.iter().zip(travel.chunks_exact_mut(count)) {
        route.travel(*p, receivers_km, row);
    }
    (ray_parameter_s, travel)
}

/// The grazing ray, and the same after it ran along the boundary to the antipode.
fn diffracted(route: &Route<'_>, receivers_km: &[f64], grazing_s: f64) -> (Vec<f64>, Vec<Travel>) {
    let mut nearest = vec![Travel::NONE; receivers_km.len()];
    route.travel(grazing_s, receivers_km, &mut nearest);
    let farthest: Vec<Travel> = nearest
        .iter()
        .map(|ray| Travel {
            angle_rad: PI,
            time_s: ray.time_s + grazing_s * (PI - ray.angle_rad),
        })
        .collect();
    (vec![grazing_s; 2], [nearest, farthest].concat())
}

/// Whether any ray lands inside the window, or rays land on both sides.
fn touches(travel: &[Travel], (nearest, farthest): (f64, f64)) -> bool {
    let before = |ray: &Travel| ray.angle_rad <= farthest + MARGIN_RAD;
    let beyond = |ray: &Travel| ray.angle_rad >= nearest - MARGIN_RAD;
    travel.iter().any(before) && travel.iter().any(beyond)
}

impl Gap {
    /// Distance between the two rays, negative on a retrograde branch, rad.
    pub(super) fn width_rad(&self) -> f64 {
        self.to.angle_rad - self.from.angle_rad
    }

    /// Whether the two rays lie on the two sides of one critical ray parameter
    /// across which travel is continuous.
    fn bridges(&self) -> bool {
        let (high, low) = self.ray_parameter_s;
        high - low <= 4.0 * NUDGE * high && self.width_rad().abs() < JOIN_RAD
    }

    /// Whether a distance lies between the two rays.
    pub(super) fn holds(&self, distance_rad: f64) -> bool {
        (self.from.angle_rad - distance_rad) * (self.to.angle_rad - distance_rad) <= 0.0
    }

    /// Time and its first and second derivative by distance on the cubic.
    pub(super) fn curve(&self, distance_rad: f64) -> [f64; 3] {
        let width = self.width_rad();
        if width.abs() < NARROW_RAD {
            return self.parabola(distance_rad);
        }
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

    /// The same for rays so close that rounding would spoil the cubic: times
    /// that follow from the ray parameters alone.
    fn parabola(&self, distance_rad: f64) -> [f64; 3] {
        let (start, end) = self.ray_parameter_s;
        let step = distance_rad - self.from.angle_rad;
        let bend = if self.bridges() {
            0.0
        } else {
            (end - start) / self.width_rad()
        };
        [
            self.from.time_s + step * (start + 0.5 * bend * step),
            start + bend * step,
            bend,
        ]
    }
}
