//! Exact first arrivals of a phase: [`first_arrivals`].

use rayon::prelude::*;

use super::fan::{Fan, Gap};
use super::layered::LayeredEarth;
use super::phase::Phase;
use super::radial::RadialModel;
use super::route::Route;
use super::shell::Travel;
use crate::error::{CoreError, Result};

/// Time that the exact solution may lack, s.
const TIME_TOLERANCE_S: f64 = 1e-8;

/// Branches this close to the first are compared after their exact solution, s.
const RIVAL_S: f64 = 0.05;

/// Most pairs that share a fan; its cost grows with the square of the number of
/// receiver depths.
const GROUP: usize = 256;

/// A first arrival.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Arrival {
    /// Travel time, s; NaN if the phase does not arrive.
    pub time_s: f64,
    /// Ray parameter, s/rad; NaN if the phase does not arrive.
    pub ray_parameter_s: f64,
}

impl Arrival {
    const NONE: Self = Self {
        time_s: f64::NAN,
        ray_parameter_s: f64::NAN,
    };
}

/// Sources and receivers, one of each per pair.
#[derive(Debug, Clone, Copy)]
pub struct Pairs<'a> {
    /// Angle between source and receiver, rad.
    pub distance_rad: &'a [f64],
    /// Depth of the source, km.
    pub source_depth_km: &'a [f64],
    /// Depth of the receiver, km; negative above sea level.
    pub receiver_depth_km: &'a [f64],
}

/// The first arrival of a phase for every pair, each ray solved for exactly.
///
/// # Errors
/// [`CoreError::Invalid`] if lengths differ or a depth lies outside the mantle.
/// A distance that is not a number gives no arrival.
pub fn first_arrivals(
    earth: &LayeredEarth,
    phase: &Phase,
    pairs: Pairs<'_>,
) -> Result<Vec<Arrival>> {
    let count = check(earth, pairs)?;
    let source = |pair: usize| pairs.source_depth_km[pair];
    let receiver = |pair: usize| pairs.receiver_depth_km[pair];
    let mut order: Vec<usize> = (0..count).collect();
    order.sort_by(|&a, &b| {
        let sources = source(a).total_cmp(&source(b));
        sources.then(receiver(a).total_cmp(&receiver(b)))
    });
    let groups: Vec<&[usize]> = order
        .chunk_by(|&a, &b| source(a).total_cmp(&source(b)).is_eq())
        .flat_map(|group| group.chunks(GROUP))
        .collect();
    let solved: Vec<Vec<Arrival>> = groups
        .par_iter()
        .map(|group| {
            let route = earth.route(phase, source(group[0]))?;
            Ok(group_arrivals(&route, pairs, group))
        })
        .collect::<Result<_>>()?;
    let mut arrivals = vec![Arrival::NONE; count];
    for (pair, arrival) in order.iter().zip(solved.into_iter().flatten()) {
        arrivals[*pair] = arrival;
    }
    Ok(arrivals)
}

fn check(earth: &LayeredEarth, pairs: Pairs<'_>) -> Result<usize> {
    let count = pairs.distance_rad.len();
    if pairs.source_depth_km.len() != count || pairs.receiver_depth_km.len() != count {
        return Err(CoreError::invalid(
            "depths",
            format!("{count} for sources and receivers, one per distance"),
            format!(
                "{} and {}",
                pairs.source_depth_km.len(),
                pairs.receiver_depth_km.len()
            ),
        ));
    }
    let mantle: &RadialModel = &earth.mantle(super::Wave::P);
    for (source, receiver) in pairs.source_depth_km.iter().zip(pairs.receiver_depth_km) {
        mantle.check_depth("source depth", *source)?;
        mantle.check_depth("receiver depth", *receiver)?;
    }
    Ok(count)
}

/// Arrivals of some pairs of one source depth.
fn group_arrivals(route: &Route<'_>, pairs: Pairs<'_>, group: &[usize]) -> Vec<Arrival> {
    let radius_km = route.last.model.radius_km();
    let receiver = |pair: usize| radius_km - pairs.receiver_depth_km[pair];
    let mut receivers_km: Vec<f64> = group.iter().map(|&pair| receiver(pair)).collect();
    receivers_km.sort_by(f64::total_cmp);
    receivers_km.dedup();
    let distances = group.iter().map(|&pair| pairs.distance_rad[pair]);
    let window = distances.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), x| {
        (low.min(x), high.max(x))
    });
    let fan = Fan::new(route, &receivers_km, window);
    group
        .iter()
        .map(|&pair| {
            let index = receivers_km.partition_point(|&r| r < receiver(pair));
            let solver = Solver {
                route,
                receiver_km: receivers_km[index],
                distance_rad: pairs.distance_rad[pair],
            };
            solver.first(&fan, index)
        })
        .collect()
}

/// One pair, and the route between its ends.
struct Solver<'a> {
    route: &'a Route<'a>,
    receiver_km: f64,
    distance_rad: f64,
}

impl Solver<'_> {
    /// The earliest arrival over all branches.
    fn first(&self, fan: &Fan, receiver: usize) -> Arrival {
        let candidates: Vec<Gap> = fan
            .gaps(receiver)
            .filter(|gap| gap.holds(self.distance_rad))
            .collect();
        let time = |gap: &Gap| gap.curve(self.distance_rad)[0];
        let earliest = candidates.iter().map(time).fold(f64::INFINITY, f64::min);
        candidates
            .iter()
            .filter(|gap| time(gap) <= earliest + RIVAL_S)
            .map(|gap| self.solve(gap))
            .min_by(|a, b| a.time_s.total_cmp(&b.time_s))
            .unwrap_or(Arrival::NONE)
    }

    fn travel(&self, ray_parameter: f64) -> Travel {
        let mut out = [Travel::NONE];
        self.route
            .travel(ray_parameter, &[self.receiver_km], &mut out);
        out[0]
    }

    /// Solves Δ(p) = distance between two rays that land on either side of it,
    /// by Newton's method kept inside the bracket.
    fn solve(&self, gap: &Gap) -> Arrival {
        const MOST_STEPS: usize = 60;
        let [_, mut p, bend] = gap.curve(self.distance_rad);
        let (mut high, mut low) = gap.ray_parameter_s;
        let high_is_beyond = gap.from.angle_rad > self.distance_rad;
        let mut best = Arrival::NONE;
        for _ in 0..MOST_STEPS {
            if !(low..=high).contains(&p) {
                p = f64::midpoint(low, high);
            }
            let travel = self.travel(p);
            let miss = self.distance_rad - travel.angle_rad;
            // T + p (x − Δ) = τ + p x has its extremum at the solution.
            best = Arrival {
                time_s: travel.time_s + p * miss,
                ray_parameter_s: p,
            };
            let narrow = (high - low) * miss.abs();
            if narrow < TIME_TOLERANCE_S || (bend * miss * miss).abs() < TIME_TOLERANCE_S {
                break;
            }
            if (miss < 0.0) == high_is_beyond {
                high = p;
            } else {
                low = p;
            }
            p += bend * miss;
        }
        best
    }
}
